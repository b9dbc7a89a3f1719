"""Rank tests against published examples, an independent library and simulation."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Literal

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats

from bandcairn.statistics.rank_tests import mann_whitney, wilcoxon
from reference import published

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from bandcairn.statistics.result import Outcome

    RankTest = Callable[[Sequence[float], Sequence[float], float], Outcome]

# How each shape of noise is drawn: normal, and heavy-tailed (Student's t of 3 degrees of freedom).
_NOISE: dict[str, Callable[[np.random.Generator, int], np.ndarray]] = {
    "normal": lambda rng, n: rng.normal(0, 1, n),
    "heavy-tailed": lambda rng, n: rng.standard_t(3, n),
}


def test_wilcoxon_of_the_depression_scale() -> None:
    """Published example (Hollander & Wolfe 1973): half a unit of the last printed digit."""
    entry = published("statistics", "ST-WILCOXON-HW")

    found = wilcoxon(entry.inputs["x"], entry.inputs["y"], 0.95)

    entry.assert_close(found.statistic, "V")
    entry.assert_close(found.p, "p_two")


def test_mann_whitney_of_the_membranes() -> None:
    """Published example (Hollander & Wolfe 1973): half a unit of the last printed digit."""
    entry = published("statistics", "ST-MANNWHITNEY-HW")

    found = mann_whitney(entry.inputs["x"], entry.inputs["y"], 0.95)

    entry.assert_close(found.statistic, "W")
    entry.assert_close(found.p, "p_two")


@pytest.mark.parametrize("n", [2, 6, 13, 49, 60, 200])
def test_wilcoxon_agrees_with_an_independent_library(n: int) -> None:
    """Independent library (scipy.stats.wilcoxon, exact or corrected normal): only rounding differs, 1e-12 relative."""
    first, second = np.random.default_rng(n).normal(0.2, 1, (2, n))

    found = wilcoxon(first.tolist(), second.tolist(), 0.95)

    how: Literal["exact", "approx"] = "exact" if n <= 50 else "approx"
    one_sided = stats.wilcoxon(first, second, method=how, alternative="greater")
    expected = stats.wilcoxon(first, second, method=how, correction=n > 50)
    assert found.statistic == one_sided.statistic
    assert_allclose(float(found.p or 0), expected.pvalue, rtol=1e-12)


@pytest.mark.parametrize("sizes", [(2, 2), (6, 6), (4, 20), (25, 25), (40, 20), (100, 80)])
def test_mann_whitney_agrees_with_an_independent_library(sizes: tuple[int, int]) -> None:
    """Independent library (scipy.stats.mannwhitneyu, exact or corrected normal): rounding, 1e-12 relative."""
    rng = np.random.default_rng(sum(sizes))
    first, second = rng.normal(0.3, 1, sizes[0]), rng.normal(0, 1, sizes[1])

    found = mann_whitney(first.tolist(), second.tolist(), 0.95)

    expected = stats.mannwhitneyu(first, second, method="exact" if sum(sizes) <= 50 else "asymptotic")
    assert found.statistic == expected.statistic
    assert_allclose(float(found.p or 0), expected.pvalue, rtol=1e-12)


def test_ties_correct_the_variance_as_in_an_independent_library() -> None:
    """Independent library (scipy.stats, many ties among 80 people or pairs): rounding, 1e-12 relative."""
    first, second = np.random.default_rng(8).integers(0, 7, (2, 80)).astype(float)

    pairs, groups = (
        test(first.tolist(), second.tolist(), 0.95).p or math.nan for test in (wilcoxon, mann_whitney)
    )

    assert_allclose(pairs, stats.wilcoxon(first, second, method="approx", correction=True).pvalue, rtol=1e-12)
    assert_allclose(groups, stats.mannwhitneyu(first, second, method="asymptotic").pvalue, rtol=1e-12)


@pytest.mark.parametrize("n", [8, 12])
def test_tied_ranks_are_counted_as_by_an_independent_library(n: int) -> None:
    """Independent library (scipy.stats.permutation_test over all signs): a few roundings."""
    differences = np.random.default_rng(n).integers(-3, 6, n).astype(float)
    differences = differences[differences != 0]
    ranks = stats.rankdata(np.abs(differences)) * np.sign(differences)

    found = wilcoxon(differences.tolist(), [0.0] * len(differences), 0.95)

    expected = stats.permutation_test(
        (ranks,), lambda x, axis: np.sum(x, axis=axis), permutation_type="samples", n_resamples=10_000
    )
    assert_allclose(float(found.p or 0), expected.pvalue, rtol=1e-12)


@pytest.mark.slow
@pytest.mark.parametrize("shape", _NOISE)
@pytest.mark.parametrize(
    ("test", "n", "attainable"),
    [(wilcoxon, 6, 2 / 64), (wilcoxon, 20, 0.0484), (mann_whitney, 6, 38 / 924), (mann_whitney, 20, 0.0491)],
)
def test_error_rate_and_coverage_of_rank_tests(test: RankTest, n: int, attainable: float, shape: str) -> None:
    """Simulation, 4000 studies: the standard error of a share is 0.34 % at 5 %, so 1 % is three of them.

    Counted p values come in steps: a test cannot err in 5 % of studies but in the largest step below, which is
    `attainable` (6 pairs: 2 of 64 signs; the others from the counted distributions of scipy). The intervals are their
    inversion and cover the rest. The effect size is held against its mean over the studies; its interval claims
    normal values, and so is checked with these alone.
    """
    n_studies, shift = 4000, 1.0
    rng = np.random.default_rng(100 + n)
    draw = _NOISE[shape]
    null, real = [], []
    for _ in range(n_studies):
        first, second = draw(rng, n), (np.zeros(n) if test is wilcoxon else draw(rng, n))
        null.append(test(first.tolist(), second.tolist(), 0.95))
        real.append(test((first + shift).tolist(), second.tolist(), 0.95))

    false_positives = np.mean([found.p is not None and found.p <= 0.05 for found in null])
    covered = np.mean([o.interval is not None and o.interval.low <= shift <= o.interval.high for o in real])
    effects = [found.effect for found in real if found.effect is not None]
    middle = np.mean([effect.size for effect in effects])
    effect_covered = np.mean([e.interval.low <= middle <= e.interval.high for e in effects])
    power = np.mean([found.p is not None and found.p <= 0.05 for found in real])
    print(f"{test.__name__}, n {n}, {shape}: power {power:.3f} for a shift of 1, effect {effect_covered:.3f}")
    assert abs(false_positives - attainable) <= 0.01
    assert abs(covered - (1 - attainable)) <= 0.015
    if shape == "normal":
        assert abs(effect_covered - 0.95) <= 0.025
