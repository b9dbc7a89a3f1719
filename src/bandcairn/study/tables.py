"""The tables of a study, recordings and segments, read with every problem in one pass."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import PurePosixPath
from typing import TYPE_CHECKING

from bandcairn.study.sheet import (
    Sheet,
    lies_inside,
    read_sheet,
    refuse_blank,
    refuse_empty_stretch,
    refuse_other_columns,
    refuse_repeated,
    refuse_unfit_name,
    seconds,
)

if TYPE_CHECKING:
    from collections.abc import Mapping
    from pathlib import Path

    from bandcairn.errors import Problem

RESULTS_COLUMNS = (
    "signal",
    "channel",
    "segment",
    "feature",
    "band",
    "value",
    "unit",
    "epochs_used",
    "epochs_total",
    "note",
    "node",
)
_REQUIRED = ("recording", "participant", "file")
_OPTIONAL = ("start_s", "stop_s")
_SEGMENT_COLUMNS = ("recording", "segment", "start_s", "stop_s")


@dataclass(frozen=True, slots=True)
class RecordingRow:
    """One row of the recordings table.

    Attributes
    ----------
    recording : str
        Unique name.
    participant : str
        Whose recording it is.
    file : str
        Path of the raw file, relative to the study folder, with forward slashes.
    start_s, stop_s : float or None
        Stretch of the file that is used, in seconds from its start; None where the file's own end counts.
    design : Mapping of str to str
        The other columns, in their order.
    row : int
        Line of the file; the header is 1.
    """

    recording: str
    participant: str
    file: str
    start_s: float | None
    stop_s: float | None
    design: Mapping[str, str]
    row: int


@dataclass(frozen=True, slots=True)
class SegmentRow:
    """One row of the segments table: a named stretch, in seconds from the start of the file."""

    recording: str
    segment: str
    start_s: float
    stop_s: float
    row: int


@dataclass(frozen=True, slots=True)
class RecordingsTable:
    """The table of recordings.

    Attributes
    ----------
    rows : tuple of RecordingRow
        Rows without fault.
    cells : tuple of (int, dict)
        Every row as text by column, faulty or not, with its line: what a check of the design looks at,
        so that one bad cell does not make a participant look absent.
    design_columns : tuple of str
        In the order of the file.
    problems : tuple of Problem
        What is wrong.
    """

    rows: tuple[RecordingRow, ...]
    cells: tuple[tuple[int, Mapping[str, str]], ...]
    design_columns: tuple[str, ...]
    problems: tuple[Problem, ...]


@dataclass(frozen=True, slots=True)
class SegmentsTable:
    """The table of segments; attributes as in `RecordingsTable`."""

    rows: tuple[SegmentRow, ...]
    cells: tuple[tuple[int, Mapping[str, str]], ...]
    problems: tuple[Problem, ...]


def read_recordings(path: Path, name: str) -> RecordingsTable:
    """Read the table of recordings.

    Parameters
    ----------
    path : Path
        The file; ``.csv`` is split at commas, ``.tsv`` at tabs, both UTF-8.
    name : str
        The path as people know it, for the problems.

    Returns
    -------
    RecordingsTable
        Faulty rows are left out of `rows`, and each fault is in `problems`.
    """
    sheet = read_sheet(path, name, _REQUIRED)
    design_columns = tuple(c for c in sheet.columns if c and c not in _REQUIRED + _OPTIONAL)
    _refuse_results_columns(sheet, design_columns)
    rows = [row for line, cells in sheet.rows if (row := _recording(sheet, line, cells, design_columns))]
    refuse_repeated(sheet, ((row.row, row.recording) for row in rows), "recording", "Rename one of the two.")
    stretches = ((row.row, f"{row.file} from {row.start_s} to {row.stop_s}") for row in rows)
    refuse_repeated(sheet, stretches, "file", "Delete one row, or give start_s and stop_s.")
    if sheet.columns and not sheet.rows and not sheet.problems:
        sheet.refuse("", "no rows", "at least one recording", "Write one row for each recording.")
    return RecordingsTable(tuple(rows), tuple(sheet.rows), design_columns, tuple(sheet.problems))


def read_segments(path: Path, name: str) -> SegmentsTable:
    """Read the table of segments.

    Parameters
    ----------
    path : Path
        The file; ``.csv`` is split at commas, ``.tsv`` at tabs, both UTF-8.
    name : str
        The path as people know it, for the problems.

    Returns
    -------
    SegmentsTable
        Faulty rows are left out of `rows`, and each fault is in `problems`.
    """
    sheet = read_sheet(path, name, _SEGMENT_COLUMNS)
    refuse_other_columns(sheet, _SEGMENT_COLUMNS)
    rows = [row for line, cells in sheet.rows if (row := _segment(sheet, line, cells))]
    names = ((row.row, f"{row.segment} of {row.recording}") for row in rows)
    refuse_repeated(sheet, names, "segment", "Rename one of the two.")
    return SegmentsTable(tuple(rows), tuple(sheet.rows), tuple(sheet.problems))


def _refuse_results_columns(sheet: Sheet, design_columns: tuple[str, ...]) -> None:
    for column in design_columns:
        if column in RESULTS_COLUMNS:
            allowed = f"any name but {', '.join(RESULTS_COLUMNS)}"
            remedy = f"Rename the column: the results have a column {column} of their own."
            sheet.refuse(column, f"a design column {column}", allowed, remedy, row=1)


def _recording(
    sheet: Sheet, line: int, cells: dict[str, str], design_columns: tuple[str, ...]
) -> RecordingRow | None:
    """Return one recording, or None after noting what is wrong with it."""
    before = len(sheet.problems)
    for column in _REQUIRED:
        refuse_blank(sheet, line, column, cells[column])
    for column in ("recording", "participant"):
        refuse_unfit_name(sheet, line, column, cells[column])
    _refuse_outside_path(sheet, line, cells["file"])
    start_s = seconds(sheet, line, "start_s", cells.get("start_s", ""))
    stop_s = seconds(sheet, line, "stop_s", cells.get("stop_s", ""))
    refuse_empty_stretch(sheet, line, start_s, stop_s)
    if len(sheet.problems) > before:
        return None
    design = {column: cells[column] for column in design_columns}
    file = str(PurePosixPath(cells["file"]))
    return RecordingRow(cells["recording"], cells["participant"], file, start_s, stop_s, design, line)


def _segment(sheet: Sheet, line: int, cells: dict[str, str]) -> SegmentRow | None:
    """Return one segment, or None after noting what is wrong with it."""
    before = len(sheet.problems)
    for column in _SEGMENT_COLUMNS:
        refuse_blank(sheet, line, column, cells[column])
    refuse_unfit_name(sheet, line, "segment", cells["segment"])
    start_s = seconds(sheet, line, "start_s", cells["start_s"])
    stop_s = seconds(sheet, line, "stop_s", cells["stop_s"])
    refuse_empty_stretch(sheet, line, start_s, stop_s)
    if len(sheet.problems) > before or start_s is None or stop_s is None:
        return None
    return SegmentRow(cells["recording"], cells["segment"], start_s, stop_s, line)


def _refuse_outside_path(sheet: Sheet, line: int, cell: str) -> None:
    if not lies_inside(cell):
        allowed = "a path inside the study folder, with forward slashes"
        remedy = "Put the file, or a link to it, below the study folder and write raw/NAME."
        sheet.refuse("file", repr(cell), allowed, remedy, row=line)
