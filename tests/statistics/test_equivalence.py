"""Equivalence: what lies within the bounds, on which side it may not, and what cannot be asked."""

from __future__ import annotations

import dataclasses
import math

import numpy as np
import pytest

from bandcairn.errors import StepError
from bandcairn.statistics import Comparison, Interval, Result, compare, equivalence

_PAIRED = Comparison("within", "level", "a", "b", "paired_t", unit="uV")


def _ask(first: list[float], second: list[float], bounds: Interval, asked: Comparison = _PAIRED) -> Result:
    people = [f"p{i}" for i in range(len(first))]
    others = people if asked.design == "within" else [f"q{i}" for i in range(len(second))]
    levels = ["a"] * len(first) + ["b"] * len(second)
    return equivalence([*first, *second], people + others, levels, asked, bounds)


def test_the_nearer_bound_decides() -> None:
    """Differences 0, 1, 2: error 1/sqrt(3), two degrees of freedom, for which P(T > t) = (1 - t/sqrt(2 + t^2)) / 2."""
    found = _ask([0.0, 1.0, 2.0], [0.0, 0.0, 0.0], Interval(-9, 3))

    t = (1 - 3) * math.sqrt(3)
    assert found.statistic == pytest.approx(t, rel=1e-12)
    assert found.p == pytest.approx((1 + t / math.sqrt(2 + t**2)) / 2, rel=1e-12)
    assert (found.test, found.term, found.estimate, found.estimate_unit) == (
        "tost", "a - b within -9 to 3", 1.0, "uV",
    )  # fmt: skip
    assert (found.effect_size, found.n_participants) == (None, 3)
    assert "interval covers 90 %, each one-sided test at 5 %" in found.note


@pytest.mark.parametrize("seed", range(6))
@pytest.mark.parametrize("test", ["paired_t", "welch_t"])
def test_p_is_below_five_percent_exactly_where_the_interval_lies_within_the_bounds(
    test: str, seed: int
) -> None:
    """Bounds a hair outside and a hair inside the interval of 90 %."""
    asked = dataclasses.replace(_PAIRED, design="within" if test == "paired_t" else "between", test=test)
    first, second = np.random.default_rng(seed).normal(0, 1, (2, 9)).tolist()
    reach = _ask(first, second, Interval(-1, 1), asked)
    assert reach.ci_low is not None
    assert reach.ci_high is not None
    far = max(-reach.ci_low, reach.ci_high)
    for bound, equivalent in ((far + 1e-9, True), (far - 1e-9, False)):
        found = _ask(first, second, Interval(-bound, bound), asked)
        assert found.p is not None
        assert (found.p < 0.05) is equivalent


def test_what_has_no_t_has_no_equivalence_either() -> None:
    """One pair, and differences that do not vary."""
    assert (_ask([1.0], [0.0], Interval(-1, 1)).status, _ask([1.0], [0.0], Interval(-1, 1)).p) == (
        "too few people",
        None,
    )
    assert _ask([1.0, 2.0], [0.0, 1.0], Interval(-9, 9)).status == "no variance"


def test_bounds_and_tests_that_make_no_sense_are_refused() -> None:
    """Zero must lie between the bounds; ranks have no such test here."""
    with pytest.raises(
        StepError, match=r"equivalence: found \[1, 2\]; allowed: two values with 0 between them"
    ):
        _ask([1.0, 2.0], [0.0, 0.0], Interval(1, 2))
    with pytest.raises(StepError, match="test with equivalence: found wilcoxon; allowed: paired_t, welch_t"):
        _ask([1.0, 2.0], [0.0, 0.0], Interval(-1, 2), dataclasses.replace(_PAIRED, test="wilcoxon"))


def test_a_logarithm_is_told_back_as_a_ratio() -> None:
    """The bounds are those of the scale: log10 of 0.8 to 1.25."""
    asked = dataclasses.replace(_PAIRED, scale="log10")
    first, second = [10.0, 11.0, 9.0, 10.0], [10.0, 10.0, 10.0, 11.0]

    found = _ask(first, second, Interval(math.log10(0.8), math.log10(1.25)), asked)

    assert found.note.startswith("ratio a/b ")
    assert found.estimate == compare([*first, *second], list("pqrspqrs"), list("aaaabbbb"), asked).estimate
