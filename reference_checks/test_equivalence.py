"""Equivalence against one-sided tests of an independent library and by simulation."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats

from bandcairn.statistics import Comparison, Interval, Result, equivalence


def _ask(first: Any, second: Any, test: str, bounds: Interval) -> Result:  # noqa: ANN401 - arrays of one axis
    within = test == "paired_t"
    people = [f"p{i:03}" for i in range(len(first))]
    others = people if within else [f"q{i:03}" for i in range(len(second))]
    levels = ["a"] * len(first) + ["b"] * len(second)
    asked = Comparison("within" if within else "between", "level", "a", "b", test)
    return equivalence([*first.tolist(), *second.tolist()], people + others, levels, asked, bounds)


@pytest.mark.parametrize("seed", range(10))
@pytest.mark.parametrize("test", ["paired_t", "welch_t"])
def test_equivalence_agrees_with_one_sided_tests_of_an_independent_library(test: str, seed: int) -> None:
    """Independent library (scipy.stats.ttest_rel, ttest_ind; one-sided, each against its bound): 1e-10 relative.

    The error is taken from the interval, which costs some digits more than a test on its own.
    """
    rng = np.random.default_rng(seed)
    n = int(rng.integers(4, 30))
    first, second = rng.normal(0.1, 1, n), rng.normal(0, 2, n if test == "paired_t" else n + 3)

    found = _ask(first, second, test, Interval(-0.7, 0.9))

    def one_sided(bound: float, side: Any) -> Any:  # noqa: ANN401 - what scipy calls a side
        if test == "paired_t":
            return stats.ttest_rel(first - bound, second, alternative=side)
        return stats.ttest_ind(first - bound, second, equal_var=False, alternative=side)

    sides = [one_sided(-0.7, "greater"), one_sided(0.9, "less")]
    deciding = max(sides, key=lambda side: float(side.pvalue))
    assert_allclose(float(found.p or 0), deciding.pvalue, rtol=1e-10)
    assert_allclose(float(found.statistic or 0), deciding.statistic, rtol=1e-10)


@pytest.mark.slow
@pytest.mark.parametrize("n", [6, 20])
@pytest.mark.parametrize("test", ["paired_t", "welch_t"])
def test_error_rate_of_equivalence_at_a_bound(test: str, n: int) -> None:
    """Simulation, 4000 studies of normal people whose difference is the upper bound: standard error 0.34 %.

    The lower bound is so far away that its test always passes: then equivalence is claimed wrongly in 5 %.
    """
    rng = np.random.default_rng(300 + n)
    errors = 0
    for _ in range(4000):
        p = _ask(rng.normal(1, 1, n), rng.normal(0, 1, n), test, Interval(-9, 1)).p
        assert p is not None
        errors += p <= 0.05

    assert abs(errors / 4000 - 0.05) <= 0.01
