"""Names of channels: what the study calls Cz stands in files as EEG Cz, CZ or Cz-A1, as each rig has it."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence


def labels_for(name: str, labels: Sequence[str], aliases: Mapping[str, tuple[str, ...]]) -> tuple[str, ...]:
    """Return the labels of a file that mean a channel of the study.

    Parameters
    ----------
    name : str
        The channel as the study calls it.
    labels : sequence of str
        Labels as they stand in the file.
    aliases : mapping of str to tuple of str
        Name used in the study to labels in files.

    Returns
    -------
    tuple of str
        The name itself wherever it stands in the file, else every label that is an alias of it: one if all is
        well, several where it cannot be told which is meant.
    """
    exact = tuple(label for label in labels if label == name)
    if exact or name not in aliases:
        return exact
    return tuple(label for label in labels if label in aliases[name])
