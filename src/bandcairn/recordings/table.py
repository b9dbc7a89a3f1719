"""Tables of samples, one column a channel: what delimited text and Parquet have in common."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, TypeAlias

from bandcairn.errors import UnknownUnitError
from bandcairn.recordings.clock import TIME_COLUMN, refused_jump
from bandcairn.recordings.raw import RawSignal, counted_from_zero, cut
from bandcairn.recordings.refusal import refusal
from bandcairn.signal import ChannelFacts, FileDetails, FileFacts, Gap, Run
from bandcairn.units import KNOWN_UNITS, microvolts_per

if TYPE_CHECKING:
    from collections.abc import Callable
    from fractions import Fraction
    from pathlib import Path

    import numpy as np
    from numpy.typing import NDArray

    from bandcairn.recordings.clock import Clock
    from bandcairn.recordings.declared import Declared

    Column: TypeAlias = NDArray[np.float64] | tuple[str, ...]

_MISSING_CELLS = ("", "nan", "na", "n/a", "null")
_MISSING = (
    "Missing samples are not filled in: cut the recording before them, or declare `load: {missing: gap}`."
)
_NAMED_ROWS = 5  # of many faulty rows, enough to find them


@dataclass(frozen=True, slots=True)
class Table:
    """An opened table; its columns are parsed when they are asked for.

    Attributes
    ----------
    path : Path
        Named in refusals.
    names : tuple of str
        Column names, without blanks around them.
    n_rows : int
        Number of rows.
    clock : Clock or None
        What the column ``time_s`` says; None where there is none.
    parse : callable
        From places of columns to the columns: numbers, or texts where a cell is no number.
    details : FileDetails
        How the file was read.
    """

    path: Path
    names: tuple[str, ...]
    n_rows: int
    clock: Clock | None
    parse: Callable[[tuple[int, ...]], tuple[Column, ...]]
    details: FileDetails

    @property
    def rate_hz(self) -> Fraction | None:
        """The rate that the clock states."""
        return self.clock.rate_hz if self.clock else None

    @property
    def channels(self) -> tuple[int, ...]:
        """Places of the columns that are channels."""
        return tuple(place for place, name in enumerate(self.names) if name != TIME_COLUMN)

    def runs(self, rate_hz: Fraction) -> tuple[Run, ...]:
        """Return the gap-free runs by the clock."""
        if self.clock is None:
            return (Run(0, self.n_rows, 0 / rate_hz),)
        return self.clock.runs(self.n_rows, rate_hz)

    def row_name(self, row: int) -> str:
        """Return how a row is called in a refusal."""
        return f"row {row + 1} (line {row + 2})" if self.details.format == "delimited" else f"row {row + 1}"


def inspect_table(table: Table) -> FileFacts:
    """Return what a table says of itself; only the clock has been parsed."""
    rate_hz = table.rate_hz
    if rate_hz is None and table.clock is not None and table.clock.jumps:
        rate_hz = table.clock.slowest_hz  # roughly where the gaps lie, until the study declares the rate
    runs = table.runs(rate_hz) if rate_hz else ()
    ends_s = [run.start_s + run.n_samples / rate_hz for run in runs if rate_hz]
    return FileFacts(
        channels=tuple(
            ChannelFacts(table.names[place], table.rate_hz, None, table.n_rows) for place in table.channels
        ),
        annotations=(),
        duration_s=ends_s[-1] if table.rate_hz else None,
        gaps=tuple(Gap(end_s, run.start_s) for end_s, run in zip(ends_s, runs[1:], strict=False)),
        details=table.details,
    )


def read_table(
    table: Table, labels: tuple[str, ...], declared: Declared, start_s: float | None, stop_s: float | None
) -> RawSignal:
    """Read channels; the declaration supplies the unit, and the rate where the file has no clock."""
    import numpy as np

    places = tuple(_place(table, label) for label in labels)
    unit_uv = _unit_uv(table.path, declared)
    rate_hz = _rate_hz(table, declared)
    if table.clock and table.clock.jumps and not declared.missing_are_gaps:
        raise refused_jump(table.path, table.clock.jumps[0])
    runs = cut(table.path, table.runs(rate_hz), rate_hz, start_s, stop_s)
    columns = [
        _numbers(table, label, column, missing_allowed=declared.missing_are_gaps)[
            runs[0].first : runs[-1].stop
        ]
        for label, column in zip(labels, table.parse(places), strict=True)
    ]
    kept = ~np.any([np.isnan(column) for column in columns], axis=0)
    return RawSignal(
        labels=labels,
        rate_hz=rate_hz,
        samples=tuple(column if kept.all() else column[kept] for column in columns),
        gain_uv=(unit_uv,) * len(labels),
        offset_uv=(0.0,) * len(labels),
        runs=_kept_runs(table.path, counted_from_zero(runs), kept, rate_hz),
    )


def _kept_runs(
    path: Path, runs: tuple[Run, ...], kept: NDArray[np.bool_], rate_hz: Fraction
) -> tuple[Run, ...]:
    """Return the runs of what is left where rows are missing."""
    import numpy as np

    found: list[Run] = []
    n_before = 0
    for run in runs:
        inside = np.concatenate(([False], kept[run.first : run.stop], [False]))
        edges = np.flatnonzero(inside[1:] != inside[:-1]).reshape(-1, 2).tolist()
        for first, stop in edges:
            found.append(Run(n_before, n_before + stop - first, run.start_s + first / rate_hz))
            n_before += stop - first
    if not found:
        remedy = "Leave the recording out, or cut it elsewhere."
        raise refusal(path, "a missing sample in every row", "rows in which no channel is missing", remedy)
    return tuple(found)


def _place(table: Table, label: str) -> int:
    n_found = table.names.count(label)
    if n_found == 1:
        return table.names.index(label)
    if not n_found:
        names = ", ".join(table.names)
        raise refusal(
            table.path, f"no column {label}", f"one of {names}", "Correct `channels` in study.yaml."
        )
    found = f"{n_found} columns named {label}"
    raise refusal(table.path, found, "names that occur once", "Rename them in the header line.")


def _unit_uv(path: Path, declared: Declared) -> float:
    remedy = "Declare it in study.yaml, for example `load: {unit: uV}`."
    if declared.unit is None:
        raise refusal(path, "no declared unit", ", ".join(KNOWN_UNITS), remedy)
    try:
        return microvolts_per(declared.unit)
    except UnknownUnitError as error:
        found = f"the declared unit {declared.unit!r}"
        raise UnknownUnitError(str(refusal(path, found, ", ".join(KNOWN_UNITS), remedy))) from error


def _rate_hz(table: Table, declared: Declared) -> Fraction:
    clock = table.clock
    if declared.rate_hz is None:
        if table.rate_hz is None:
            found = f"a column {TIME_COLUMN} that allows {clock}" if clock else "no sampling rate"
            remedy = "Declare it in study.yaml, for example `load: {rate_hz: 500}`."
            raise refusal(
                table.path, found, f"a column {TIME_COLUMN} of enough digits or a declaration", remedy
            )
        return table.rate_hz
    if clock and not clock.agrees_with(declared.rate_hz):
        found = f"a declared rate of {float(declared.rate_hz):.12g} Hz"
        remedy = "Correct the declaration or leave it away."
        raise refusal(table.path, found, f"{clock}, as {TIME_COLUMN} says", remedy)
    return declared.rate_hz


def _numbers(table: Table, label: str, column: Column, *, missing_allowed: bool) -> NDArray[np.float64]:
    """Return a column as numbers, NaN where a sample is missing; refused unless that is allowed."""
    import numpy as np

    if isinstance(column, tuple):
        blank = [cell.lower() in _MISSING_CELLS for cell in column]
        values = [number(cell) for cell in column]
        strange = [value is None and not none for value, none in zip(values, blank, strict=True)]
        numbers = np.array([np.nan if value is None else value for value in values], dtype=np.float64)
    else:
        numbers, strange = column, [False]
    faulty = np.isinf(numbers) | np.array(strange)
    if not missing_allowed:
        faulty |= np.isnan(numbers)
    rows = np.flatnonzero(faulty)
    if rows.size:
        cells = [column[row] if isinstance(column, tuple) else str(column[row]) for row in rows[:1].tolist()]
        raise _not_a_number(table, label, cells[0], rows.tolist())
    return numbers


def _not_a_number(table: Table, label: str, cell: str, rows: list[int]) -> Exception:
    found = f"{repr(cell) if cell else 'a blank cell'} in {table.row_name(rows[0])}, column {label}"
    if len(rows) > 1:
        others = ", ".join(str(row + 1) for row in rows[1:_NAMED_ROWS])
        found += f", and {len(rows) - 1} more (rows {others}{', ...' if len(rows) > _NAMED_ROWS else ''})"
    hint = "Write decimal points, not commas." if "," in cell else _MISSING
    return refusal(table.path, found, "a finite number", hint)


def number(cell: str) -> float | None:
    """Return the number that a cell holds; None if it holds none."""
    try:
        return float(cell) if "_" not in cell else None
    except ValueError:
        return None
