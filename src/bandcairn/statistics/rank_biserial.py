"""The rank-biserial correlation of pairs and of groups, with its interval.

The interval holds every value from which the observed one is no more than z standard deviations away, with mean and
standard deviation of the correlation under normal values of that shift. Unlike a bootstrap it needs no random
numbers and has a width when all differences have one sign.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

from bandcairn.statistics.result import Effect, Interval

if TYPE_CHECKING:
    from collections.abc import Callable

# At a shift of six standard deviations the correlation is 1 in a float.
_FARTHEST = 6.0
_HALVINGS = 60


@dataclass(frozen=True, slots=True)
class _Expected:
    """Mean and standard deviation of the correlation at some shift."""

    mean: float
    deviation: float


@dataclass(frozen=True, slots=True)
class _Shares:
    """P(A > 0), and P(A > 0 and B > 0) of two normal variables that correlate by a half."""

    one: float
    both: float


def matched_pairs_rank_biserial(
    positive_sum: float, negative_sum: float, n_pairs: int, confidence: float
) -> Effect:
    """Return the share of the rank sum that speaks for a rise minus the share that speaks against it.

    Parameters
    ----------
    positive_sum, negative_sum : float
        Sums of the ranks of positive and of negative differences.
    n_pairs : int
        Differences other than 0, at least 1.
    confidence : float
        Coverage of the interval, which assumes normal differences.

    References
    ----------
    Kerby DS (2014) The simple difference formula. Comprehensive Psychology 3:1.
    Lehmann EL (1975) Nonparametrics, Holden-Day, ch. 4: variance of the rank sum at a shift (from memory; it gives
    n(n + 1)(2n + 1)/24 at none, and simulation bears it out at others).
    """
    size = (positive_sum - negative_sum) / (positive_sum + negative_sum)

    def expected(shift: float) -> _Expected:
        own, with_other = _shares(shift), _shares(shift * math.sqrt(2))
        n, p, p1 = n_pairs, own.one, with_other.one
        variance = n * (n - 1) * (n - 2) * (with_other.both - p1**2)
        variance += n * (n - 1) / 2 * (2 * (p - p1) ** 2 + 3 * p1 * (1 - p1)) + n * p * (1 - p)
        whole = n * (n + 1) / 2
        mean = (n * p + n * (n - 1) / 2 * p1) / whole
        return _Expected(2 * mean - 1, 2 * math.sqrt(max(0.0, variance)) / whole)

    return Effect("matched-pairs rank-biserial r", size, _interval(size, expected, confidence))


def rank_biserial(u: float, n_first: int, n_second: int, confidence: float) -> Effect:
    """Return P(first > second) - P(first < second) over all pairs of people.

    Parameters
    ----------
    u : float
        Pairs of people in which first exceeds second, ties as halves.
    n_first, n_second : int
        People in the groups, at least 1 each.
    confidence : float
        Coverage of the interval, which assumes normal values of equal spread.

    References
    ----------
    Cureton EE (1956) Rank-biserial correlation. Psychometrika 21:287-290.
    Hanley JA, McNeil BJ (1982) Radiology 143:29-36: variance of the share of pairs.
    """
    n_comparisons = n_first * n_second
    size = (2 * u - n_comparisons) / n_comparisons

    def expected(shift: float) -> _Expected:
        shares = _shares(shift)
        variance = shares.one * (1 - shares.one) + (n_first + n_second - 2) * (shares.both - shares.one**2)
        return _Expected(2 * shares.one - 1, 2 * math.sqrt(max(0.0, variance) / n_comparisons))

    return Effect("rank-biserial r", size, _interval(size, expected, confidence))


def _shares(shift: float) -> _Shares:
    """Return the probabilities at a shift in standard deviations.

    References
    ----------
    Owen DB (1956) Tables for computing bivariate normal probabilities. Ann Math Stat 27:1075-1090.
    """
    from scipy.special import ndtr, owens_t

    one = float(ndtr(shift))
    return _Shares(one, one - 2 * float(owens_t(shift, 1 / math.sqrt(3))))


def _interval(size: float, expected: Callable[[float], _Expected], confidence: float) -> Interval:
    from scipy.special import ndtri

    z = float(ndtri(0.5 + confidence / 2))
    return Interval(_lower(size, expected, z), -_lower(-size, expected, z))


def _lower(size: float, expected: Callable[[float], _Expected], z: float) -> float:
    """Return the least mean from which `size` is no more than z standard deviations away, by halving."""
    low, high = -_FARTHEST, _FARTHEST
    if size <= -1:
        return -1.0
    for _ in range(_HALVINGS):
        middle = (low + high) / 2
        at = expected(middle)
        if size - at.mean > z * at.deviation:
            low = middle
        else:
            high = middle
    return expected(low).mean
