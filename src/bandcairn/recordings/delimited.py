"""Delimited text: a header line of channel names, then one row a sample.

Comma in .csv, tab in .tsv; decimal point; UTF-8 with or without byte order mark; any line end that holds a
line feed. An optional column ``time_s`` states the rate.
"""

from __future__ import annotations

import csv
import io
from dataclasses import dataclass
from typing import TYPE_CHECKING

from bandcairn.errors import UnknownUnitError
from bandcairn.recordings.clock import TIME_COLUMN, Clock, read_clock
from bandcairn.recordings.raw import RawSignal, cut
from bandcairn.recordings.refusal import refusal, unreadable
from bandcairn.signal import ChannelFacts, FileFacts, Run
from bandcairn.units import KNOWN_UNITS, microvolts_per

if TYPE_CHECKING:
    from fractions import Fraction
    from pathlib import Path

    import numpy as np
    from numpy.typing import NDArray

    from bandcairn.recordings.declared import Declared

_RESTORE = "Restore the original file."
_MISSING = "Missing samples are not filled in: cut the recording before them."
_BYTE_ORDER_MARK = b"\xef\xbb\xbf"


@dataclass(frozen=True, slots=True)
class Text:
    """A delimited file in memory, its rows not parsed yet.

    Attributes
    ----------
    path : Path
        Named in refusals.
    separator : str
        Comma or tab.
    names : tuple of str
        Column names, without blanks around them.
    body : bytes
        All rows below the header line.
    n_rows : int
        Number of rows.
    """

    path: Path
    separator: str
    names: tuple[str, ...]
    body: bytes
    n_rows: int


def inspect_delimited(path: Path) -> FileFacts:
    """Read the names, count the rows, and parse the clock if there is one; other cells are not parsed."""
    text = load(path)
    clock = clock_of(text)
    rate_hz = clock.rate_hz if clock else None
    channels = tuple(
        ChannelFacts(name, rate_hz, None, text.n_rows) for name in text.names if name != TIME_COLUMN
    )
    return FileFacts(channels=channels, annotations=())


def read_delimited(
    path: Path, labels: tuple[str, ...], declared: Declared, start_s: float | None, stop_s: float | None
) -> RawSignal:
    """Read channels; the declaration supplies the unit, and the rate where the file has no clock."""
    import numpy as np

    text = load(path)
    places = tuple(_place(text, label) for label in labels)
    unit_uv = _unit_uv(path, declared)
    rate_hz = _rate_hz(text, declared)
    stretch = cut(path, text.n_rows, rate_hz, start_s, stop_s)
    columns = parse(text, places)
    for label, column in zip(labels, columns, strict=True):
        _check_numbers(text, label, column)
    return RawSignal(
        labels=labels,
        rate_hz=rate_hz,
        samples=tuple(
            np.asarray(column[stretch.first : stretch.stop], dtype=np.float64) for column in columns
        ),
        gain_uv=(unit_uv,) * len(labels),
        offset_uv=(0.0,) * len(labels),
        runs=(Run(0, stretch.n_samples, stretch.start_s),),
    )


def load(path: Path) -> Text:
    """Read a delimited file into memory and split off its header line."""
    try:
        content = path.read_bytes().removeprefix(_BYTE_ORDER_MARK)
    except OSError as error:
        raise unreadable(path, error) from error
    if not content.strip():
        raise refusal(path, "an empty file", "a header line and rows", "Export the recording again.")
    line, _, body = content.partition(b"\n")
    separator = "\t" if path.suffix.lower() == ".tsv" else ","
    text = Text(path, separator, _names(path, line, separator), body, _count_rows(body))
    if not text.n_rows:
        raise refusal(path, "a header line without rows", "one row a sample", "Export the recording again.")
    return text


def clock_of(text: Text) -> Clock | None:
    """Return what the column ``time_s`` says; None where there is none."""
    if TIME_COLUMN not in text.names:
        return None
    return read_clock(text.path, _cells(text, _place(text, TIME_COLUMN)))


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


def _names(path: Path, line: bytes, separator: str) -> tuple[str, ...]:
    try:
        header = line.decode().rstrip("\r")
    except UnicodeDecodeError:
        remedy = "Save the file as UTF-8."
        raise refusal(path, "a header line that is not UTF-8", "UTF-8", remedy) from None
    if "\r" in header or "\0" in header:
        raise refusal(path, "no line feeds or a wide encoding", "UTF-8 text with lines", "Save it as UTF-8.")
    names = tuple(name.strip() for name in _split(path, header, separator)[0])
    other = next((mark for mark in (";", "\t", ",") if mark != separator and mark in header), None)
    if len(names) == 1 and other:
        kind = "tab" if separator == "\t" else "comma"
        remedy = "Export with that separator and with a decimal point, not a decimal comma."
        raise refusal(path, f"columns parted by {other!r}", f"{kind} in {path.suffix}", remedy)
    return names


def _count_rows(body: bytes) -> int:
    return body.count(b"\n") + (not body.endswith(b"\n") and bool(body))


def _place(text: Text, label: str) -> int:
    n_found = text.names.count(label)
    if n_found == 1:
        return text.names.index(label)
    if not n_found:
        names = ", ".join(text.names)
        raise refusal(text.path, f"no column {label}", f"one of {names}", "Correct `channels` in study.yaml.")
    found = f"{n_found} columns named {label}"
    raise refusal(text.path, found, "names that occur once", "Rename them in the header line.")


def _unit_uv(path: Path, declared: Declared) -> float:
    remedy = "Declare it in study.yaml, for example `load: {unit: uV}`."
    if declared.unit is None:
        raise refusal(path, "no declared unit", ", ".join(KNOWN_UNITS), remedy)
    try:
        return microvolts_per(declared.unit)
    except UnknownUnitError as error:
        found = f"the declared unit {declared.unit!r}"
        raise UnknownUnitError(str(refusal(path, found, ", ".join(KNOWN_UNITS), remedy))) from error


def _rate_hz(text: Text, declared: Declared) -> Fraction:
    clock = clock_of(text)
    stated_hz = clock.rate_hz if clock else None
    if declared.rate_hz is None:
        if stated_hz is None:
            found = f"a column {TIME_COLUMN} that allows {clock}" if clock else "no sampling rate"
            remedy = "Declare it in study.yaml, for example `load: {rate_hz: 500}`."
            raise refusal(
                text.path, found, f"a column {TIME_COLUMN} of enough digits or a declaration", remedy
            )
        return stated_hz
    if clock and not clock.agrees_with(declared.rate_hz):
        found = f"a declared rate of {float(declared.rate_hz):.12g} Hz"
        remedy = "Correct the declaration or leave it away."
        raise refusal(text.path, found, f"{clock}, as {TIME_COLUMN} says", remedy)
    return declared.rate_hz


def _check_numbers(text: Text, label: str, column: NDArray[np.float64] | tuple[str, ...]) -> None:
    import numpy as np

    if isinstance(column, tuple):
        row = next(row for row, cell in enumerate(column) if _number(cell) is None)
        cell = column[row]
    else:
        off = np.flatnonzero(~np.isfinite(column))
        if not off.size:
            return
        row = int(off[0])
        cell = str(column[row])
    found = f"{repr(cell) if cell else 'a blank cell'} in {_row_name(row)}, column {label}"
    hint = "Write decimal points, not commas." if "," in cell else _MISSING
    raise refusal(text.path, found, "a finite number", hint)


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
    try:
        body = text.body.decode()
    except UnicodeDecodeError as error:
        row = text.body[: error.start].count(b"\n")
        found = f"bytes that are not UTF-8 in {_row_name(row)}"
        raise refusal(text.path, found, "UTF-8", "Save the file as UTF-8.") from None
    rows = [row or [""] for row in _split(text.path, body, text.separator)]
    for number, cells in enumerate(rows):
        if len(cells) != len(text.names):
            too_many = len(cells) > len(text.names)
            hint = "If its numbers have decimal commas, write decimal points." if too_many else _RESTORE
            found = f"{len(cells)} cells in {_row_name(number)}"
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

    numbers = [_number(cell) for cell in cells]
    if None in numbers:
        return cells
    return np.array(numbers, dtype=np.float64)


def _number(cell: str) -> float | None:
    try:
        return float(cell) if "_" not in cell else None
    except ValueError:
        return None
