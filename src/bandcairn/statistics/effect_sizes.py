"""Standardised effect sizes with exact intervals."""

from __future__ import annotations

import math

from bandcairn.statistics.noncentral_t import noncentrality_interval
from bandcairn.statistics.result import Effect, Interval


def cohens_d_z(t: float, n_pairs: int, confidence: float) -> Effect:
    """Return Cohen's d_z: the mean difference over the standard deviation of the differences.

    It equals ``t / sqrt(n_pairs)``, and t follows a noncentral t with noncentrality ``sqrt(n_pairs)`` times the
    population's d_z, whence the interval. No small-sample correction is applied.

    Parameters
    ----------
    t : float
        Paired t.
    n_pairs : int
        At least 2.
    confidence : float
        Coverage of the interval.

    References
    ----------
    Cohen J (1988) Statistical Power Analysis for the Behavioral Sciences, 2nd ed., ch. 2 (from memory).
    Cumming G, Finch S (2001) Educ Psychol Meas 61:532-574: interval by the noncentral t.
    """
    root_n = math.sqrt(n_pairs)
    reach = noncentrality_interval(t, n_pairs - 1, confidence)
    return Effect("Cohen's d_z", t / root_n, Interval(reach.low / root_n, reach.high / root_n))


def hedges_g(
    difference: float, pooled_deviation: float, n_first: int, n_second: int, confidence: float
) -> Effect:
    """Return Hedges' g: the difference of two means over their pooled standard deviation, without bias.

    The point estimate is ``J(n_first + n_second - 2)`` times Cohen's d. The interval is that of the population's
    standardised difference, which d and g both estimate; it is not multiplied by J. Its exactness rests on
    normal values with **equal variances** in both groups, unlike Welch's test beside which it is printed.

    Parameters
    ----------
    difference : float
        Mean of the first group minus mean of the second.
    pooled_deviation : float
        Pooled standard deviation, above 0, in the same unit.
    n_first, n_second : int
        People in the groups, at least 2 each.
    confidence : float
        Coverage of the interval.

    References
    ----------
    Hedges LV (1981) Distribution theory for Glass's estimator of effect size. J Educ Stat 6:107-128.
    Cumming G, Finch S (2001) Educ Psychol Meas 61:532-574: interval by the noncentral t.
    """
    df = n_first + n_second - 2
    cohens_d = difference / pooled_deviation
    root_n = math.sqrt(n_first * n_second / (n_first + n_second))
    reach = noncentrality_interval(cohens_d * root_n, df, confidence)
    size = small_sample_factor(df) * cohens_d
    return Effect("Hedges' g", size, Interval(reach.low / root_n, reach.high / root_n))


def small_sample_factor(df: float) -> float:
    """Return J(df), which takes the bias of a standardised difference away; the exact gamma form.

    Parameters
    ----------
    df : float
        Degrees of freedom of the standard deviation, above 1.

    References
    ----------
    Hedges LV (1981) J Educ Stat 6:107-128.
    """
    return math.exp(math.lgamma(df / 2) - math.lgamma((df - 1) / 2)) * math.sqrt(2 / df)
