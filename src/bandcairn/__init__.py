"""From EEG, ECG and surface EMG recordings to the feature table and the group statistics of a paper."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from bandcairn.api import Study

__all__ = ["Study"]


def __getattr__(name: str) -> object:
    # The public class is loaded when it is asked for: planning a study must not load the libraries that compute it.
    if name == "Study":
        from bandcairn.api import Study

        return Study
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
