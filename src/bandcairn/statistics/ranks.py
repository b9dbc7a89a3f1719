"""Ranks with ties, and the distributions of their sums when nothing but chance decides.

Ranks are doubled, so that the mean rank of tied values is a whole number, and counted rather than approximated: the
distributions hold with ties as without.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

# Up to here every count is below 2**53, hence exact in a float.
MOST_COUNTED = 50
# Half the step of a rank sum, added where a smooth distribution stands for one in steps.
_CONTINUITY = 0.5


@dataclass(frozen=True, slots=True)
class RankSums:
    """The distribution of a rank sum under the null hypothesis.

    Attributes
    ----------
    mean, deviation : float
        Of the sum of ranks (not doubled).
    counts : numpy.ndarray or None
        ``counts[s]`` arrangements have the doubled sum ``s``; None where there are too many to count.
    """

    mean: float
    deviation: float
    counts: NDArray[np.float64] | None

    def p(self, rank_sum: float) -> float:
        """Return the two-sided p value: twice the smaller tail, at most 1."""
        if self.counts is not None:
            place = round(2 * rank_sum)
            tail = min(math.fsum(self.counts[: place + 1]), math.fsum(self.counts[place:]))
            return min(1.0, 2 * tail / math.fsum(self.counts))
        from scipy.special import ndtr

        away = max(0.0, abs(rank_sum - self.mean) - _CONTINUITY)
        return 2 * float(ndtr(-away / self.deviation))


@dataclass(frozen=True, slots=True)
class Cut:
    """How many of the ordered estimates lie outside an interval at each end.

    Attributes
    ----------
    n_outside : int
        At each end.
    coverage : float
        Of the interval, at least the one asked for; where it is not counted, the one asked for.
    """

    n_outside: int
    coverage: float


def doubled_ranks(values: Sequence[float], tolerance: float = 0.0) -> list[int]:
    """Return twice the rank of each value, the mean of their ranks for tied ones.

    Parameters
    ----------
    values : sequence of float
        What is ranked.
    tolerance : float
        Neighbours in order that differ by no more are tied.
    """
    order = sorted(range(len(values)), key=values.__getitem__)
    ranks = [0] * len(values)
    start = 0
    for stop in range(1, len(order) + 1):
        if stop == len(order) or values[order[stop]] - values[order[stop - 1]] > tolerance:
            for place in order[start:stop]:
                ranks[place] = start + 1 + stop
            start = stop
    return ranks


def has_ties(doubled: Sequence[int]) -> bool:
    """Tell whether any two ranks are equal."""
    return len(set(doubled)) < len(doubled)


def signed_rank_sums(doubled: Sequence[int]) -> RankSums:
    """Return the distribution of the sum of positive ranks when each sign is as likely as the other.

    Parameters
    ----------
    doubled : sequence of int
        Twice the ranks of the absolute differences.

    References
    ----------
    Wilcoxon F (1945) Individual comparisons by ranking methods. Biometrics Bulletin 1:80-83.
    """
    return _signed(tuple(sorted(doubled)))


# The channels of a question have as many people each, and mostly the same ranks.
@lru_cache(maxsize=16)
def _signed(doubled: tuple[int, ...]) -> RankSums:
    mean = sum(doubled) / 4
    deviation = math.sqrt(sum(rank**2 for rank in doubled)) / 4
    if len(doubled) > MOST_COUNTED:
        return RankSums(mean, deviation, None)
    counts = np.zeros(sum(doubled) + 1)
    counts[0] = 1
    for rank in doubled:
        added = counts.copy()
        added[rank:] += counts[: len(counts) - rank]
        counts = added
    return RankSums(mean, deviation, counts)


def group_rank_sums(doubled: Sequence[int], n_first: int) -> RankSums:
    """Return the distribution of the rank sum of a group when any members are as likely as any others.

    Parameters
    ----------
    doubled : sequence of int
        Twice the ranks of all values.
    n_first : int
        Members of the group.

    References
    ----------
    Mann HB, Whitney DR (1947) On a test of whether one of two random variables is stochastically larger than the
    other. Ann Math Stat 18:50-60.
    """
    return _grouped(tuple(sorted(doubled)), n_first)


@lru_cache(maxsize=16)
def _grouped(doubled: tuple[int, ...], n_first: int) -> RankSums:
    n = len(doubled)
    middle = sum(doubled) / n
    spread = sum((rank - middle) ** 2 for rank in doubled) / (n - 1)
    mean = n_first * middle / 2
    deviation = math.sqrt(n_first * (n - n_first) / n * spread) / 2
    if n > MOST_COUNTED:
        return RankSums(mean, deviation, None)
    counts = np.zeros((n_first + 1, sum(doubled) + 1))
    counts[0, 0] = 1
    for rank in doubled:
        added = counts.copy()
        added[1:, rank:] += counts[:-1, : counts.shape[1] - rank]
        counts = added
    return RankSums(mean, deviation, counts[n_first])


def cut_of(sums: RankSums, smallest_sum: float, confidence: float) -> Cut | None:
    """Return how many ordered estimates an interval leaves out at each end, None if it cannot be had.

    Parameters
    ----------
    sums : RankSums
        Distribution without ties: with ties the interval covers no less.
    smallest_sum : float
        The least value that the rank sum can take.
    confidence : float
        Coverage asked for.

    References
    ----------
    Hollander M, Wolfe DA (1973) Nonparametric Statistical Methods, Wiley, sections 3.3 and 4.3 (from memory).
    """
    tail = (1 - confidence) / 2
    if sums.counts is None:
        from scipy.special import ndtri

        reach = sums.mean - smallest_sum - _CONTINUITY + float(ndtri(tail)) * sums.deviation
        return Cut(math.floor(reach), confidence)
    # Without ties every doubled sum is even.
    below = np.cumsum(sums.counts[round(2 * smallest_sum) :: 2]) / math.fsum(sums.counts)
    n_outside = int(np.searchsorted(below, tail * (1 + 1e-12), side="right")) - 1
    return None if n_outside < 0 else Cut(n_outside, 1 - 2 * float(below[n_outside]))
