"""The family of t tests: paired, and of two independent groups with unequal variances."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from bandcairn.statistics.effect_sizes import cohens_d_z, hedges_g
from bandcairn.statistics.moments import is_rounding, mean, root_of_squares, standard_deviation
from bandcairn.statistics.p_values import remarks_on, tellable
from bandcairn.statistics.result import Effect, Interval, Outcome

if TYPE_CHECKING:
    from collections.abc import Sequence

_FEWEST = 2


def paired_t(first: Sequence[float], second: Sequence[float], confidence: float) -> Outcome:
    """Test the mean of the differences of pairs against zero.

    Assumes that the differences are normal, or the pairs many. The effect size is Cohen's d_z.

    Parameters
    ----------
    first, second : sequence of float
        One value a person, in the same order of people.
    confidence : float
        Coverage of both intervals.

    Returns
    -------
    Outcome
        Status "too few people" below 2 pairs, "no variance" if all differences are equal up to rounding.

    References
    ----------
    Student (1908) The probable error of a mean. Biometrika 6:1-25.
    """
    differences = [one - other for one, other in zip(first, second, strict=True)]
    n = len(differences)
    if n < _FEWEST:
        return Outcome("too few people", mean(differences) if differences else None)
    estimate = mean(differences)
    deviation = standard_deviation(differences)
    if is_rounding(deviation, [*first, *second]):
        return Outcome("no variance", estimate)
    error = deviation / math.sqrt(n)
    return _outcome(estimate, error, n - 1, confidence, cohens_d_z(estimate / error, n, confidence))


def welch_t(first: Sequence[float], second: Sequence[float], confidence: float) -> Outcome:
    """Test the difference of the means of two independent groups, whose variances may differ.

    Assumes that both groups are normal, or large. The effect size is Hedges' g, whose interval (alone) assumes
    equal variances.

    Parameters
    ----------
    first, second : sequence of float
        One value a person.
    confidence : float
        Coverage of both intervals.

    Returns
    -------
    Outcome
        Status "too few people" below 2 people in a group, "no variance" if no group varies beyond rounding.

    References
    ----------
    Welch BL (1947) The generalization of "Student's" problem when several different population variances are
    involved. Biometrika 34:28-35.
    Satterthwaite FE (1946) An approximate distribution of estimates of variance components. Biometrics
    Bulletin 2:110-114: the degrees of freedom.
    """
    if min(len(first), len(second)) < _FEWEST:
        return Outcome("too few people", mean(first) - mean(second) if first and second else None)
    estimate = mean(first) - mean(second)
    errors = [standard_deviation(group) / math.sqrt(len(group)) for group in (first, second)]
    error = math.hypot(*errors)
    if is_rounding(error, [*first, *second]):
        return Outcome("no variance", estimate)
    # Shares of the variance rather than fourth powers, which leave the range of a float early.
    shares = [(one / error) ** 2 for one in errors]
    df = 1 / (shares[0] ** 2 / (len(first) - 1) + shares[1] ** 2 / (len(second) - 1))
    pooled = math.hypot(root_of_squares(first), root_of_squares(second)) / math.sqrt(
        len(first) + len(second) - 2
    )
    effect = hedges_g(estimate, pooled, len(first), len(second), confidence)
    return _outcome(estimate, error, df, confidence, effect)


def _outcome(estimate: float, error: float, df: float, confidence: float, effect: Effect) -> Outcome:
    """Return estimate, interval and two-sided p value of an estimate with its standard error."""
    from scipy.special import stdtr, stdtrit

    statistic = estimate / error
    reach = float(stdtrit(df, 0.5 + confidence / 2)) * error
    p = 2 * float(stdtr(df, -abs(statistic)))
    return Outcome(
        status="ok",
        estimate=estimate,
        interval=Interval(estimate - reach, estimate + reach),
        statistic=statistic,
        df=float(df),
        p=tellable(p),
        effect=effect,
        notes=remarks_on(p),
    )
