"""A table of a study as text: its shape, and what may stand in its cells."""

from __future__ import annotations

import csv
import io
import math
from dataclasses import dataclass, field
from pathlib import PureWindowsPath
from typing import TYPE_CHECKING

from bandcairn.errors import Problem

if TYPE_CHECKING:
    from collections.abc import Iterable
    from pathlib import Path

_SEPARATORS = {".csv": ",", ".tsv": "\t"}


@dataclass(slots=True)
class Sheet:
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


def read_sheet(path: Path, name: str, required: tuple[str, ...]) -> Sheet:
    """Read a table as text and refuse what is wrong with its shape."""
    sheet = Sheet(name)
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


def _fill(sheet: Sheet, text: str, separator: str, required: tuple[str, ...]) -> None:
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


def _header_is_sound(sheet: Sheet, required: tuple[str, ...]) -> bool:
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


def _add_row(sheet: Sheet, line: int, cells: list[str]) -> None:
    if not any(cells):
        return
    if len(cells) != len(sheet.columns):
        allowed = f"{len(sheet.columns)} cells, as in the header"
        remedy = "Add or delete separators; quote a cell that holds one."
        sheet.refuse("", f"{len(cells)} cells", allowed, remedy, row=line)
        return
    sheet.rows.append((line, dict(zip(sheet.columns, cells, strict=True))))


def refuse_other_columns(sheet: Sheet, allowed: tuple[str, ...]) -> None:
    """Refuse every named column that such a table does not have."""
    for column in sheet.columns:
        if column and column not in allowed:
            sheet.refuse(column, f"the column {column}", ", ".join(allowed), "Delete the column.", row=1)


def refuse_repeated(sheet: Sheet, keys: Iterable[tuple[int, str]], column: str, remedy: str) -> None:
    """Refuse keys that stand in several rows."""
    first_rows: dict[str, int] = {}
    for line, key in keys:
        first = first_rows.setdefault(key, line)
        if first != line:
            sheet.refuse(column, f"{key} again (first in row {first})", "each once", remedy, row=line)


def refuse_blank(sheet: Sheet, line: int, column: str, cell: str) -> None:
    """Refuse a cell that must hold something."""
    if not cell:
        sheet.refuse(column, "a blank cell", "a value", "Fill the cell, or delete the row.", row=line)


def refuse_unfit_name(sheet: Sheet, line: int, column: str, cell: str) -> None:
    """Refuse names that cannot stand in a path or on one line."""
    if any(letter in "/\\" or not letter.isprintable() for letter in cell) or cell in (".", ".."):
        allowed = "printable text without / and \\"
        sheet.refuse(column, repr(cell), allowed, "Use letters, digits, blanks, _ - or .", row=line)


def seconds(sheet: Sheet, line: int, column: str, cell: str) -> float | None:
    """Return a cell as seconds; None for a blank cell and for one that was refused."""
    if not cell:
        return None
    try:
        value = float(cell)
    except ValueError:
        value = math.nan
    if not math.isfinite(value) or value < 0:
        remedy = "Write seconds from the start of the file, with a decimal point."
        sheet.refuse(column, repr(cell), "a number, 0 or above", remedy, row=line)
        return None
    return value


def refuse_empty_stretch(sheet: Sheet, line: int, start_s: float | None, stop_s: float | None) -> None:
    """Refuse a stop that is not after its start; a blank start is the start of the file."""
    if stop_s is not None and stop_s <= (start_s or 0.0):
        allowed = f"more than start_s ({start_s or 0.0:g})"
        sheet.refuse("stop_s", f"{stop_s:g}", allowed, "Exchange the two, or correct one.", row=line)


def lies_inside(path: str) -> bool:
    """Tell whether a path, as written, stays inside the folder it is relative to."""
    absolute = path.startswith(("/", "~")) or bool(PureWindowsPath(path).drive)
    return not absolute and "\\" not in path and ".." not in path.split("/") and path.isprintable()
