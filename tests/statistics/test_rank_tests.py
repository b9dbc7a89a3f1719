"""Rank tests: what is counted, what is tied, and what few people cannot give."""

from __future__ import annotations

import itertools
from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np
import pytest

from bandcairn.statistics.rank_tests import mann_whitney, wilcoxon
from bandcairn.statistics.ranks import doubled_ranks, group_rank_sums, signed_rank_sums

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from bandcairn.statistics.result import Outcome


def _of_differences(differences: Sequence[float], confidence: float = 0.95) -> Outcome:
    return wilcoxon(differences, [0.0] * len(differences), confidence)


def test_tied_values_share_the_mean_of_their_ranks() -> None:
    """5 is first, the two 7 share 2 and 3, 9 is fourth; all are doubled."""
    assert doubled_ranks([7.0, 9.0, 5.0, 7.0]) == [5, 8, 2, 5]


def test_six_rises_give_the_smallest_p_of_six_pairs_and_the_widest_interval() -> None:
    """Two of 64 sign patterns are as extreme; the interval runs over all averages and covers 1 - 2/64."""
    found = _of_differences([1.0, 2.0, 4.0, 8.0, 16.0, 32.0])

    assert (found.status, found.statistic, found.p) == ("ok", 21.0, 2 / 64)
    assert found.interval is not None
    assert (found.interval.low, found.interval.high) == (1.0, 32.0)
    assert found.effect is not None
    assert (found.effect.size, found.effect.interval.high) == (1.0, 1.0)
    assert 0 < found.effect.interval.low < 1
    assert found.notes == ("p exact", "interval of the estimate covers 96.9 %")


def test_five_pairs_have_a_p_but_no_interval_of_95_percent() -> None:
    """The widest interval of five pairs covers 93.75 %: it is not passed off as one of 95 %."""
    found = _of_differences([1.0, 2.0, 4.0, 8.0, 16.0])

    assert (found.p, found.interval) == (2 / 32, None)
    assert "5 people are too few for an interval of 95 %" in found.notes
    assert _of_differences([1.0, 2.0, 4.0, 8.0, 16.0], 0.9).interval is not None


def test_differences_of_zero_leave_the_ranks_but_not_the_estimate() -> None:
    """Of 0, 0, 3 and 5 two are ranked; the median of the ten averages 0 0 0 1.5 1.5 2.5 2.5 3 4 5 is 2."""
    found = _of_differences([0.0, 3.0, 0.0, 5.0])

    assert (found.statistic, found.p, found.estimate) == (3.0, 0.5, 2.0)
    assert "2 of 4 differences are 0, left out of the ranks" in found.notes


def test_differences_that_are_equal_on_paper_are_tied_despite_rounding() -> None:
    """1.1 - 1.0 and 2.1 - 2.0 differ in their last bits; on paper both are 0.1."""
    found = wilcoxon([1.1, 2.1, 3.0], [1.0, 2.0, 3.3], 0.95)

    assert found.statistic == 3.0
    assert found.notes[0] == "p exact, given the ties"


def test_ties_are_counted_over_all_signs() -> None:
    """The distribution with ties is that of every sign pattern of the tied ranks themselves."""
    differences = [1.0, 1.0, -1.0, 2.0, 2.0, -3.0, 4.0]
    ranks = np.array([2.0, 2.0, 2.0, 4.5, 4.5, 6.0, 7.0])
    sums = [float(ranks @ signs) for signs in itertools.product([0, 1], repeat=7)]
    observed = float(ranks[np.array(differences) > 0].sum())

    found = _of_differences(differences)

    assert found.statistic == observed
    assert found.p == 2 * min(sum(s >= observed for s in sums), sum(s <= observed for s in sums)) / 2**7


def test_tied_groups_are_counted_over_all_groupings() -> None:
    """Likewise for the sums of three of seven tied ranks."""
    first, second = [1.0, 2.0, 2.0], [2.0, 3.0, 3.0, 4.0]
    ranks = [1.0, 3.0, 3.0, 3.0, 5.5, 5.5, 7.0]
    sums = [sum(group) for group in itertools.combinations(ranks, 3)]

    found = mann_whitney(first, second, 0.95)

    assert found.statistic == 7 - 6
    assert found.p == pytest.approx(2 * sum(s <= 7 for s in sums) / len(sums), rel=1e-15)


@pytest.mark.parametrize(("test", "n"), [(wilcoxon, 51), (mann_whitney, 26)])
def test_many_people_are_answered_by_the_normal_approximation_and_that_is_told(
    test: Callable[[Sequence[float], Sequence[float], float], Outcome], n: int
) -> None:
    """Beyond 50 people p is an approximation, below it is counted."""
    first, second = np.random.default_rng(3).normal(0.2, 1, (2, n)).tolist()

    assert test(first, second, 0.95).notes == ("p by the normal approximation (more than 50 ranks)",)
    assert test(first[:-1], second[:-1], 0.95).notes[0] == "p exact"


def test_the_approximation_takes_over_where_it_is_close_to_the_count() -> None:
    """At 50 people the two differ by less than 0.004, for pairs and for groups."""
    for sums, places in (
        (signed_rank_sums(range(2, 102, 2)), range(400, 640, 7)),
        (group_rank_sums(range(2, 102, 2), 25), range(500, 640, 7)),
    ):
        smooth = replace(sums, counts=None)
        assert [smooth.p(place) for place in places] == pytest.approx([sums.p(p) for p in places], abs=4e-3)


@pytest.mark.parametrize("n", [7, 30, 60])
@pytest.mark.parametrize("test", [wilcoxon, mann_whitney])
def test_swapping_the_samples_mirrors_the_outcome_to_the_last_bit(
    test: Callable[[Sequence[float], Sequence[float], float], Outcome], n: int
) -> None:
    """Nobody gains by the direction of a contrast, with ties among the values."""
    first, second = np.random.default_rng(n).integers(0, 12, (2, n)).astype(float).tolist()

    one, other = test(first, second, 0.95), test(second, first, 0.95)

    assert (one.p, one.estimate) == (other.p, -(other.estimate or 0.0))
    assert one.interval is not None
    assert other.interval is not None
    assert (one.interval.low, one.interval.high) == (-other.interval.high, -other.interval.low)
    assert one.effect is not None
    assert other.effect is not None
    assert one.effect.size == -other.effect.size
    assert one.effect.interval.low == -other.effect.interval.high


@pytest.mark.parametrize("scale", [1e-200, 1e200])
def test_ranks_do_not_care_for_the_unit(scale: float) -> None:
    """Neither tiny nor huge values change a p value."""
    values = [1.0, -2.0, 4.0, 8.0, -16.0, 32.0]

    assert _of_differences([scale * value for value in values]).p == _of_differences(values).p


def test_what_does_not_vary_has_a_status_and_no_p() -> None:
    """All differences zero, all values equal."""
    for found in (_of_differences([0.0] * 8), mann_whitney([2.0] * 4, [2.0] * 5, 0.95)):
        assert (found.status, found.estimate, found.p, found.interval) == ("no variance", 0.0, None, None)


def test_too_few_people_have_a_status_and_no_p() -> None:
    """One pair, none at all, a group of one, a group of none."""
    assert (_of_differences([3.0]).status, _of_differences([3.0]).estimate) == ("too few people", 3.0)
    assert (_of_differences([]).status, _of_differences([]).estimate) == ("too few people", None)
    alone = mann_whitney([3.0], [1.0, 2.0], 0.95)
    assert (alone.status, alone.estimate, alone.p) == ("too few people", 1.5, None)
    assert mann_whitney([], [1.0, 2.0], 0.95).estimate is None


def test_perfect_separation_keeps_a_finite_interval_of_the_effect() -> None:
    """Three against three people with r = 1 do not prove that it is 1 in everybody."""
    found = mann_whitney([4.0, 5.0, 6.0], [1.0, 2.0, 3.0], 0.95)

    assert found.p == 2 / 20
    assert found.effect is not None
    assert found.effect.size == found.effect.interval.high == 1
    assert 0 < found.effect.interval.low < 0.9
