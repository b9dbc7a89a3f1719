"""Delimited text: a header line of channel names, then one row a sample.

Comma or semicolon in .csv, tab in .tsv; UTF-8 with or without byte order mark, else Latin-1; any line end that
holds a line feed. Decimal point, or decimal comma where columns are not parted by commas. An optional column
``time_s`` states the rate.
"""

from __future__ import annotations

import csv
import io
import re
from dataclasses import dataclass
from typing import TYPE_CHECKING

from bandcairn.recordings.clock import TIME_COLUMN, Clock, read_clock
from bandcairn.recordings.header import encoding_of
from bandcairn.recordings.refusal import refusal, unreadable
from bandcairn.recordings.table import Table, number
from bandcairn.signal import FileDetails

if TYPE_CHECKING:
    from pathlib import Path

    import numpy as np
    from numpy.typing import NDArray

_SEPARATORS = {",": "separator comma", ";": "separator semicolon", "\t": "separator tab"}
_RESTORE = "Restore the original file."
_BYTE_ORDER_MARK = b"\xef\xbb\xbf"
# Cells that are numbers with a comma, or with a point, parted by semicolons or tabs.
_CELL = rb"(?:^|[;\t])[ \"]*([+-]?(?:[0-9]+%b[0-9]*|%b[0-9]+)(?:[eE][+-]?[0-9]+)?)[ \"]*(?=[;\t\r\n]|\Z)"
_COMMA_CELL = re.compile(_CELL % (b",", b","), re.MULTILINE)
_POINT_CELL = re.compile(_CELL % (rb"\.", rb"\."), re.MULTILINE)
# 12,345 may be twelve thousand or twelve and a bit; nothing else with a comma may.
_THOUSANDS = re.compile(rb"[+-]?[1-9][0-9]{0,2},[0-9]{3}")


@dataclass(frozen=True, slots=True)
class Text:
    """A delimited file in memory, its rows not parsed yet.

    Attributes
    ----------
    path : Path
        Named in refusals.
    separator : str
        Comma, semicolon or tab.
    names : tuple of str
        Column names, without blanks around them.
    body : bytes
        All rows below the header line, in UTF-8 and with decimal points.
    n_rows : int
        Number of rows.
    details : FileDetails
        Encoding, separator and decimal mark as found.
    """

    path: Path
    separator: str
    names: tuple[str, ...]
    body: bytes
    n_rows: int
    details: FileDetails


def open_delimited(path: Path) -> Table:
    """Read a delimited file into memory: names, number of rows and the clock if there is one."""
    text = load(path)

    def columns(places: tuple[int, ...]) -> tuple[NDArray[np.float64] | tuple[str, ...], ...]:
        return parse(text, places)

    return Table(path, text.names, text.n_rows, clock_of(text), columns, text.details)


def load(path: Path) -> Text:
    """Read a delimited file into memory and split off its header line."""
    try:
        content = path.read_bytes().removeprefix(_BYTE_ORDER_MARK)
    except OSError as error:
        raise unreadable(path, error) from error
    if not content.strip():
        raise refusal(path, "an empty file", "a header line and rows", "Export the recording again.")
    encoding = encoding_of(content)
    if encoding == "Latin-1":
        content = content.decode("latin-1").encode()
    line, _, body = content.partition(b"\n")
    separator = _separator(path, line, body)
    decimal_comma = separator != "," and _has_decimal_comma(path, body)
    names = _names(path, line, separator)
    layout = f"{_SEPARATORS[separator]}, decimal {'comma' if decimal_comma else 'point'}"
    text = Text(
        path,
        separator,
        names,
        body.replace(b",", b".") if decimal_comma else body,
        _count_rows(body),
        FileDetails(format="delimited", encoding=encoding, layout=layout),
    )
    if not text.n_rows:
        raise refusal(path, "a header line without rows", "one row a sample", "Export the recording again.")
    return text


def clock_of(text: Text) -> Clock | None:
    """Return what the column ``time_s`` says; None where there is none."""
    if TIME_COLUMN not in text.names:
        return None
    if text.names.count(TIME_COLUMN) > 1:
        found = f"{text.names.count(TIME_COLUMN)} columns named {TIME_COLUMN}"
        raise refusal(text.path, found, "names that occur once", "Rename them in the header line.")
    return read_clock(text.path, _cells(text, text.names.index(TIME_COLUMN)))


def parse(text: Text, places: tuple[int, ...]) -> tuple[NDArray[np.float64] | tuple[str, ...], ...]:
    """Return columns as numbers, correctly rounded; a column that holds anything else, as its texts.

    Raises
    ------
    RecordingError
        If a row has too many or too few cells.
    """
    if _is_plain(text):
        fast = _parse_fast(text, places)
        if fast is not None:
            return fast
    rows = _rows(text)
    return tuple(_numbers_or_texts(tuple(row[place].strip() for row in rows)) for place in places)


def _separator(path: Path, line: bytes, body: bytes) -> str:
    """Return what parts the columns: by the suffix, and in .csv by the marks of the header line."""
    if path.suffix.lower() == ".tsv":
        return "\t"
    if b";" not in line:
        return ","
    if b"," not in line:
        return ";"
    if b";" in body:
        remedy = "Rename the columns so that one of the two marks is left."
        raise refusal(path, "semicolons and commas in the header line", "one separator", remedy)
    return ","


def _has_decimal_comma(path: Path, body: bytes) -> bool:
    """Return whether numbers are written with a decimal comma; refused where that cannot be told."""
    if b"," not in body or _COMMA_CELL.search(body) is None:
        return False
    remedy = "Export with one decimal mark and without marks between thousands."
    point = _POINT_CELL.search(body)
    if point is not None:
        comma = _COMMA_CELL.search(body)
        cells = f"{comma.group(1).decode() if comma else ''} and {point.group(1).decode()}"
        raise refusal(path, f"numbers with a comma and with a point: {cells}", "one decimal mark", remedy)
    if all(_THOUSANDS.fullmatch(cell.group(1)) for cell in _COMMA_CELL.finditer(body)):
        found = "numbers whose comma may be a decimal mark or part thousands"
        raise refusal(path, found, "numbers that can be told", remedy)
    return True


def _names(path: Path, line: bytes, separator: str) -> tuple[str, ...]:
    header = line.decode().rstrip("\r")
    if "\r" in header or "\0" in header:
        raise refusal(path, "no line feeds or a wide encoding", "UTF-8 text with lines", "Save it as UTF-8.")
    names = tuple(name.strip() for name in _split(path, header, separator)[0])
    other = next((mark for mark in (";", "\t", ",") if mark != separator and mark in header), None)
    if len(names) == 1 and other:
        kind = "tab" if separator == "\t" else "comma or semicolon"
        remedy = "Export with that separator."
        raise refusal(path, f"columns parted by {other!r}", f"{kind} in {path.suffix}", remedy)
    return names


def _count_rows(body: bytes) -> int:
    return body.count(b"\n") + (not body.endswith(b"\n") and bool(body))


def _row_name(row: int) -> str:
    return f"row {row + 1} (line {row + 2})"


def _is_plain(text: Text) -> bool:
    """Return whether every line has its cells and no quotes, so that lines can be split without care."""
    if b'"' in text.body:
        return False
    separator = text.separator.encode()
    return {line.count(separator) for line in _lines(text)} == {len(text.names) - 1}


def _lines(text: Text) -> list[bytes]:
    return text.body.removesuffix(b"\n").split(b"\n")


def _parse_fast(text: Text, places: tuple[int, ...]) -> tuple[NDArray[np.float64], ...] | None:
    """Return columns as numbers, or None where a cell is none: the slow way then tells which."""
    import numpy as np
    import pandas as pd

    # Correct rounding is the default from 3.1 on, where asking for it is deprecated.
    exact = tuple(int(part) for part in pd.__version__.split(".")[:2]) >= (3, 1)
    try:
        frame = pd.read_csv(
            io.BytesIO(text.body),
            sep=text.separator,
            header=None,
            names=range(len(text.names)),
            usecols=sorted(set(places)),
            dtype=np.float64,
            index_col=False,
            na_filter=False,
            skip_blank_lines=False,
            float_precision=None if exact else "round_trip",
        )
    except ValueError:
        return None
    if len(frame) != text.n_rows:
        return None
    return tuple(frame[place].to_numpy() for place in places)


def _cells(text: Text, place: int) -> list[bytes]:
    """Return the cells of one column as written."""
    if not _is_plain(text):
        return [row[place].encode() for row in _rows(text)]
    separator = text.separator.encode()
    return [line.split(separator, place + 1)[place] for line in _lines(text)]


def _rows(text: Text) -> list[list[str]]:
    """Return all cells; the slow and thorough way, which names a row that has too many or too few."""
    body = text.body.decode()
    rows = [row or [""] for row in _split(text.path, body, text.separator)]
    for row, cells in enumerate(rows):
        if len(cells) != len(text.names):
            too_many = len(cells) > len(text.names)
            hint = "If its numbers have decimal commas, write decimal points." if too_many else _RESTORE
            found = f"{len(cells)} cells in {_row_name(row)}"
            raise refusal(text.path, found, f"{len(text.names)}, as in the header line", hint)
    if len(rows) != text.n_rows:
        found = f"{text.n_rows} lines that make {len(rows)} rows"
        raise refusal(text.path, found, "one line a row", "Export without line breaks inside of cells.")
    return rows


def _split(path: Path, lines: str, separator: str) -> list[list[str]]:
    try:
        return list(csv.reader(io.StringIO(lines, newline=""), delimiter=separator))
    except csv.Error as error:
        raise refusal(path, f"a row that cannot be split ({error})", "delimited text", _RESTORE) from error


def _numbers_or_texts(cells: tuple[str, ...]) -> NDArray[np.float64] | tuple[str, ...]:
    import numpy as np

    numbers = [number(cell) for cell in cells]
    if None in numbers:
        return cells
    return np.array(numbers, dtype=np.float64)
