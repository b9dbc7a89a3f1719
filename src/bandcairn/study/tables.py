"""The tables of a study, recordings and segments, read with every problem in one pass."""

from __future__ import annotations

import csv
import io
import math
from dataclasses import dataclass, field
from pathlib import PurePosixPath, PureWindowsPath
from typing import TYPE_CHECKING

from bandcairn.errors import Problem

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping
    from pathlib import Path

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
_SEPARATORS = {".csv": ",", ".tsv": "\t"}


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


@dataclass(slots=True)
class _Sheet:
    """A table as text, and the problems met so far."""

    name: str
    columns: tuple[str, ...] = ()
    rows: list[tuple[int, dict[str, str]]] = field(default_factory=list)
    problems: list[Problem] = field(default_factory=list)

    def refuse(self, column: str, found: str, allowed: str, remedy: str, *, row: int | None = None) -> None:
        """Note a problem of a cell, of a column, or of the whole file."""
        at_column = f"column {column}" if column else ""
        where = ", ".join(part for part in (f"row {row}" if row else "", at_column) if part)
        self.problems.append(Problem(self.name, where, column or "(table)", found, allowed, remedy))


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
    sheet = _read_sheet(path, name, _REQUIRED)
    design_columns = tuple(c for c in sheet.columns if c and c not in _REQUIRED + _OPTIONAL)
    _refuse_results_columns(sheet, design_columns)
    rows = [row for line, cells in sheet.rows if (row := _recording(sheet, line, cells, design_columns))]
    _refuse_repeated(sheet, ((row.row, row.recording) for row in rows), "recording", "Rename one of the two.")
    stretches = ((row.row, f"{row.file} from {row.start_s} to {row.stop_s}") for row in rows)
    _refuse_repeated(sheet, stretches, "file", "Delete one row, or give start_s and stop_s.")
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
    sheet = _read_sheet(path, name, _SEGMENT_COLUMNS)
    for column in sheet.columns:
        if column and column not in _SEGMENT_COLUMNS:
            allowed = ", ".join(_SEGMENT_COLUMNS)
            sheet.refuse(column, f"the column {column}", allowed, "Delete the column.", row=1)
    rows = [row for line, cells in sheet.rows if (row := _segment(sheet, line, cells))]
    names = ((row.row, f"{row.segment} of {row.recording}") for row in rows)
    _refuse_repeated(sheet, names, "segment", "Rename one of the two.")
    return SegmentsTable(tuple(rows), tuple(sheet.rows), tuple(sheet.problems))


def lies_inside(path: str) -> bool:
    """Tell whether a path, as written, stays inside the folder it is relative to."""
    absolute = path.startswith(("/", "~")) or bool(PureWindowsPath(path).drive)
    return not absolute and "\\" not in path and ".." not in path.split("/") and path.isprintable()


def _read_sheet(path: Path, name: str, required: tuple[str, ...]) -> _Sheet:
    """Read a table as text and refuse what is wrong with its shape."""
    sheet = _Sheet(name)
    separator = _SEPARATORS.get(path.suffix.lower())
    if separator is None:
        sheet.refuse(
            "", f"the suffix {path.suffix or '(none)'}", ".csv or .tsv", "Save it as one of the two."
        )
        return sheet
    try:
        text = path.read_text(encoding="utf-8-sig")
    except OSError as error:
        sheet.refuse("", error.strerror or "no such file", "a readable file", "Write the table, or its path.")
        return sheet
    except UnicodeDecodeError as error:
        sheet.refuse("", f"byte {error.start} is no UTF-8", "UTF-8", "Save the table as UTF-8.")
        return sheet
    _fill(sheet, text, separator, required)
    return sheet


def _fill(sheet: _Sheet, text: str, separator: str, required: tuple[str, ...]) -> None:
    reader = csv.reader(io.StringIO(text, newline=""), delimiter=separator, strict=True)
    lines: list[tuple[int, list[str]]] = []
    first = 1
    try:
        for cells in reader:
            lines.append((first, [cell.strip() for cell in cells]))
            first = reader.line_num + 1  # a quoted cell may span lines: a row is named by its first
    except csv.Error as error:
        sheet.refuse("", str(error), "a table", "Look for an open quote in this row.", row=first)
    if not lines:
        sheet.refuse("", "no header", f"a header with {', '.join(required)}", "Write the header in row 1.")
        return
    sheet.columns = tuple(lines[0][1])
    if _header_is_sound(sheet, required):
        for line, cells in lines[1:]:
            _add_row(sheet, line, cells)


def _header_is_sound(sheet: _Sheet, required: tuple[str, ...]) -> bool:
    """Refuse blank, repeated and missing columns; tell whether rows can be read by column."""
    header = sheet.columns
    for position, column in enumerate(header, start=1):
        if not column:
            remedy = "Name the column, or delete it."
            sheet.refuse(f"number {position}", "a blank name", "a name for each column", remedy, row=1)
        elif column in header[: position - 1]:
            sheet.refuse(column, f"{column} twice", "each column once", "Rename one of the two.", row=1)
    missing = [column for column in required if column not in header]
    for column in missing:
        remedy = f"Add the column {column}."
        if len(header) == 1:
            remedy += " Only one column was found: .csv is split at commas, .tsv at tabs."
        sheet.refuse(column, f"the columns {', '.join(header)}", f"{column} among them", remedy, row=1)
    return not missing and len(set(header)) == len(header)


def _add_row(sheet: _Sheet, line: int, cells: list[str]) -> None:
    if not any(cells):
        return
    if len(cells) != len(sheet.columns):
        allowed = f"{len(sheet.columns)} cells, as in the header"
        remedy = "Add or delete separators; quote a cell that holds one."
        sheet.refuse("", f"{len(cells)} cells", allowed, remedy, row=line)
        return
    sheet.rows.append((line, dict(zip(sheet.columns, cells, strict=True))))


def _refuse_results_columns(sheet: _Sheet, design_columns: tuple[str, ...]) -> None:
    for column in design_columns:
        if column in RESULTS_COLUMNS:
            allowed = f"any name but {', '.join(RESULTS_COLUMNS)}"
            remedy = f"Rename the column: the results have a column {column} of their own."
            sheet.refuse(column, f"a design column {column}", allowed, remedy, row=1)


def _refuse_repeated(sheet: _Sheet, keys: Iterable[tuple[int, str]], column: str, remedy: str) -> None:
    first_rows: dict[str, int] = {}
    for line, key in keys:
        first = first_rows.setdefault(key, line)
        if first != line:
            sheet.refuse(column, f"{key} again (first in row {first})", "each once", remedy, row=line)


def _recording(
    sheet: _Sheet, line: int, cells: dict[str, str], design_columns: tuple[str, ...]
) -> RecordingRow | None:
    """Return one recording, or None after noting what is wrong with it."""
    before = len(sheet.problems)
    for column in _REQUIRED:
        _refuse_blank(sheet, line, column, cells[column])
    for column in ("recording", "participant"):
        _refuse_unfit_name(sheet, line, column, cells[column])
    _refuse_outside_path(sheet, line, cells["file"])
    start_s = _seconds(sheet, line, "start_s", cells.get("start_s", ""))
    stop_s = _seconds(sheet, line, "stop_s", cells.get("stop_s", ""))
    _refuse_empty_stretch(sheet, line, start_s, stop_s)
    if len(sheet.problems) > before:
        return None
    design = {column: cells[column] for column in design_columns}
    file = str(PurePosixPath(cells["file"]))
    return RecordingRow(cells["recording"], cells["participant"], file, start_s, stop_s, design, line)


def _segment(sheet: _Sheet, line: int, cells: dict[str, str]) -> SegmentRow | None:
    """Return one segment, or None after noting what is wrong with it."""
    before = len(sheet.problems)
    for column in _SEGMENT_COLUMNS:
        _refuse_blank(sheet, line, column, cells[column])
    _refuse_unfit_name(sheet, line, "segment", cells["segment"])
    start_s = _seconds(sheet, line, "start_s", cells["start_s"])
    stop_s = _seconds(sheet, line, "stop_s", cells["stop_s"])
    _refuse_empty_stretch(sheet, line, start_s, stop_s)
    if len(sheet.problems) > before or start_s is None or stop_s is None:
        return None
    return SegmentRow(cells["recording"], cells["segment"], start_s, stop_s, line)


def _refuse_blank(sheet: _Sheet, line: int, column: str, cell: str) -> None:
    if not cell:
        sheet.refuse(column, "a blank cell", "a value", "Fill the cell, or delete the row.", row=line)


def _refuse_unfit_name(sheet: _Sheet, line: int, column: str, cell: str) -> None:
    """Refuse names that cannot stand in a path or on one line."""
    if any(letter in "/\\" or not letter.isprintable() for letter in cell) or cell in (".", ".."):
        allowed = "printable text without / and \\"
        sheet.refuse(column, repr(cell), allowed, "Use letters, digits, blanks, _ - or .", row=line)


def _refuse_outside_path(sheet: _Sheet, line: int, cell: str) -> None:
    if not lies_inside(cell):
        allowed = "a path inside the study folder, with forward slashes"
        remedy = "Put the file, or a link to it, below the study folder and write raw/NAME."
        sheet.refuse("file", repr(cell), allowed, remedy, row=line)


def _seconds(sheet: _Sheet, line: int, column: str, cell: str) -> float | None:
    """Return a cell as seconds; None for a blank cell and for one that was refused."""
    if not cell:
        return None
    try:
        seconds = float(cell)
    except ValueError:
        seconds = math.nan
    if not math.isfinite(seconds) or seconds < 0:
        remedy = "Write seconds from the start of the file, with a decimal point."
        sheet.refuse(column, repr(cell), "a number, 0 or above", remedy, row=line)
        return None
    return seconds


def _refuse_empty_stretch(sheet: _Sheet, line: int, start_s: float | None, stop_s: float | None) -> None:
    if stop_s is not None and stop_s <= (start_s or 0.0):
        allowed = f"more than start_s ({start_s or 0.0:g})"
        sheet.refuse("stop_s", f"{stop_s:g}", allowed, "Exchange the two, or correct one.", row=line)
