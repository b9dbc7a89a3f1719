"""Group statistics against published examples, closed forms, an independent library and simulation."""

from __future__ import annotations

import csv
import math
from pathlib import Path
from typing import TYPE_CHECKING, Literal

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats

from bandcairn.statistics import Comparison, Result, adjust, compare, compare_table
from bandcairn.statistics.effect_sizes import small_sample_factor
from bandcairn.statistics.noncentral_t import noncentral_t_cdf, noncentrality_interval
from bandcairn.statistics.registry import function_of
from reference import published

if TYPE_CHECKING:
    from collections.abc import Sequence

_HERE = Path(__file__).parent
_PAIRED = Comparison("within", "level", "a", "b", "paired_t")
_WELCH = Comparison("between", "level", "a", "b", "welch_t")


def _compare(comparison: Comparison, first: list[float], second: list[float]) -> Result:
    """Compare two lists: the same people in both, or different ones."""
    people = [f"p{i:03}" for i in range(len(first))]
    others = people if comparison.design == "within" else [f"q{i:03}" for i in range(len(second))]
    levels = ["a"] * len(first) + ["b"] * len(second)
    return compare([*first, *second], people + others, levels, comparison)


def _floats(*found: float | None) -> list[float]:
    """Return the numbers of a result, none of which may be absent."""
    return [math.nan if number is None else number for number in found]


def _numbers(result: Result) -> list[float]:
    return _floats(result.statistic, result.df, result.p, result.ci_low, result.ci_high)


def _columns(path: str) -> dict[str, list[str]]:
    with (_HERE / path).open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    return {name: [row[name] for row in rows] for name in rows[0]}


def test_student_sleep_paired() -> None:
    """Published example (Student 1908): half a unit of the last printed digit."""
    entry = published("statistics", "ST-STUDENT-PAIRED")
    table = _columns(entry.inputs["file"])
    values: dict[str, Sequence[object]] = {**table, "extra": [float(value) for value in table["extra"]]}
    comparison = Comparison("within", "group", "1", "2", "paired_t", unit="h")

    found = compare_table(values, comparison, value="extra", participant="ID")

    entry.assert_close(found.statistic, "t")
    entry.assert_close(found.df, "df")
    entry.assert_close(found.p, "p")
    entry.assert_close(found.estimate, "mean_diff")
    entry.assert_close([found.ci_low, found.ci_high], "ci95")


def test_student_sleep_as_independent_groups() -> None:
    """Published example (Welch's test of the same numbers): half a unit of the last printed digit."""
    entry = published("statistics", "ST-STUDENT-WELCH")
    table = _columns(entry.inputs["file"])
    people = [f"{drug}/{person}" for drug, person in zip(table["group"], table["ID"], strict=True)]
    comparison = Comparison("between", "group", "1", "2", "welch_t", unit="h")

    found = compare([float(value) for value in table["extra"]], people, table["group"], comparison)

    entry.assert_close(found.statistic, "t")
    entry.assert_close(found.df, "df")
    entry.assert_close(found.p, "p")
    entry.assert_close([found.ci_low, found.ci_high], "ci95")


def test_darwin_maize_paired() -> None:
    """Published example (Fisher 1935, t = 2.148): half a unit of the last printed digit."""
    entry = published("statistics", "ST-ZEA-T")
    table = _columns(entry.inputs["file"])
    crossed, selfed = ([float(value) for value in table[name]] for name in ("cross_in", "self_in"))

    found = _compare(_PAIRED, crossed, selfed)

    entry.assert_close(found.statistic, "t")
    entry.assert_close(found.df, "df")
    entry.assert_close(found.p, "p")
    entry.assert_close(found.estimate, "mean_in")
    entry.assert_close([found.ci_low, found.ci_high], "ci95")


def test_hedges_g_of_a_meta_analysis_textbook() -> None:
    """Published example (Borenstein et al. 2009): groups are built that have the printed means and SDs exactly."""
    entry = published("statistics", "ST-HEDGES-IND")
    given = entry.inputs

    def group(mean: float, sd: float, n: int) -> list[float]:
        ramp = np.arange(n) - (n - 1) / 2
        return list(mean + sd * ramp / ramp.std(ddof=1))

    first = group(given["m1"], given["sd1"], given["n1"])
    found = _compare(_WELCH, first, group(given["m2"], given["sd2"], given["n2"]))

    assert found.effect_size is not None
    entry.assert_close(found.effect_size, "g")
    entry.assert_close(small_sample_factor(given["n1"] + given["n2"] - 2), "J")
    entry.assert_close(found.effect_size / small_sample_factor(given["n1"] + given["n2"] - 2), "d")
    # The published interval belongs to d of these same data.
    interval = published("statistics", "ST-DCI-IND")
    assert_allclose(
        _floats(found.effect_ci_low, found.effect_ci_high),
        interval.expected[0],
        atol=interval.tolerance["abs"],
        rtol=0,
    )


def test_small_sample_factor_has_its_exact_gamma_form() -> None:
    """Closed form (Hedges 1981), printed to eight digits; the usual approximation is 1e-3 to 1e-6 away."""
    entry = published("statistics", "ST-J-EXACT")

    entry.assert_close([small_sample_factor(df) for df in entry.inputs["df"]], "exact")


def test_small_sample_factor_at_two_degrees_of_freedom() -> None:
    """Closed form: gamma(1) / (sqrt(1) gamma(1/2)) = 1 / sqrt(pi); a few roundings of 1e-16."""
    assert_allclose(small_sample_factor(2), 1 / math.sqrt(math.pi), rtol=1e-15)


def test_interval_of_a_standardised_difference() -> None:
    """Computed elsewhere by the noncentral t (R, Boost), printed to five digits."""
    entry = published("statistics", "ST-DCI-IND")
    found = []
    for case in entry.inputs["cases"]:
        root_n = math.sqrt(case["n1"] * case["n2"] / (case["n1"] + case["n2"]))
        reach = noncentrality_interval(case["t"], case["df"], 0.95)
        found.append([reach.low / root_n, reach.high / root_n])

    entry.assert_close(found)


@pytest.mark.parametrize("df", [1, 2, 5, 28, 200, 5000])
@pytest.mark.parametrize("t", [-12.0, -3.0, -0.2, 0.0, 1e-6, 1.0, 7.0, 100.0])
def test_noncentral_t_agrees_with_an_independent_series(t: float, df: int) -> None:
    """Independent library (scipy.stats.nct, a series in beta functions): the quadrature claims 1e-11."""
    spread = math.sqrt(1 + t * t / (2 * df))
    noncentralities = t + spread * np.array([-1.5, -1, -0.5, 0, 0.5, 1, 1.5])

    found = [noncentral_t_cdf(t, df, noncentrality) for noncentrality in noncentralities]

    assert_allclose(found, stats.nct.cdf(t, df, noncentralities), atol=1e-11, rtol=0)


@pytest.mark.parametrize("confidence", [0.8, 0.95, 0.999])
@pytest.mark.parametrize("df", [1, 5, 98])
@pytest.mark.parametrize("t", [-2.5, 0.0, 0.7, 12.0])
def test_noncentrality_interval_cuts_off_the_declared_tails(t: float, df: int, confidence: float) -> None:
    """Independent library: at either end, scipy's noncentral t must leave half of 1 - confidence."""
    found = noncentrality_interval(t, df, confidence)

    tails = [stats.nct.sf(t, df, found.low), stats.nct.cdf(t, df, found.high)]
    assert_allclose(tails, [(1 - confidence) / 2] * 2, atol=1e-11, rtol=0)


@pytest.mark.parametrize("t", [1e4, 1e8, 1e11, 1e13, 1e100])
def test_noncentrality_interval_at_a_huge_t_is_that_of_the_chi_square(t: float) -> None:
    """Limiting case: the normal part vanishes beside t, so the ends are t sqrt(chi2 quantile / df).

    What is neglected is of order (df / t)^2 relative, 1e-6 at the smallest t here.
    """
    df = 9
    found = noncentrality_interval(t, df, 0.95)

    expected = t * np.sqrt(stats.chi2.ppf([0.025, 0.975], df) / df)
    assert_allclose([found.low, found.high], expected, rtol=1e-6)


def test_power_of_the_t_test_by_the_noncentral_t() -> None:
    """Published example (Cohen 1988: n = 64 a group gives 80 % for d = 0.5), recomputed to four digits."""
    entry = published("statistics", "ST-POWER")
    effect = entry.inputs["d"]

    def power(noncentrality: float, df: int) -> float:
        critical = float(stats.t.ppf(0.975, df))
        upper = 1 - noncentral_t_cdf(critical, df, noncentrality)
        return upper + noncentral_t_cdf(-critical, df, noncentrality)

    entry.assert_close(power(effect * math.sqrt(64 / 2), 126), "power_n64")
    entry.assert_close(power(effect * math.sqrt(34), 33), "power_paired_n34")


@pytest.mark.parametrize("seed", range(20))
def test_paired_t_agrees_with_an_independent_library(seed: int) -> None:
    """Independent library (scipy.stats.ttest_rel): only rounding differs, 1e-12 relative."""
    rng = np.random.default_rng(seed)
    first, second = rng.normal(0.5, 3, (2, int(rng.integers(2, 40))))

    found = _compare(_PAIRED, list(first), list(second))

    expected = stats.ttest_rel(first, second)
    interval = expected.confidence_interval(0.95)
    numbers = [expected.statistic, expected.df, expected.pvalue, interval.low, interval.high]
    assert_allclose(_numbers(found), numbers, rtol=1e-12)
    assert_allclose(
        _floats(found.effect_size), np.mean(first - second) / np.std(first - second, ddof=1), rtol=1e-12
    )


@pytest.mark.parametrize("seed", range(20))
def test_welch_t_agrees_with_an_independent_library(seed: int) -> None:
    """Independent library (scipy.stats.ttest_ind, unequal variances): only rounding differs, 1e-12 relative."""
    rng = np.random.default_rng(seed)
    first = rng.normal(1, 3, int(rng.integers(2, 40)))
    second = rng.normal(0, 1, int(rng.integers(2, 40)))

    found = _compare(_WELCH, list(first), list(second))

    expected = stats.ttest_ind(first, second, equal_var=False)
    interval = expected.confidence_interval(0.95)
    numbers = [expected.statistic, expected.df, expected.pvalue, interval.low, interval.high]
    assert_allclose(_numbers(found), numbers, rtol=1e-12)


def test_two_pairs_follow_the_cauchy_distribution() -> None:
    """Closed form: differences a, b give t = (a + b) / |a - b|, p = 1 - 2/pi arctan |t|, half width tan(0.475 pi) s.

    Differences 1 and 3: t = 2, standard error 1. The tolerance is a few roundings.
    """
    found = _compare(_PAIRED, [1.0, 3.0], [0.0, 0.0])

    half_width = math.tan(0.475 * math.pi)
    expected = [2, 1, 1 - 2 / math.pi * math.atan(2), 2 - half_width, 2 + half_width]
    assert_allclose(_numbers(found), expected, rtol=1e-13)


def test_welch_of_equal_groups_has_the_pooled_degrees_of_freedom() -> None:
    """Closed form: groups of n with equal variances have df 2 (n - 1) and t = difference / (s sqrt(2 / n)).

    Values 0, 1, 2 against 3, 4, 5: s = 1, t = -3 / sqrt(2/3), df 4. The tolerance is a few roundings.
    """
    found = _compare(_WELCH, [0.0, 1.0, 2.0], [3.0, 4.0, 5.0])

    assert_allclose(_numbers(found)[:2], [-3 / math.sqrt(2 / 3), 4], rtol=1e-14)
    assert_allclose(
        _floats(found.effect_size), -3 * math.sqrt(2 / math.pi), rtol=1e-14
    )  # J(4) = sqrt(2 / pi)


def test_holm_of_four_p_values() -> None:
    """Published example (common textbook numbers): products of short decimals, 1e-9."""
    entry = published("statistics", "ST-HOLM-4")

    entry.assert_close(adjust(entry.inputs["p"], "holm"), "holm")


def test_holm_rejects_as_many_as_in_the_worked_example() -> None:
    """Published example (Benjamini & Hochberg 1995, 15 p values): a count, exact."""
    entry = published("statistics", "ST-BH1995")

    adjusted = adjust(entry.inputs["p"], "holm")
    n_rejected = sum(p is not None and p <= entry.inputs["alpha"] for p in adjusted)
    assert n_rejected == entry.expected["n_reject"]["holm"]


def test_false_discovery_rate_of_the_worked_example() -> None:
    """Published example (Benjamini & Hochberg 1995, 15 p values): adjusted values to 1e-7, numbers rejected exact."""
    entry = published("statistics", "ST-BH1995")
    critical = published("statistics", "ST-BH-CRIT")
    p_values, alpha = entry.inputs["p"], entry.inputs["alpha"]

    adjusted = _floats(*adjust(p_values, "benjamini_hochberg"))

    entry.assert_close(adjusted, "adj_BH")
    assert sum(p <= alpha for p in adjusted) == entry.expected["n_reject"]["BH"]
    bonferroni = _floats(*adjust(p_values, "bonferroni"))
    assert sum(p <= alpha for p in bonferroni) == entry.expected["n_reject"]["bonferroni"]
    # A p value at its critical value i q / m is adjusted to q.
    limits = _floats(*adjust([*critical.expected, *[1.0] * 10], "benjamini_hochberg"))
    assert_allclose(limits[:5], critical.inputs["q"], atol=15 * critical.tolerance["abs"])


def test_adjustments_of_four_p_values() -> None:
    """Published example (common textbook numbers): products of short decimals, 1e-9."""
    entry = published("statistics", "ST-HOLM-4")

    entry.assert_close(adjust(entry.inputs["p"], "bonferroni"), "bonferroni")
    entry.assert_close(adjust(entry.inputs["p"], "benjamini_hochberg"), "BH")


@pytest.mark.parametrize(("method", "theirs"), [("benjamini_hochberg", "bh"), ("benjamini_yekutieli", "by")])
@pytest.mark.parametrize("seed", range(5))
def test_false_discovery_rate_agrees_with_an_independent_library(
    method: str, theirs: Literal["bh", "by"], seed: int
) -> None:
    """Independent library (scipy.stats.false_discovery_control): rounding, 1e-12 relative."""
    p_values = np.random.default_rng(seed).uniform(0, 0.2, 30)

    expected = stats.false_discovery_control(p_values, method=theirs)
    assert_allclose(_floats(*adjust(p_values.tolist(), method)), expected, rtol=1e-12)


@pytest.mark.slow
@pytest.mark.parametrize(
    ("method", "limit"),
    [("holm", 0.05), ("bonferroni", 0.05), ("benjamini_hochberg", 0.04), ("benjamini_yekutieli", 0.02)],
)
def test_adjustments_hold_the_rate_that_they_promise(method: str, limit: float) -> None:
    """Simulation, 4000 families of 20 tests, 16 of them null, correlated by a half; standard error 0.34 %.

    The family-wise rate (holm, bonferroni) is at most 5 %, the false discovery rate at most 16/20 of it, for
    benjamini_yekutieli a third of that.
    """
    rng = np.random.default_rng(31)
    errors = []
    for _ in range(4000):
        z = math.sqrt(0.5) * rng.normal() + math.sqrt(0.5) * rng.normal(0, 1, 20)
        z[16:] += 3.5
        found = np.array(_floats(*adjust((2 * stats.norm.sf(np.abs(z))).tolist(), method))) <= 0.05
        false = found[:16].sum()
        family_wise = method in ("holm", "bonferroni")
        errors.append(false > 0 if family_wise else false / max(1, found.sum()))

    print(f"{method}: rate {np.mean(errors):.4f}")
    assert np.mean(errors) <= limit + 0.01


@pytest.mark.slow
@pytest.mark.parametrize("n", [6, 20])
@pytest.mark.parametrize(("test", "design"), [("paired_t", "within"), ("welch_t", "between")])
def test_error_rate_and_coverage_on_normal_data(test: str, design: str, n: int) -> None:
    """Simulation, 4000 studies: the standard error of a share is 0.34 % at 5 %, so 1 % is three of them.

    One half is under the null (false positives), the other has a true difference of one standard deviation
    (coverage of the estimate and of the effect size, and the power, which is printed).
    """
    n_studies, shift = 4000, 1.0
    rng = np.random.default_rng(20 + n)
    function = function_of(test, design)
    # Pairs share a person's level; the differences of the pairs and the groups both have variance 1.
    noise = math.sqrt(0.5) if design == "within" else 1.0
    false_positives = covered = effect_covered = found = 0
    for _ in range(n_studies):
        person = rng.normal(0, 2, n) if design == "within" else np.zeros(n)
        first, second = person + rng.normal(0, noise, n), person + rng.normal(0, noise, n)
        null = function(tuple(first.tolist()), tuple(second.tolist()), 0.95)
        real = function(tuple((first + shift).tolist()), tuple(second.tolist()), 0.95)
        assert null.p is not None
        assert real.p is not None
        assert real.interval is not None
        assert real.effect is not None
        false_positives += null.p < 0.05
        found += real.p < 0.05
        covered += real.interval.low <= shift <= real.interval.high
        effect_covered += real.effect.interval.low <= shift <= real.effect.interval.high

    print(f"{test}, n {n}: power {found / n_studies:.3f} for a difference of one standard deviation")
    assert abs(false_positives / n_studies - 0.05) <= 0.01
    assert abs(covered / n_studies - 0.95) <= 0.015
    assert abs(effect_covered / n_studies - 0.95) <= 0.015


@pytest.mark.slow
def test_welch_holds_its_error_rate_under_unequal_variances() -> None:
    """Simulation, 4000 studies of 20 people with SD 1 against 8 with SD 3: the standard error is 0.34 %.

    A pooled test errs in 19 % of such studies (scipy, 20 000 of them).
    """
    rng = np.random.default_rng(7)
    function = function_of("welch_t", "between")
    n_studies = 4000
    false_positives = 0
    for _ in range(n_studies):
        outcome = function(tuple(rng.normal(0, 1, 20).tolist()), tuple(rng.normal(0, 3, 8).tolist()), 0.95)
        assert outcome.p is not None
        false_positives += outcome.p < 0.05

    assert abs(false_positives / n_studies - 0.05) <= 0.01
