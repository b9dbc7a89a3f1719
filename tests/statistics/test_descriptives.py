"""Descriptions of the people in a comparison: who counts, what is told of a cell that nobody is in."""

from __future__ import annotations

import numpy as np
import pytest

from bandcairn.statistics import Comparison, compare, describe

_NIGHT_DAY = Comparison("within", "condition", "night", "day", "paired_t", scale="log10", unit="uV^2")
_VALUES = [100.0, 10.0, 1000.0, 10.0, 10.0, None]
_PEOPLE = ["p1", "p1", "p2", "p2", "p3", "p3"]
_LEVELS = ["night", "day"] * 3


def test_pairs_are_described_as_measured_and_on_the_scale_with_their_differences() -> None:
    """Two complete pairs; p3 lacks a day, so its night is available without being described."""
    cells = describe(_VALUES, _PEOPLE, _LEVELS, _NIGHT_DAY)

    assert [(c.level, c.scale, c.unit, c.n, c.n_available, c.mean) for c in cells] == [
        ("night", "identity", "uV^2", 2, 3, 550.0),
        ("day", "identity", "uV^2", 2, 2, 10.0),
        ("night - day", "identity", "uV^2", 2, 2, 540.0),
        ("night", "log10", "log10(uV^2)", 2, 3, 2.5),
        ("day", "log10", "log10(uV^2)", 2, 2, 1.0),
        ("night - day", "log10", "log10(uV^2)", 2, 2, 1.5),
    ]


def test_the_mean_of_the_differences_is_the_estimate_of_the_test() -> None:
    """The people described are those compared."""
    cells = describe(_VALUES, _PEOPLE, _LEVELS, _NIGHT_DAY)

    assert cells[-1].mean == compare(_VALUES, _PEOPLE, _LEVELS, _NIGHT_DAY).estimate


def test_groups_have_no_differences() -> None:
    """Between people there are two cells."""
    groups = Comparison("between", "group", "crew", "office", "welch_t")
    cells = describe([1.0, 2.0, 4.0], ["a", "b", "c"], ["crew", "crew", "office"], groups)

    assert [(cell.level, cell.n, cell.mean, cell.sd) for cell in cells] == [
        ("crew", 2, 1.5, pytest.approx(0.5**0.5, rel=1e-15)),
        ("office", 1, 4.0, None),
    ]


def test_an_empty_cell_stands_there_with_nobody_in_it() -> None:
    """A level without any value, and one without any row."""
    groups = Comparison("between", "group", "crew", "office", "welch_t")
    for values, levels in (([1.0, None], ["crew", "office"]), ([1.0, 2.0], ["crew", "crew"])):
        office = describe(values, ["a", "b"], levels, groups)[1]

        assert (office.n, office.n_available, office.mean, office.sd) == (0, 0, None, None)
        assert (office.median, office.q1, office.q3) == (None, None, None)


@pytest.mark.parametrize("n", [1, 2, 5, 8, 31])
def test_quartiles_lie_linearly_between_the_ordered_values(n: int) -> None:
    """As numpy has them, whatever the order of the people."""
    values = np.random.default_rng(n).normal(0, 1, n)
    groups = Comparison("between", "group", "crew", "office", "welch_t")

    crew = describe(values.tolist(), [f"p{i}" for i in range(n)], ["crew"] * n, groups)[0]

    assert [crew.q1, crew.median, crew.q3] == pytest.approx(
        np.quantile(values, [0.25, 0.5, 0.75]).tolist(), rel=1e-13
    )
