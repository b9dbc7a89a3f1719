"""The doors of this package: `inspect` a file, `read` a signal; the suffix picks the format."""

from __future__ import annotations

from typing import TYPE_CHECKING

from bandcairn.recordings import delimited, edf
from bandcairn.recordings.refusal import refusal

if TYPE_CHECKING:
    from pathlib import Path

    from bandcairn.recordings.declared import Declared
    from bandcairn.recordings.raw import RawSignal
    from bandcairn.signal import FileFacts

_EDF_SUFFIXES = (".edf", ".bdf")
_DELIMITED_SUFFIXES = (".csv", ".tsv")
SUFFIXES = _EDF_SUFFIXES + _DELIMITED_SUFFIXES


def is_delimited(path: Path) -> bool:
    """Return whether `path` is delimited text rather than EDF or BDF; refused if it is neither."""
    suffix = path.suffix.lower()
    if suffix not in SUFFIXES:
        found = f"the suffix {path.suffix or '(none)'}"
        raise refusal(path, found, ", ".join(SUFFIXES), "Export the recording in one of these formats.")
    return suffix in _DELIMITED_SUFFIXES


def inspect(path: Path) -> FileFacts:
    """Return what a file says of itself; samples are not read.

    Parameters
    ----------
    path : Path
        ``.edf``, ``.bdf``, ``.csv`` or ``.tsv``, in any case.

    Returns
    -------
    FileFacts
        Annotation channels and the Status channel of BDF are left out. Delimited text states a rate only
        by a column ``time_s``, and no unit.

    Raises
    ------
    RecordingError
        If the file cannot be read or contradicts itself.
    """
    if is_delimited(path):
        return delimited.inspect_delimited(path)
    return edf.inspect_edf(path)


def read(
    path: Path, labels: tuple[str, ...], declared: Declared, start_s: float | None, stop_s: float | None
) -> RawSignal:
    """Read channels that share one rate.

    Parameters
    ----------
    path : Path
        ``.edf``, ``.bdf``, ``.csv`` or ``.tsv``, in any case.
    labels : tuple of str
        Channels as the file names them; at least one.
    declared : Declared
        Rate and unit of delimited text; EDF and BDF state theirs, and the declaration is not looked at.
    start_s, stop_s : float or None
        Cut, in seconds from the first sample: samples with start <= time < stop. None: from the start, to
        the end.

    Returns
    -------
    RawSignal
        Values as stored, with gain and offset to microvolt.

    Raises
    ------
    RecordingError
        If the file, a channel, a unit, a rate, a value or the cut is at fault; nothing is adjusted.
    """
    if is_delimited(path):
        return delimited.read_delimited(path, labels, declared, start_s, stop_s)
    return edf.read_edf(path, labels, start_s, stop_s)
