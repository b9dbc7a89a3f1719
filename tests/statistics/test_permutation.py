"""Permutation tests: every arrangement by hand, the interval as the inverse of the test, and chance with a seed."""

from __future__ import annotations

import itertools
from typing import TYPE_CHECKING

import numpy as np
import pytest

from bandcairn.statistics import Comparison, compare
from bandcairn.statistics.permutation import label_exchange, sign_flips

if TYPE_CHECKING:
    from collections.abc import Callable

    from bandcairn.statistics.result import Outcome


def test_three_rises_are_two_of_eight_sign_patterns() -> None:
    """All eight patterns of 1, 2, 4 have different sums: only the observed and its mirror are as far out."""
    found = sign_flips([1.0, 2.0, 4.0], [0.0, 0.0, 0.0], 0.7)

    assert (found.status, found.estimate, found.statistic, found.p) == ("ok", 7 / 3, 7 / 3, 2 / 8)
    assert found.interval is not None
    # Of the seven means of subsets, from 1 to 4, the outermost: 75 % cover, 70 % were asked for.
    assert (found.interval.low, found.interval.high) == (1.0, 4.0)
    assert found.notes == ("p of the mean difference from all 8 sign flips",)


def test_exchanged_labels_are_counted_over_all_groupings() -> None:
    """Two of five people: by hand over all ten groupings, ties included."""
    first, second = [7.0, 5.0], [1.0, 5.0, 4.0]
    sums = [sum(pair) for pair in itertools.combinations([*first, *second], 2)]

    found = label_exchange(first, second, 0.8)

    assert found.p == 2 * sum(s >= 12 for s in sums) / 10
    assert found.notes[0] == "p of the mean difference from all 10 label exchanges"


@pytest.mark.parametrize("seed", range(8))
@pytest.mark.parametrize("test", [sign_flips, label_exchange])
def test_the_interval_holds_the_shifts_that_the_test_does_not_refuse(
    test: Callable[..., Outcome], seed: int
) -> None:
    """Just inside either end p is above 5 %, just outside it is not, with unequal groups too."""
    rng = np.random.default_rng(seed)
    first = rng.normal(1, 1, 7)
    second = rng.normal(0, 1, 7 if test is sign_flips else 5 + seed % 4)

    found = test(first.tolist(), second.tolist(), 0.95)

    assert found.interval is not None
    for shift, refused in (
        (found.interval.low - 1e-6, True),
        (found.interval.low + 1e-6, False),
        (found.interval.high - 1e-6, False),
        (found.interval.high + 1e-6, True),
    ):
        p = test((first - shift).tolist(), second.tolist(), 0.95).p
        assert p is not None
        assert (p <= 0.05) is refused


def test_many_people_are_answered_by_seeded_chance_and_that_is_told() -> None:
    """The same seed gives the same p, another one a p nearby; the note names both number and seed."""
    first, second = np.random.default_rng(1).normal(0.3, 1, (2, 20)).tolist()
    for test, what in ((sign_flips, "sign flips"), (label_exchange, "label exchanges")):
        found = test(first, second, 0.95, seed=7)
        other = test(first, second, 0.95, seed=8)

        assert found == test(first, second, 0.95, seed=7)
        assert found.p != other.p
        assert found.p == pytest.approx(other.p, abs=0.02)
        assert found.notes == (f"p of the mean difference from the observed and 32767 random {what}, seed 7",)


def test_no_p_is_zero() -> None:
    """The observed arrangement is one of those that are counted."""
    n = 30
    found = sign_flips([float(i) for i in range(1, n + 1)], [0.0] * n, 0.95)

    assert found.p == 2 / 2**15


@pytest.mark.parametrize("design", ["within", "between"])
def test_neither_order_of_rows_nor_names_of_people_change_the_outcome(design: str) -> None:
    """Chance is drawn for values in an order of their own."""
    rng = np.random.default_rng(5)
    values = rng.lognormal(0, 1, 44).tolist()
    levels = ["a", "b"] * 22
    people = [f"p{i // 2 if design == 'within' else i:02}" for i in range(44)]
    renamed = [f"q{99 - int(name[1:]):02}" for name in people]
    order = rng.permutation(44)
    asked = Comparison(design, "level", "a", "b", "permutation", seed=3)  # type: ignore[arg-type]

    found = compare(values, people, levels, asked)

    assert "seed 3" in found.note
    shuffled = compare(
        [values[i] for i in order], [people[i] for i in order], [levels[i] for i in order], asked
    )
    assert shuffled == found
    assert compare(values, renamed, levels, asked) == found


@pytest.mark.parametrize("sizes", [(9, 9), (6, 20), (20, 6), (20, 20)])
def test_swapping_the_samples_mirrors_the_outcome_to_the_last_bit(sizes: tuple[int, int]) -> None:
    """Nobody gains by the direction of a contrast, by chance neither."""
    rng = np.random.default_rng(sum(sizes))
    first, second = rng.normal(0, 1, sizes[0]).tolist(), rng.normal(0.4, 2, sizes[1]).tolist()
    for test in (sign_flips, label_exchange) if sizes[0] == sizes[1] else (label_exchange,):
        one, other = test(first, second, 0.95), test(second, first, 0.95)

        assert one.p == other.p
        assert one.interval is not None
        assert other.interval is not None
        assert (one.interval.low, one.interval.high) == (-other.interval.high, -other.interval.low)


def test_sums_that_are_equal_on_paper_count_as_equal() -> None:
    """0.1 + 0.2 - 0.3 is not 0 in floats; on paper flipping all three signs changes nothing."""
    assert sign_flips([0.1, 0.2, -0.3], [0.0, 0.0, 0.0], 0.95).p == 1.0


def test_few_people_have_a_p_and_no_interval() -> None:
    """Five pairs cannot give 95 %: told, not stretched."""
    found = sign_flips([1.0, 2.0, 4.0, 8.0, 16.0], [0.0] * 5, 0.95)

    assert (found.p, found.interval) == (2 / 32, None)
    assert found.notes[-1] == "too few people for an interval of 95 %"


def test_what_does_not_vary_or_is_alone_has_a_status_and_no_p() -> None:
    """Constant differences, constant groups, one pair, a group of one."""
    assert sign_flips([1.1, 2.1, 3.1], [1.0, 2.0, 3.0], 0.95).status == "no variance"
    assert label_exchange([1.0, 1.0], [2.0, 2.0], 0.95).status == "no variance"
    assert sign_flips([1.0], [0.0], 0.95).status == "too few people"
    assert label_exchange([1.0], [0.0, 2.0], 0.95).status == "too few people"
    assert label_exchange([], [0.0, 2.0], 0.95).estimate is None
