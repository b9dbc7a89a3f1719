"""From rows to people: one number a person and level, and the word on everyone who is left out."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from bandcairn.errors import StepError
from bandcairn.statistics.moments import mean
from bandcairn.statistics.scales import scale_of

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from bandcairn.statistics.comparison import Comparison


@dataclass(frozen=True, slots=True)
class Sample:
    """The people of a comparison, one value each a level, on the scale of the comparison.

    Attributes
    ----------
    first, second : tuple of float
        Sorted by the people's names; aligned person by person in the within design.
    n_participants : int
        Pairs, or people of both groups together.
    n_observations : int
        Measured values behind them.
    notes : tuple of str
        Who was left out and why, and what was dropped or averaged.
    first_measured, second_measured : tuple of float
        The same people's values as measured.
    n_first_available, n_second_available : int
        People with a usable value at the level, whether they count or not: a pair may lack its other half.
    """

    first: tuple[float, ...]
    second: tuple[float, ...]
    n_participants: int
    n_observations: int
    notes: tuple[str, ...]
    first_measured: tuple[float, ...]
    second_measured: tuple[float, ...]
    n_first_available: int
    n_second_available: int


@dataclass(slots=True)
class _Cell:
    """What one person gave at one level."""

    values: list[float] = field(default_factory=list)
    n_missing: int = 0


@dataclass(frozen=True, slots=True)
class _Kept:
    """The cells that count, and the word on the others."""

    first: list[_Cell]
    second: list[_Cell]
    notes: list[str]


@dataclass(frozen=True, slots=True)
class _Cells:
    """Cells by person, for each of the two levels."""

    first: dict[str, _Cell]
    second: dict[str, _Cell]

    def people(self) -> list[str]:
        return sorted(self.first.keys() | self.second.keys())


def gather(
    values: Sequence[float | None], participants: Sequence[str], levels: Sequence[str], comparison: Comparison
) -> Sample:
    """Sort rows into people, average each person's values at a level, and put the means on the scale.

    Parameters
    ----------
    values : sequence of float or None
        Measured values; None and NaN count as missing.
    participants, levels : sequence of str
        Whose value each is, and at which level of the factor. Rows of other levels are ignored.
    comparison : Comparison
        What is asked.

    Raises
    ------
    StepError
        If the three differ in length, a participant has no name, a value is infinite, or someone stands in
        both groups of a between comparison.
    """
    _refuse_unequal_lengths(values, participants, levels)
    cells = _Cells({}, {})
    by_level = {comparison.first: cells.first, comparison.second: cells.second}
    for row, (value, person, level) in enumerate(zip(values, participants, levels, strict=True)):
        if level in by_level:
            _put(value, by_level[level].setdefault(_name(person, row), _Cell()), row)
    absent = _absent_levels(by_level, levels)
    kept = _pairs(cells, comparison) if comparison.design == "within" else _groups(cells, comparison)
    return _sample(kept, cells, comparison, absent)


def _sample(kept: _Kept, cells: _Cells, comparison: Comparison, absent: tuple[str, ...]) -> Sample:
    n_first, n_second = len(kept.first), len(kept.second)
    n_observations = sum(len(cell.values) for cell in (*kept.first, *kept.second))
    notes = [*absent, *kept.notes, *_averaged(n_observations, n_first + n_second)]
    if comparison.design == "between":
        notes.append(f"people: {comparison.first} {n_first}, {comparison.second} {n_second}")
    first, second = (tuple(mean(cell.values) for cell in group) for group in (kept.first, kept.second))
    scale = scale_of(comparison.scale)
    return Sample(
        first=tuple(scale.apply(value) for value in first),
        second=tuple(scale.apply(value) for value in second),
        n_participants=n_first if comparison.design == "within" else n_first + n_second,
        n_observations=n_observations,
        notes=tuple(notes),
        first_measured=first,
        second_measured=second,
        n_first_available=_n_available(cells.first, comparison.first, comparison.scale),
        n_second_available=_n_available(cells.second, comparison.second, comparison.scale),
    )


def _n_available(column: dict[str, _Cell], level: str, scale: str) -> int:
    return sum(not _fault(cell, level, scale) for cell in column.values())


def _refuse_unequal_lengths(*columns: Sequence[object]) -> None:
    lengths = [len(column) for column in columns]
    if len(set(lengths)) > 1:
        raise StepError(
            "values, participants and levels: found {}, {} and {} rows; allowed: as many of each".format(
                *lengths
            )
        )


def _name(person: object, row: int) -> str:
    if not isinstance(person, str) or not person.strip():
        raise StepError(
            f"row {row}: found participant {person!r}; allowed: a name as text. Give every row one"
        )
    return person


def _put(value: float | None, cell: _Cell, row: int) -> None:
    if value is None or math.isnan(value):
        cell.n_missing += 1
    elif math.isinf(value):
        raise StepError(f"row {row}: found {value}; allowed: a finite value, or None where there is none")
    else:
        cell.values.append(float(value))


def _absent_levels(by_level: dict[str, dict[str, _Cell]], levels: Iterable[object]) -> tuple[str, ...]:
    """Tell of a level that no row has, with the levels there are: the sign of a misspelt name."""
    found = ", ".join(sorted({str(level) for level in levels})) or "none"
    return tuple(
        f"no row at {level} (levels found: {found})" for level, cells in by_level.items() if not cells
    )


def _pairs(cells: _Cells, comparison: Comparison) -> _Kept:
    """Keep the people who have a usable value at both levels."""
    kept: list[str] = []
    notes: list[str] = []
    for person in cells.people():
        faults = [
            fault
            for level, column in ((comparison.first, cells.first), (comparison.second, cells.second))
            if (fault := _fault(column.get(person), level, comparison.scale))
        ]
        if faults:
            notes.append(f"{person} left out: {', '.join(faults)}")
        else:
            kept.append(person)
    first, second = ([column[person] for person in kept] for column in (cells.first, cells.second))
    notes += _remarks(kept, first, comparison.first) + _remarks(kept, second, comparison.second)
    return _Kept(first, second, notes)


def _groups(cells: _Cells, comparison: Comparison) -> _Kept:
    """Keep the people of each group who have a usable value."""
    both = sorted(cells.first.keys() & cells.second.keys())
    if both:
        raise StepError(
            f"{comparison.factor}: found {', '.join(both)} at {comparison.first} and at {comparison.second}; "
            "allowed: each participant in one group. Compare within participants, or correct the design column"
        )
    samples: list[list[_Cell]] = []
    notes: list[str] = []
    for level, column in ((comparison.first, cells.first), (comparison.second, cells.second)):
        faults = {person: _fault(column[person], level, comparison.scale) for person in sorted(column)}
        notes += [f"{person} left out: {fault}" for person, fault in faults.items() if fault]
        kept = [person for person, fault in faults.items() if not fault]
        samples.append([column[person] for person in kept])
        notes += _remarks(kept, samples[-1], level)
    first, second = samples
    return _Kept(first, second, notes)


def _fault(cell: _Cell | None, level: str, scale_name: str) -> str:
    """Return why a cell cannot be used, or nothing."""
    if cell is None:
        return f"lacks {level}"
    if not cell.values:
        return f"{level} has no value"
    scale = scale_of(scale_name)
    centre = mean(cell.values)
    if not scale.holds(centre):
        return f"{level} is {centre:.6g}, {scale_name} needs {scale.domain}"
    return ""


def _remarks(people: list[str], cells: list[_Cell], level: str) -> list[str]:
    """Tell of missing values beside which others of the same person and level remain."""
    return [
        f"{person} {level}: {cell.n_missing} of {cell.n_missing + len(cell.values)} values missing, dropped"
        for person, cell in zip(people, cells, strict=True)
        if cell.n_missing
    ]


def _averaged(n_observations: int, n_means: int) -> list[str]:
    if n_observations == n_means:
        return []
    return [f"{n_observations} values averaged to {n_means}, one a person and level"]
