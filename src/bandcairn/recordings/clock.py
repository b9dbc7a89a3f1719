"""The clock column of delimited text: printed times in, the exact sampling rate out."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING

from bandcairn.recordings.header import as_text
from bandcairn.recordings.refusal import refusal
from bandcairn.signal import Run

if TYPE_CHECKING:
    from pathlib import Path

    import numpy as np
    from numpy.typing import NDArray

    from bandcairn.errors import RecordingError

TIME_COLUMN = "time_s"
_REGULAR = "steps of one length, to half of the last printed digit"
_LOST = "Samples are missing or doubled there: export each regular stretch as a file of its own."
# The hair beyond half a printed digit: sums of binary fractions drift by less than a nanosecond.
_HAIR_S = 1e-9
# Bounded, so that a damaged cell cannot make the table of all cells huge.
_TIME = re.compile(rb"\s*[+-]?(?:[0-9]{1,24}\.?[0-9]{0,24}|\.[0-9]{1,24})(?:[eE][+-]?[0-9]{1,3})?\s*")


@dataclass(frozen=True, slots=True)
class Jump:
    """A row before which whole samples are missing.

    Attributes
    ----------
    row : int
        The row, counted from 0.
    index : int
        Which sample it holds, counted from the first one as if none were missing.
    told : str
        The time that stands there and the one before, for a refusal.
    """

    row: int
    index: int
    told: str


@dataclass(frozen=True, slots=True)
class Clock:
    """What the printed times say of the rate.

    Attributes
    ----------
    slowest_hz, fastest_hz : Fraction or None
        Every rate between them puts each sample within half of the last printed digit of its time; None where
        there is a single row.
    jumps : tuple of Jump
        Rows before which whole samples are missing.
    """

    slowest_hz: Fraction | None
    fastest_hz: Fraction | None
    jumps: tuple[Jump, ...] = ()

    @property
    def rate_hz(self) -> Fraction | None:
        """The simplest fraction among the possible rates; None where two whole numbers are among them."""
        if self.slowest_hz is None or self.fastest_hz is None:
            return None
        if math.floor(self.fastest_hz) > math.ceil(self.slowest_hz):
            return None
        return simplest_between(self.slowest_hz, self.fastest_hz)

    def __str__(self) -> str:
        if self.slowest_hz is None or self.fastest_hz is None:
            return "any rate"
        return f"{float(self.slowest_hz):.9g} to {float(self.fastest_hz):.9g} Hz"

    def runs(self, n_rows: int, rate_hz: Fraction) -> tuple[Run, ...]:
        """Return the gap-free runs of a file of `n_rows` rows."""
        firsts = [(0, 0), *((jump.row, jump.index) for jump in self.jumps)]
        stops = [*(jump.row for jump in self.jumps), n_rows]
        return tuple(
            Run(row, stop, index / rate_hz) for (row, index), stop in zip(firsts, stops, strict=True)
        )

    def agrees_with(self, rate_hz: Fraction) -> bool:
        """Return whether `rate_hz` is among the possible rates."""
        if self.slowest_hz is None or self.fastest_hz is None:
            return True
        return self.slowest_hz <= rate_hz <= self.fastest_hz


def read_clock(path: Path, cells: list[bytes]) -> Clock:
    """Return the rates that fit all printed times.

    Sample k lies at k / rate, so row k bounds the period to (time +- half a digit) / k; the bounds of all
    rows must overlap. Where they do not, a step of more than one and a half periods is taken for missing
    samples, if a whole number of them makes all bounds overlap.

    Parameters
    ----------
    path : Path
        Named in refusals.
    cells : list of bytes
        Times in seconds as printed, one a row.

    Returns
    -------
    Clock
        The range of possible rates.

    Raises
    ------
    RecordingError
        If a cell is no number, if the first time is not 0, or if the rows do not fit one rate.
    """
    import numpy as np

    _check_times(path, cells)
    texts = np.strings.strip(np.array(cells))
    times_s = texts.astype(np.float64)
    slack_s = 0.5 * 10.0 ** -_decimals(texts) + _HAIR_S
    if abs(times_s[0]) > slack_s[0]:
        remedy = "Time counts from the first sample: export it so, or leave the column away."
        raise refusal(path, f"{as_text(cells[0])} in row 1, column {TIME_COLUMN}", "0", remedy)
    if len(cells) == 1:
        return Clock(None, None)
    index = np.arange(len(cells))
    bounds_s = _period_bounds_s(times_s, slack_s, index)
    jumps: tuple[Jump, ...] = ()
    if bounds_s.off is not None:
        index = _index_with_jumps(times_s, slack_s)
        first_off = bounds_s.off
        bounds_s = _period_bounds_s(times_s, slack_s, index)
        rows = np.flatnonzero(np.diff(index) > 1) + 1
        if bounds_s.off is not None or not rows.size:
            raise refusal(path, _jump_told(cells, first_off), _REGULAR, _LOST)
        jumps = tuple(Jump(int(row), int(index[row]), _jump_told(cells, int(row))) for row in rows)
    if bounds_s.shortest_s <= 0:
        found = f"times in column {TIME_COLUMN} too coarse to tell the rate"
        remedy = "Print more digits, or leave the column away and declare `load: {rate_hz: ...}`."
        raise refusal(path, found, "more digits than one sample needs", remedy)
    return Clock(1 / Fraction(bounds_s.longest_s), 1 / Fraction(bounds_s.shortest_s), jumps)


def refused_jump(path: Path, jump: Jump) -> RecordingError:
    """Return the error for a file whose missing samples are not declared as gaps."""
    return refusal(path, jump.told, _REGULAR, f"{_LOST} Or declare `load: {{missing: gap}}` in study.yaml.")


@dataclass(frozen=True, slots=True)
class _Bounds:
    """Shortest and longest period that fit all rows; the first row that fits none, if there is one."""

    shortest_s: float
    longest_s: float
    off: int | None


def _period_bounds_s(
    times_s: NDArray[np.float64], slack_s: NDArray[np.float64], index: NDArray[np.intp]
) -> _Bounds:
    import numpy as np

    shortest_s = np.maximum.accumulate((times_s[1:] - slack_s[1:]) / index[1:])
    longest_s = np.minimum.accumulate((times_s[1:] + slack_s[1:]) / index[1:])
    off = np.flatnonzero((shortest_s > longest_s) | (longest_s <= 0))
    return _Bounds(float(shortest_s[-1]), float(longest_s[-1]), int(off[0]) + 1 if off.size else None)


def _index_with_jumps(times_s: NDArray[np.float64], slack_s: NDArray[np.float64]) -> NDArray[np.intp]:
    """Return which sample each row holds if long steps are missing samples; plain rows if there are none."""
    import numpy as np

    steps_s = np.diff(times_s)
    typical_s = float(np.median(steps_s))
    late = np.flatnonzero(steps_s > 1.5 * typical_s) + 1
    if typical_s <= 0 or not late.size:
        return np.arange(len(times_s))
    edges = np.concatenate(([0], late, [len(times_s)]))
    longest = int(np.argmax(np.diff(edges)))
    first, stop = int(edges[longest]), int(edges[longest + 1])
    period_s = _period_s(times_s[first:stop], slack_s[first:stop]) or typical_s
    skipped = np.zeros(len(times_s), dtype=np.intp)
    skipped[late] = np.rint(steps_s[late - 1] / period_s).astype(np.intp) - 1
    index: NDArray[np.intp] = np.arange(len(times_s)) + np.cumsum(np.maximum(skipped, 0))
    return index


def _period_s(times_s: NDArray[np.float64], slack_s: NDArray[np.float64]) -> float | None:
    """Return the simplest period of a stretch; None where it is too short or too coarse to tell one."""
    import numpy as np

    if len(times_s) < 2:
        return None
    bounds_s = _period_bounds_s(times_s - times_s[0], slack_s + slack_s[0], np.arange(len(times_s)))
    if bounds_s.off is not None or bounds_s.shortest_s <= 0:
        return None
    return float(1 / simplest_between(1 / Fraction(bounds_s.longest_s), 1 / Fraction(bounds_s.shortest_s)))


def simplest_between(low: Fraction, high: Fraction) -> Fraction:
    """Return the fraction of smallest denominator with low <= it <= high, both positive.

    The walk down the Stern-Brocot tree, written as a continued fraction.
    """
    whole = low.numerator // low.denominator
    if whole == low:
        return Fraction(whole)
    if whole + 1 <= high:
        return Fraction(whole + 1)
    return whole + 1 / simplest_between(1 / (high - whole), 1 / (low - whole))


def _check_times(path: Path, cells: list[bytes]) -> None:
    row = next((row for row, cell in enumerate(cells) if not _TIME.fullmatch(cell)), None)
    if row is not None:
        found = f"{as_text(cells[row])[:40]!r} in row {row + 1} (line {row + 2}), column {TIME_COLUMN}"
        raise refusal(path, found, "a time in seconds from 0, with a decimal point", "Restore the original.")


def _decimals(texts: NDArray[np.bytes_]) -> NDArray[np.float64]:
    """Return how many digits stand behind the point of each text; an exponent moves the point."""
    import numpy as np

    points = np.strings.find(texts, b".")
    decimals = np.where(points < 0, 0, np.strings.str_len(texts) - points - 1).astype(np.float64)
    exponents = (np.strings.find(texts, b"e") >= 0) | (np.strings.find(texts, b"E") >= 0)
    for row in np.flatnonzero(exponents):
        mantissa, exponent = texts[row].lower().split(b"e")
        decimals[row] = len(mantissa.partition(b".")[2]) - int(exponent)
    return decimals


def _jump_told(cells: list[bytes], row: int) -> str:
    before, here = as_text(cells[row - 1]), as_text(cells[row])
    return f"{here} in row {row + 1} (line {row + 2}), column {TIME_COLUMN}, after {before}"
