"""Permutation tests of a mean difference: signs flipped within people, or people exchanged between groups.

Where there are no more than 2**15 arrangements all of them are made, else the observed one and 2**15 - 1 random ones.
What is told does not depend on the order of the rows nor on the names of the people: values are put in an order of
their own before any random number is drawn.
"""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.statistics.effect_sizes import cohens_d_z, hedges_g
from bandcairn.statistics.moments import is_rounding, mean, root_of_squares, rounding_of, standard_deviation
from bandcairn.statistics.result import Interval, Outcome

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray


_FEWEST = 2
_MOST_ARRANGEMENTS = 2**15
# Arrangements at a time, so that a thousand people fit into the memory.
_BLOCK = 2**11


@dataclass(frozen=True, slots=True)
class _Arrangements:
    """Who is moved in each arrangement, the observed one first, in which nobody is.

    Attributes
    ----------
    moved : numpy.ndarray of bool, shape (n_arrangements, n_people)
        Whose sign is flipped, or who stands in the other group.
    exact : bool
        Whether these are all there are.
    """

    moved: NDArray[np.bool_]
    exact: bool

    def words(self, what: str, seed: int) -> str:
        n = len(self.moved)
        drawn = f"all {n} {what}" if self.exact else f"the observed and {n - 1} random {what}, seed {seed}"
        return f"p of the mean difference from {drawn}"


def sign_flips(
    first: Sequence[float], second: Sequence[float], confidence: float, *, seed: int = 0
) -> Outcome:
    """Test the mean of the differences of pairs by flipping their signs.

    Assumes that the differences are symmetric about their centre. The interval holds every shift that the test does
    not refuse, and the p value is twice the smaller tail, the observed arrangement counted in both.

    Parameters
    ----------
    first, second : sequence of float
        One value a person, in the same order of people.
    confidence : float
        Coverage of both intervals. That of the effect size, Cohen's d_z, assumes normal differences.
    seed : int
        Of the random arrangements, where there are more than 2**15.

    Returns
    -------
    Outcome
        Status "too few people" below 2 pairs, "no variance" if all differences are equal up to rounding.

    References
    ----------
    Fisher RA (1935) The Design of Experiments, Oliver & Boyd, section 21.
    Hartigan JA (1969) Using subsample values as typical values. J Am Stat Assoc 64:1303-1317: the interval.
    Phipson B, Smyth GK (2010) Permutation p-values should never be zero. Stat Appl Genet Mol Biol 9:39: the observed
    arrangement counts.
    """
    differences = [one - other for one, other in zip(first, second, strict=True)]
    n = len(differences)
    if n < _FEWEST:
        return Outcome("too few people", differences[0] if differences else None)
    estimate, deviation = mean(differences), standard_deviation(differences)
    if is_rounding(deviation, [*first, *second]):
        return Outcome("no variance", estimate)
    # The same order for the swapped contrast: by size, then those that agree with the estimate.
    ordered = np.array(
        sorted(differences, key=lambda value: (abs(value), value * math.copysign(1, estimate)))
    )
    flips = _flips(n, seed)
    moved = _sums(flips.moved, ordered)
    # The sum falls by twice what is flipped; a shift is refused when the mean of too many flipped sets is beyond it.
    shifts = _shifts(moved, flips.moved.sum(axis=1))
    effect = cohens_d_z(estimate / (deviation / math.sqrt(n)), n, confidence)
    interval = _interval(shifts, confidence)
    return Outcome(
        status="ok",
        estimate=estimate,
        interval=interval,
        statistic=estimate,
        p=_p(-moved, [*first, *second]),
        effect=effect,
        notes=(flips.words("sign flips", seed), *_remarks(interval, confidence)),
    )


def label_exchange(
    first: Sequence[float], second: Sequence[float], confidence: float, *, seed: int = 0
) -> Outcome:
    """Test the difference of two groups' means by exchanging their members.

    Assumes that the groups differ by a shift alone: under unequal spreads *and* sizes it errs more or less often than
    it says. The interval holds every shift that the test does not refuse, and the p value is twice the smaller tail,
    the observed arrangement counted in both.

    Parameters
    ----------
    first, second : sequence of float
        One value a person.
    confidence : float
        Coverage of both intervals. That of the effect size, Hedges' g, assumes normal values of equal variance.
    seed : int
        Of the random arrangements, where there are more than 2**15.

    Returns
    -------
    Outcome
        Status "too few people" below 2 people in a group, "no variance" if no group varies beyond rounding.

    References
    ----------
    Pitman EJG (1937) Significance tests which may be applied to samples from any populations. Suppl J R Stat Soc
    4:119-130.
    Garthwaite PH (1996) Confidence intervals from randomization tests. Biometrics 52:1387-1393.
    Phipson B, Smyth GK (2010) Stat Appl Genet Mol Biol 9:39: the observed arrangement counts.
    """
    if min(len(first), len(second)) < _FEWEST:
        return Outcome("too few people", mean(first) - mean(second) if first and second else None)
    estimate = mean(first) - mean(second)
    n_first, n_second = len(first), len(second)
    pooled = math.hypot(root_of_squares(first), root_of_squares(second)) / math.sqrt(n_first + n_second - 2)
    if is_rounding(pooled, [*first, *second]):
        return Outcome("no variance", estimate)
    # The same group leads when the contrast is swapped: the smaller one, of equal ones the one with the larger mean.
    swapped = (n_second, -mean(second)) < (n_first, -mean(first))
    lead, other = (second, first) if swapped else (first, second)
    exchanges = _exchanges(len(lead), len(other), seed)
    # Who leaves the lead counts as he is, who joins it with the opposite sign.
    moved = _sums(exchanges.moved, np.array([*sorted(lead), *(-value for value in sorted(other))]))
    shifts = _shifts(moved, exchanges.moved[:, : len(lead)].sum(axis=1))
    interval = _interval(-shifts if swapped else shifts, confidence)
    return Outcome(
        status="ok",
        estimate=estimate,
        interval=interval,
        statistic=estimate,
        p=_p(moved if swapped else -moved, [*first, *second]),
        effect=hedges_g(estimate, pooled, n_first, n_second, confidence),
        notes=(exchanges.words("label exchanges", seed), *_remarks(interval, confidence)),
    )


def _p(gains: NDArray[np.float64], values: Sequence[float]) -> float:
    """Return twice the smaller tail; `gains` is what each arrangement adds to the observed sum."""
    # Sums that are equal on paper differ by their rounding.
    tolerance = len(values) * rounding_of(values)
    tail = min(int((gains >= -tolerance).sum()), int((gains <= tolerance).sum()))
    return min(1.0, 2 * tail / len(gains))


def _interval(shifts: NDArray[np.float64], confidence: float) -> Interval | None:
    """Return the shifts that are not refused; `shifts` are those at which an arrangement equals the observed one."""
    n_outside = math.floor((1 - confidence) / 2 * len(shifts) * (1 + 1e-12))
    known = np.sort(shifts[~np.isnan(shifts)])
    # The observed arrangement has no shift of its own and lies beyond both ends.
    place = n_outside - (len(shifts) - len(known))
    if not 0 <= place < len(known):
        return None
    return Interval(float(known[place]), float(known[-1 - place]))


def _remarks(interval: Interval | None, confidence: float) -> tuple[str, ...]:
    return () if interval else (f"too few people for an interval of {100 * confidence:g} %",)


def _sums(moved: NDArray[np.bool_], values: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the sum of the moved values in each arrangement, by a sum whose bits do not depend on processors."""
    return np.concatenate(
        [np.where(block, values, 0.0).sum(axis=1) for block in np.split(moved, _cuts(len(moved)))]
    )


def _cuts(n_rows: int) -> range:
    return range(_BLOCK, n_rows, _BLOCK)


def _shifts(moved_sums: NDArray[np.float64], n_moved: NDArray[np.int64]) -> NDArray[np.float64]:
    """Return the shift at which an arrangement equals the observed one; NaN where it is the observed one."""
    shifts = np.full(len(moved_sums), np.nan)
    np.divide(moved_sums, n_moved, out=shifts, where=n_moved > 0)
    return shifts


# The channels of a question have as many people each.
@lru_cache(maxsize=4)
def _flips(n: int, seed: int) -> _Arrangements:
    if 2**n <= _MOST_ARRANGEMENTS:
        return _Arrangements((np.arange(2**n)[:, None] >> np.arange(n)) % 2 == 1, exact=True)
    rng = np.random.default_rng(seed)
    moved = np.concatenate([rng.random((_BLOCK, n)) < 0.5 for _ in range(_MOST_ARRANGEMENTS // _BLOCK)])
    moved[0] = False
    return _Arrangements(moved, exact=False)


@lru_cache(maxsize=4)
def _exchanges(n_lead: int, n_other: int, seed: int) -> _Arrangements:
    n = n_lead + n_other
    n_all = math.comb(n, n_lead)
    exact = n_all <= _MOST_ARRANGEMENTS
    leads = np.zeros((n_all if exact else _MOST_ARRANGEMENTS, n), dtype=bool)
    if exact:
        # In this order the first leads as observed.
        members = np.array(list(itertools.combinations(range(n), n_lead)))
        np.put_along_axis(leads, members, values=True, axis=1)
    else:
        rng = np.random.default_rng(seed)
        for block in np.split(leads, _cuts(len(leads))):
            drawn = np.argpartition(rng.random(block.shape), n_lead, axis=1)[:, :n_lead]
            np.put_along_axis(block, drawn, values=True, axis=1)
        leads[0] = np.arange(n) < n_lead
    leads[:, :n_lead] ^= True
    return _Arrangements(leads, exact=exact)
