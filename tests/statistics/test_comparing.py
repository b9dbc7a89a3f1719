"""From rows to a result: who counts, who is left out, and what is told of it."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd
import pytest
from numpy.testing import assert_allclose

from bandcairn.errors import StepError
from bandcairn.statistics import Comparison, Result, compare, compare_table

if TYPE_CHECKING:
    from collections.abc import Sequence

_NUMBERS = (
    "ci_low", "ci_high", "statistic", "df", "df2", "p",
    "effect_size", "effect_size_name", "effect_ci_low", "effect_ci_high",
)  # fmt: skip


def _within(**changes: Any) -> Comparison:  # noqa: ANN401 - passed on to the dataclass, which checks it
    return Comparison(
        **{"design": "within", "factor": "condition", "first": "night", "second": "day", "test": "paired_t"}
        | {"unit": "uV^2"}
        | changes
    )


def _between(**changes: Any) -> Comparison:  # noqa: ANN401 - passed on to the dataclass, which checks it
    return Comparison(
        **{"design": "between", "factor": "group", "first": "old", "second": "young", "test": "welch_t"}
        | {"unit": "uV^2"}
        | changes
    )


def _ask(rows: Sequence[tuple[float | None, str, str]], comparison: Comparison) -> Result:
    """Compare rows of (value, participant, level)."""
    return compare([row[0] for row in rows], [row[1] for row in rows], [row[2] for row in rows], comparison)


_PAIRS = [
    (3.0, "P1", "night"), (1.0, "P1", "day"),
    (5.0, "P2", "night"), (2.0, "P2", "day"),
    (9.0, "P3", "night"), (4.0, "P3", "day"),
]  # fmt: skip
_GROUPS = [
    (3.0, "P1", "old"), (5.0, "P2", "old"), (10.0, "P3", "old"),
    (1.0, "P4", "young"), (2.0, "P5", "young"),
]  # fmt: skip


def test_pairs_give_the_mean_difference_of_first_minus_second() -> None:
    """Differences 2, 3, 5: mean 10/3, variance 7/3, t = mean / sqrt(7/9); the unit is the value's own."""
    found = _ask(_PAIRS, _within())

    assert found.estimate == pytest.approx(10 / 3, rel=1e-15)
    assert found.statistic == pytest.approx(10 / 3 / math.sqrt(7 / 9), rel=1e-15)
    assert found.effect_size == pytest.approx(10 / 3 / math.sqrt(7 / 3), rel=1e-15)
    assert (found.test, found.term, found.estimate_unit, found.df, found.df2) == (
        "paired_t", "night - day", "uV^2", 2.0, None,
    )  # fmt: skip
    assert (found.n_participants, found.n_observations, found.status) == (3, 6, "ok")
    assert (found.effect_size_name, found.note) == ("Cohen's d_z", "")


def test_unequal_groups_are_compared_and_their_sizes_told() -> None:
    """Means 6 and 1.5, variances 13 and 0.5: t and df by Welch's and Satterthwaite's formulas."""
    found = _ask(_GROUPS, _between())

    error2 = 13 / 3 + 0.5 / 2
    assert found.estimate == pytest.approx(4.5, rel=1e-15)
    assert found.statistic == pytest.approx(4.5 / math.sqrt(error2), rel=1e-14)
    assert found.df == pytest.approx(error2**2 / ((13 / 3) ** 2 / 2 + 0.25**2 / 1), rel=1e-14)
    assert (found.effect_size_name, found.n_participants, found.n_observations) == ("Hedges' g", 5, 5)
    assert found.note == "people: old 3, young 2"


def test_every_number_is_a_plain_float() -> None:
    """Results go to JSON and Parquet: no numpy scalar may hide among them."""
    for found in (_ask(_PAIRS, _within()), _ask(_GROUPS, _between())):
        numbers = [getattr(found, name) for name in (*_NUMBERS, "estimate") if name != "effect_size_name"]
        assert {type(number) for number in numbers} == {float, type(None)}


@pytest.mark.parametrize("seed", range(10))
@pytest.mark.parametrize("comparison", [_within(scale="log10"), _between(first="night", second="day")])
def test_any_order_of_the_rows_gives_the_identical_result(comparison: Comparison, seed: int) -> None:
    """Bit for bit, with several values a person, missing ones among them."""
    rng = np.random.default_rng(seed)
    levels = ["night", "day"]
    rows: list[tuple[float | None, str, str]] = [
        (float(value), f"P{i % 9}" + (levels[i % 2] if comparison.design == "between" else ""), levels[i % 2])
        for i, value in enumerate(rng.lognormal(0, 2, 60))
    ]
    rows[7], rows[20] = (None, *rows[7][1:]), (math.nan, *rows[20][1:])

    shuffled = [rows[i] for i in rng.permutation(len(rows))]

    assert _ask(rows, comparison) == _ask(shuffled, comparison)


@pytest.mark.parametrize(("rows", "asked"), [(_PAIRS, _within), (_GROUPS, _between)])
def test_swapping_the_levels_mirrors_the_result_to_the_last_bit(rows: Any, asked: Any) -> None:  # noqa: ANN401
    """Nobody gains by the direction of a contrast."""
    there = asked()
    one, other = _ask(rows, there), _ask(rows, asked(first=there.second, second=there.first))

    assert one.estimate == -(other.estimate or 0)
    assert (one.ci_low, one.ci_high) == (-(other.ci_high or 0), -(other.ci_low or 0))
    assert (one.effect_ci_low, one.effect_ci_high) == (
        -(other.effect_ci_high or 0),
        -(other.effect_ci_low or 0),
    )
    assert (one.p, one.df) == (other.p, other.df)


def test_several_values_of_a_person_are_averaged_before_the_test() -> None:
    """People are n: ten epochs of one person weigh as much as one of another."""
    rows = [*_PAIRS[1:], *((3.0 + deviation, "P1", "night") for deviation in (-1, 0, 1) for _ in range(3))]
    found, plain = _ask(rows, _within()), _ask(_PAIRS, _within())

    assert (found.statistic, found.p, found.effect_ci_low) == (plain.statistic, plain.p, plain.effect_ci_low)
    assert (found.n_participants, found.n_observations) == (3, 14)
    assert found.note == "14 values averaged to 6, one a person and level"


def test_the_scale_is_applied_after_averaging() -> None:
    """The log of a mean power, not the mean of its logs: (1 + 19) / 2 = 10 against 1 is one decade."""
    rows = [(1.0, "P1", "night"), (19.0, "P1", "night"), (1.0, "P1", "day")]

    found = _ask(rows, _within(scale="log10"))

    assert found.estimate == 1.0
    assert found.estimate_unit == "log10(uV^2)"


@pytest.mark.parametrize("scale", ["log10", "ln"])
def test_a_logarithm_is_told_back_as_a_ratio_with_its_interval(scale: str) -> None:
    """Ratios 2, 4, 1.25 have the geometric mean 10^(1/3) = 2.15, whichever logarithm is taken."""
    rows = [
        (2.0, "P1", "night"), (1.0, "P1", "day"),
        (8.0, "P2", "night"), (2.0, "P2", "day"),
        (5.0, "P3", "night"), (4.0, "P3", "day"),
    ]  # fmt: skip
    found = _ask(rows, _within(scale=scale))

    t_975 = 4.302653  # of 2 degrees of freedom, from tables
    reach = t_975 * np.std(np.log([2, 4, 1.25]), ddof=1) / math.sqrt(3)
    low, high = np.exp(np.log(10) / 3 + np.array([-reach, reach]))
    assert found.note == f"ratio night/day 2.15 [{low:.3g}, {high:.3g}]"


def test_a_logit_is_told_back_as_an_odds_ratio() -> None:
    """Shares 0.8 and 0.5 have odds 4 and 1."""
    rows = [(0.8, "P1", "night"), (0.5, "P1", "day"), (0.8, "P2", "night"), (0.5, "P2", "day")]

    found = _ask(rows, _within(scale="logit", unit="1"))

    assert found.estimate == pytest.approx(math.log(4), rel=1e-15)
    assert (found.status, found.estimate_unit) == ("no variance", "logit(1)")
    assert found.note == "odds ratio night/day 4"


def test_a_scale_without_unit_stands_alone() -> None:
    """No empty brackets are printed."""
    assert _ask(_PAIRS, _within(scale="ln", unit="")).estimate_unit == "ln"


def test_a_ratio_beyond_the_range_of_floats_is_infinite_not_a_crash() -> None:
    """Two pairs have intervals hundreds of decades wide."""
    rows = [(1e300, "P1", "night"), (1.0, "P1", "day"), (1.0, "P2", "night"), (1.0, "P2", "day")]

    found = _ask(rows, _within(scale="log10"))

    assert found.status == "ok"
    assert found.note == "ratio night/day 1e+150 [0, inf]"


@pytest.mark.parametrize(
    ("scale", "bad", "reason"),
    [
        ("log10", 0.0, "night is 0, log10 needs a value above 0"),
        ("ln", -2.5, "night is -2.5, ln needs a value above 0"),
        ("logit", 1.0, "night is 1, logit needs a value between 0 and 1"),
        ("logit", 0.0, "night is 0, logit needs a value between 0 and 1"),
    ],
)
def test_a_mean_outside_the_scale_leaves_its_person_out_by_name(scale: str, bad: float, reason: str) -> None:
    """Zero power has no logarithm: the person goes, the reason stays."""
    rows = [(value / 10, person, level) for value, person, level in _PAIRS]
    found = _ask([*rows, (bad, "P4", "night"), (0.3, "P4", "day")], _within(scale=scale))

    assert (found.n_participants, found.n_observations, found.status) == (3, 6, "ok")
    assert f"P4 left out: {reason}" in found.note


def test_a_group_member_outside_the_scale_is_left_out_by_name() -> None:
    """The same holds between groups."""
    found = _ask([*_GROUPS, (-1.0, "P6", "young")], _between(scale="log10"))

    assert found.n_participants == 5
    assert "P6 left out: young is -1, log10 needs a value above 0" in found.note


def test_only_complete_pairs_count_and_the_others_are_named() -> None:
    """Who lacks which level is told, whether the row is absent or its value is."""
    rows = [
        *_PAIRS,
        (7.0, "P5", "night"), (None, "P5", "day"),
        (7.0, "P4", "day"),
        (math.nan, "P6", "night"), (None, "P6", "day"),
    ]  # fmt: skip
    found = _ask(rows, _within())

    plain = _ask(_PAIRS, _within())
    assert (found.n_participants, found.n_observations, found.p) == (3, 6, plain.p)
    assert found.note == (
        "P4 left out: lacks night; P5 left out: day has no value; "
        "P6 left out: night has no value, day has no value"
    )


def test_a_missing_value_beside_others_is_dropped_and_told() -> None:
    """The person stays with what remains."""
    found = _ask([*_PAIRS, (None, "P1", "day"), (math.nan, "P1", "day")], _within())

    assert (found.n_participants, found.n_observations) == (3, 6)
    assert found.note == "P1 day: 2 of 3 values missing, dropped"


def test_a_group_member_without_a_value_is_named() -> None:
    """The sizes printed are those of the test."""
    found = _ask([*_GROUPS, (None, "P9", "young"), (None, "P1", "old")], _between())

    assert (found.n_participants, found.n_observations) == (5, 5)
    assert found.note == (
        "P1 old: 1 of 2 values missing, dropped; P9 left out: young has no value; people: old 3, young 2"
    )


def test_rows_of_other_levels_are_ignored() -> None:
    """A third condition neither adds people nor words."""
    assert _ask([*_PAIRS, (99.0, "P1", "dusk"), (None, "P8", "dusk")], _within()) == _ask(_PAIRS, _within())


def test_a_participant_in_both_groups_is_refused() -> None:
    """Welch's test would count one person as two independent ones."""
    rows = [*_GROUPS, (4.0, "P4", "old"), (None, "P1", "young")]

    with pytest.raises(
        StepError, match="group: found P1, P4 at old and at young; allowed: each participant in one"
    ):
        _ask(rows, _between())


@pytest.mark.parametrize(
    ("rows", "n", "estimate"),
    [
        (_PAIRS[:2], 1, 2.0),
        (_PAIRS[:1], 0, None),
        ([(None, "P1", "night"), (None, "P1", "day")], 0, None),
    ],
)
def test_fewer_than_two_pairs_give_a_status_and_no_test(rows: Any, n: int, estimate: float | None) -> None:  # noqa: ANN401
    """The one difference there is may be told, but no interval and no p."""
    found = _ask(rows, _within())

    assert (found.status, found.n_participants, found.n_observations) == ("too few people", n, 2 * n)
    assert found.estimate == estimate
    assert {getattr(found, name) for name in _NUMBERS} == {None}


def test_a_group_of_one_gives_a_status_and_no_test() -> None:
    """The other group's variance does not stand in for it."""
    found = _ask(_GROUPS[:4], _between())

    assert (found.status, found.n_participants, found.estimate) == ("too few people", 4, 5.0)
    assert {getattr(found, name) for name in _NUMBERS} == {None}
    assert found.note == "people: old 3, young 1"


def test_a_level_that_no_row_has_is_told_with_those_there_are() -> None:
    """A misspelt level shows itself."""
    found = _ask(_PAIRS, _within(first="nihgt"))

    assert (found.status, found.n_participants) == ("too few people", 0)
    assert found.note.startswith("no row at nihgt (levels found: day, night); P1 left out: lacks nihgt")


def test_no_rows_at_all_are_too_few_people() -> None:
    """An empty table is answered, not crashed on."""
    found = _ask([], _between())

    assert (found.status, found.n_participants, found.estimate) == ("too few people", 0, None)
    assert "no row at old (levels found: none)" in found.note


def test_equal_differences_give_no_variance_even_after_rounding() -> None:
    """1.1 - 1.0, 2.1 - 2.0 and 3.1 - 3.0 differ by 1e-16 in floats: a t of 1e15 would be noise."""
    rows = [
        (value, f"P{i}", level) for i in (1, 2, 3) for value, level in ((i + 0.1, "night"), (float(i), "day"))
    ]
    found = _ask(rows, _within())

    assert (found.status, found.n_participants) == ("no variance", 3)
    assert found.estimate == pytest.approx(0.1, rel=1e-14)
    assert {getattr(found, name) for name in _NUMBERS} == {None}


def test_groups_without_variance_give_a_status() -> None:
    """Identical values within both groups leave nothing to test against."""
    rows = [(0.1, f"P{i}", "old") for i in range(3)] + [(0.3, f"Q{i}", "young") for i in range(3)]

    found = _ask(rows, _between())

    assert (found.status, found.n_participants) == ("no variance", 6)
    assert {getattr(found, name) for name in _NUMBERS} == {None}


def test_one_group_without_variance_is_tested_with_the_other_groups_df() -> None:
    """Satterthwaite's formula then gives n - 1 of the group that varies."""
    rows = [(4.0, f"P{i}", "old") for i in range(5)] + [(float(i), f"Q{i}", "young") for i in range(3)]

    found = _ask(rows, _between())

    assert (found.status, found.df) == ("ok", 2.0)
    assert found.statistic == pytest.approx(3 / math.sqrt(1 / 3), rel=1e-15)


def test_tied_values_are_no_obstacle() -> None:
    """Differences 1, 1, 0, 0: mean 0.5, variance 1/3, t = sqrt(3)."""
    rows = [(float(i < 2), f"P{i}", "night") for i in range(4)] + [(0.0, f"P{i}", "day") for i in range(4)]

    found = _ask(rows, _within())

    assert (found.estimate, found.statistic) == pytest.approx((0.5, math.sqrt(3)), rel=1e-15)


def test_no_difference_at_all_gives_p_one_and_a_symmetric_interval() -> None:
    """Differences -1 and 1: t = 0."""
    rows = [(0.0, "P1", "night"), (1.0, "P1", "day"), (1.0, "P2", "night"), (0.0, "P2", "day")]

    found = _ask(rows, _within())

    assert (found.statistic, found.p, found.effect_size) == (0.0, 1.0, 0.0)
    assert found.ci_low == -(found.ci_high or 0)
    assert found.effect_ci_low == -(found.effect_ci_high or 0)


def test_perfect_separation_gives_a_tiny_p_that_is_not_zero() -> None:
    """Groups a million standard deviations apart: p near 1e-45, and finite intervals that exclude zero."""
    rows = [(1e6 + i % 3, f"P{i}", "old") for i in range(6)] + [
        (float(i % 3), f"Q{i}", "young") for i in range(6)
    ]

    found = _ask(rows, _between())

    assert found.p is not None
    assert 0 < found.p < 1e-40
    assert found.effect_ci_low is not None
    assert found.effect_ci_high is not None
    assert found.effect_size is not None
    assert 0 < found.effect_ci_low < found.effect_size < found.effect_ci_high < math.inf


def test_a_p_below_the_range_of_floats_is_told_as_a_bound() -> None:
    """60 people, t near 1e9: p would be 0, which no p value is."""
    rows = [(1e9 + (i % 5), f"P{i:02}", "night") for i in range(60)] + [
        (0.0, f"P{i:02}", "day") for i in range(60)
    ]

    found = _ask(rows, _within())

    assert found.p == pytest.approx(2.2250738585072014e-308, rel=0)
    assert "p is below 2.2e-308" in found.note


@pytest.mark.parametrize("factor", [1e-13, 1e-160, 1e160])
def test_the_unit_of_the_values_does_not_change_the_test(factor: float) -> None:
    """Square volts are 1e-12 of square microvolts; squares of deviations must not leave the range of floats."""
    for rows, asked in ((_PAIRS, _within()), (_GROUPS, _between())):
        found = _ask([(value * factor, person, level) for value, person, level in rows], asked)
        plain = _ask(rows, asked)

        numbers = ("statistic", "df", "p", "effect_size", "effect_ci_low", "effect_ci_high")
        assert_allclose(
            [getattr(found, name) for name in numbers], [getattr(plain, name) for name in numbers], rtol=1e-13
        )


def test_a_higher_confidence_widens_both_intervals_and_nothing_else() -> None:
    """Confidence is no part of the test."""
    narrow, wide = _ask(_PAIRS, _within(confidence=0.8)), _ask(_PAIRS, _within(confidence=0.99))

    assert (wide.p, wide.effect_size) == (narrow.p, narrow.effect_size)
    for low, high in (("ci_low", "ci_high"), ("effect_ci_low", "effect_ci_high")):
        assert getattr(wide, low) < getattr(narrow, low) < getattr(narrow, high) < getattr(wide, high)


@pytest.mark.parametrize(
    ("rows", "message"),
    [
        ([(1.0, "", "night")], "row 0: found participant ''; allowed: a name as text"),
        ([(1.0, "P1", "night"), (1.0, 7, "day")], "row 1: found participant 7; allowed: a name as text"),
        ([(math.inf, "P1", "night")], "row 0: found inf; allowed: a finite value"),
    ],
)
def test_a_row_that_cannot_be_placed_is_refused(rows: Any, message: str) -> None:  # noqa: ANN401
    """The row, what stands there and what may stand there are named."""
    with pytest.raises(StepError, match=message):
        _ask(rows, _within())


def test_columns_of_different_lengths_are_refused() -> None:
    """Nothing is cut to the shortest."""
    with pytest.raises(StepError, match="found 2, 1 and 2 rows; allowed: as many of each"):
        compare([1.0, 2.0], ["P1"], ["night", "day"], _within())


def test_a_dict_and_a_data_frame_give_the_same_as_the_columns() -> None:
    """Only ``table["column"]`` is used; a frame's NaN is a missing value."""
    rows: list[tuple[float | None, str, str]] = [*_PAIRS, (None, "P4", "night")]
    columns: dict[str, list[Any]] = {
        "power": [row[0] for row in rows],
        "person": [row[1] for row in rows],
        "condition": [row[2] for row in rows],
    }
    expected = _ask(rows, _within())

    assert compare_table(columns, _within(), value="power", participant="person") == expected
    assert compare_table(pd.DataFrame(columns), _within(), value="power", participant="person") == expected
