"""What the study declares for files that state neither rate nor unit."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from fractions import Fraction


@dataclass(frozen=True, slots=True)
class Declared:
    """Declaration for delimited text.

    Attributes
    ----------
    rate_hz : Fraction or None
        Sampling rate; needed unless the file has a column ``time_s``.
    unit : str or None
        Unit of all channels; needed, for the file states none.
    """

    rate_hz: Fraction | None = None
    unit: str | None = None
