"""The doors of this package: `inspect` a file, `read` a signal; the suffix picks the format."""

from __future__ import annotations

from typing import TYPE_CHECKING, Literal

from bandcairn.recordings import converted, delimited, edf, parquet
from bandcairn.recordings.brainvision import companions_of
from bandcairn.recordings.refusal import refusal
from bandcairn.recordings.table import inspect_table, read_table

if TYPE_CHECKING:
    from pathlib import Path

    from bandcairn.recordings.declared import Declared
    from bandcairn.recordings.raw import RawSignal
    from bandcairn.recordings.table import Table
    from bandcairn.signal import FileFacts

_EDF_SUFFIXES = (".edf", ".bdf")
_TABLE_SUFFIXES = (".csv", ".tsv", ".parquet")
SUFFIXES = (*_EDF_SUFFIXES, *_TABLE_SUFFIXES, *converted.CONVERTED_SUFFIXES)


def family_of(path: Path) -> Literal["edf", "table", "converted"]:
    """Return how `path` is read, by its suffix; refused if there is no way."""
    suffix = path.suffix.lower()
    if suffix in _EDF_SUFFIXES:
        return "edf"
    if suffix in _TABLE_SUFFIXES:
        return "table"
    if suffix in converted.CONVERTED_SUFFIXES:
        return "converted"
    found = f"the suffix {path.suffix or '(none)'}"
    raise refusal(path, found, ", ".join(SUFFIXES), "Export the recording in one of these formats.")


def open_table(path: Path) -> Table:
    """Open delimited text or Parquet."""
    return parquet.open_parquet(path) if path.suffix.lower() == ".parquet" else delimited.open_delimited(path)


def parts_of(path: Path) -> tuple[Path, ...]:
    """Return all files of a recording, the named one first: a BrainVision header has its samples beside it."""
    return (path, *companions_of(path)) if path.suffix.lower() == ".vhdr" else (path,)


def inspect(path: Path) -> FileFacts:
    """Return what a file says of itself; samples are not read.

    Parameters
    ----------
    path : Path
        With one of `SUFFIXES`, in any case.

    Returns
    -------
    FileFacts
        Annotation, status and trigger channels are left out. Delimited text and Parquet state a rate only
        by a column ``time_s``, and no unit. A size that does not fit the header of an EDF or BDF file is told,
        and refused by `read` past a share.

    Raises
    ------
    RecordingError
        If the file cannot be read or contradicts itself.
    """
    family = family_of(path)
    if family == "table":
        return inspect_table(open_table(path))
    if family == "converted":
        return converted.inspect_converted(path)
    return edf.inspect_edf(path)


def read(
    path: Path, labels: tuple[str, ...], declared: Declared, start_s: float | None, stop_s: float | None
) -> RawSignal:
    """Read channels that share one rate.

    Parameters
    ----------
    path : Path
        With one of `SUFFIXES`, in any case.
    labels : tuple of str
        Channels as the file names them; at least one.
    declared : Declared
        What the study says where the file does not. Rates and known units of EDF and BDF are their own.
    start_s, stop_s : float or None
        Cut, in seconds from the first sample, gaps included: samples with start <= time < stop. None: from the
        start, to the end.

    Returns
    -------
    RawSignal
        Values as stored, with gain and offset to microvolt; a gap ends a run.

    Raises
    ------
    RecordingError
        If the file, a channel, a unit, a rate, a value or the cut is at fault; nothing is adjusted.
    """
    family = family_of(path)
    if family == "table":
        return read_table(open_table(path), labels, declared, start_s, stop_s)
    if family == "converted":
        return converted.read_converted(path, labels, start_s, stop_s)
    return edf.read_edf(path, labels, declared, start_s, stop_s)
