"""Tests by ranks: of pairs, and of two independent groups."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bandcairn.statistics.moments import is_rounding, rounding_of
from bandcairn.statistics.p_values import remarks_on, tellable
from bandcairn.statistics.rank_biserial import matched_pairs_rank_biserial, rank_biserial
from bandcairn.statistics.ranks import (
    MOST_COUNTED,
    cut_of,
    doubled_ranks,
    group_rank_sums,
    has_ties,
    signed_rank_sums,
)
from bandcairn.statistics.result import Interval, Outcome

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from bandcairn.statistics.ranks import Cut, RankSums

_FEWEST = 2


def wilcoxon(first: Sequence[float], second: Sequence[float], confidence: float) -> Outcome:
    """Test by signed ranks whether the differences of pairs lie symmetrically about zero.

    The statistic is the sum of the ranks of positive differences. Differences of zero are left out of the test, not
    of the estimate: the pseudomedian, which is the median of the means of any two differences. The p value is
    counted over all signs up to 50 differences, with ties as they are; beyond, it is that of the normal distribution
    with the variance of the tied ranks and a continuity correction.

    Parameters
    ----------
    first, second : sequence of float
        One value a person, in the same order of people.
    confidence : float
        Coverage of both intervals; the counted one of the estimate covers a little more.

    Returns
    -------
    Outcome
        Status "too few people" below 2 pairs, "no variance" if no pair differs beyond rounding.

    References
    ----------
    Wilcoxon F (1945) Individual comparisons by ranking methods. Biometrics Bulletin 1:80-83.
    Hodges JL, Lehmann EL (1963) Estimates of location based on rank tests. Ann Math Stat 34:598-611.
    """
    differences = sorted(one - other for one, other in zip(first, second, strict=True))
    n = len(differences)
    if n < _FEWEST:
        return Outcome("too few people", differences[0] if differences else None)
    estimates = _walsh_averages(differences)
    estimate = _median(estimates)
    if is_rounding(max(map(abs, differences)), [*first, *second]):
        return Outcome("no variance", estimate)
    tolerance = rounding_of([*first, *second])
    changed = [difference for difference in differences if abs(difference) > tolerance]
    ranks = doubled_ranks([abs(difference) for difference in changed], tolerance)
    sums = signed_rank_sums(ranks)
    positive = sum(rank for rank, change in zip(ranks, changed, strict=True) if change > 0) / 2
    cut = cut_of(signed_rank_sums(range(2, 2 * n + 1, 2)), 0, confidence)
    zeros = (f"{n - len(changed)} of {n} differences are 0, left out of the ranks",)
    return Outcome(
        status="ok",
        estimate=estimate,
        interval=_between_ranks(estimates, cut),
        statistic=positive,
        p=tellable(p := sums.p(positive)),
        effect=matched_pairs_rank_biserial(positive, sum(ranks) / 2 - positive, len(changed), confidence),
        notes=(
            *_how_p(sums, ranks),
            *(zeros if len(changed) < n else ()),
            *_how_covered(cut, n, confidence),
            *remarks_on(p),
        ),
    )


def mann_whitney(first: Sequence[float], second: Sequence[float], confidence: float) -> Outcome:
    """Test by ranks whether the values of two independent groups come from one distribution.

    The statistic is the number of pairs of people in which the first exceeds the second, ties as halves. The estimate
    is the shift: the median of all differences of a person of the first and one of the second group. The p value is
    counted over all groupings up to 50 people together, with ties as they are; beyond, it is that of the normal
    distribution with the variance of the tied ranks and a continuity correction. Groups of different spread are
    different distributions too.

    Parameters
    ----------
    first, second : sequence of float
        One value a person.
    confidence : float
        Coverage of both intervals; the counted one of the estimate covers a little more.

    Returns
    -------
    Outcome
        Status "too few people" below 2 people in a group, "no variance" if all values are equal.

    References
    ----------
    Mann HB, Whitney DR (1947) Ann Math Stat 18:50-60.
    Hodges JL, Lehmann EL (1963) Estimates of location based on rank tests. Ann Math Stat 34:598-611.
    """
    n_first, n_second = len(first), len(second)
    estimates = np.sort(np.subtract.outer(np.asarray(first, float), np.asarray(second, float)), axis=None)
    if min(n_first, n_second) < _FEWEST:
        return Outcome("too few people", _median(estimates) if estimates.size else None)
    values = [*first, *second]
    if is_rounding(max(values) - min(values), values):
        return Outcome("no variance", _median(estimates))
    ranks = doubled_ranks(values, rounding_of(values))
    sums = group_rank_sums(ranks, n_first)
    rank_sum, least = sum(ranks[:n_first]) / 2, n_first * (n_first + 1) / 2
    n = n_first + n_second
    cut = cut_of(group_rank_sums(range(2, 2 * n + 1, 2), n_first), least, confidence)
    return Outcome(
        status="ok",
        estimate=_median(estimates),
        interval=_between_ranks(estimates, cut),
        statistic=rank_sum - least,
        p=tellable(p := sums.p(rank_sum)),
        effect=rank_biserial(rank_sum - least, n_first, n_second, confidence),
        notes=(*_how_p(sums, ranks), *_how_covered(cut, n, confidence), *remarks_on(p)),
    )


def _walsh_averages(differences: Sequence[float]) -> NDArray[np.float64]:
    """Return the means of any two differences, and the differences themselves, in their order."""
    one, other = np.triu_indices(len(differences))
    values = np.asarray(differences, dtype=float)
    return np.sort(values[one] / 2 + values[other] / 2)


def _median(ordered: NDArray[np.float64]) -> float:
    middle = len(ordered) // 2
    return float(ordered[middle] if len(ordered) % 2 else ordered[middle - 1] / 2 + ordered[middle] / 2)


def _between_ranks(ordered: NDArray[np.float64], cut: Cut | None) -> Interval | None:
    if cut is None:
        return None
    return Interval(float(ordered[cut.n_outside]), float(ordered[-1 - cut.n_outside]))


def _how_p(sums: RankSums, ranks: Sequence[int]) -> tuple[str, ...]:
    tied = ", given the ties" if has_ties(ranks) else ""
    if sums.counts is not None:
        return (f"p exact{tied}",)
    corrected = ", corrected for ties" if tied else ""
    return (f"p by the normal approximation{corrected} (more than {MOST_COUNTED} ranks)",)


def _how_covered(cut: Cut | None, n: int, confidence: float) -> tuple[str, ...]:
    """Tell what the interval of the estimate covers, where its steps do not meet the coverage asked for."""
    if cut is None:
        return (f"{n} people are too few for an interval of {100 * confidence:g} %",)
    return (
        () if cut.coverage == confidence else (f"interval of the estimate covers {100 * cut.coverage:.1f} %",)
    )
