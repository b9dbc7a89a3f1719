"""What is answered: the numbers of one test, and the full result with its people."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

Status = Literal["ok", "too few people", "no variance"]


@dataclass(frozen=True, slots=True)
class Interval:
    """A confidence interval."""

    low: float
    high: float


@dataclass(frozen=True, slots=True)
class Effect:
    """A standardised effect size with the name of its formula and its interval."""

    name: str
    size: float
    interval: Interval


@dataclass(frozen=True, slots=True)
class Outcome:
    """What a test makes of two samples; None for what it cannot give.

    Attributes
    ----------
    status : str
        "ok", or why there is no test.
    estimate : float or None
        First minus second, in the unit of the samples.
    interval : Interval or None
        Of the estimate.
    statistic, df, df2, p : float or None
        The test statistic, its degrees of freedom (`df2`: of the denominator, for F) and the two-sided p value.
    effect : Effect or None
        Standardised effect size.
    notes : tuple of str
        What a reader must know of these numbers.
    """

    status: Status
    estimate: float | None
    interval: Interval | None = None
    statistic: float | None = None
    df: float | None = None
    df2: float | None = None
    p: float | None = None
    effect: Effect | None = None
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Result:
    """One line of the statistics table; None for what cannot be given.

    Attributes
    ----------
    test : str
        Name of the test.
    term : str
        The contrast, "night - day".
    estimate : float or None
        First minus second on the declared scale: the mean difference within pairs, or the difference of the
        group means. Given also without a test, as long as both levels have people.
    estimate_unit : str
        Unit of `estimate` and its interval: "uV^2", or "log10(uV^2)" on a scale.
    ci_low, ci_high : float or None
        Confidence interval of `estimate`.
    statistic : float or None
        The test statistic: t, the sum of positive ranks, the number of pairs of people, or the mean difference.
    df : float or None
        Its degrees of freedom.
    df2 : float or None
        Degrees of freedom of the denominator; None where the statistic has none.
    p : float or None
        Two-sided p value, of equivalence the larger one-sided one; not adjusted.
    effect_size : float or None
        Standardised effect size, positive when first exceeds second.
    effect_size_name : str or None
        Its formula's name: "Cohen's d_z", "Hedges' g" or a rank-biserial r.
    effect_ci_low, effect_ci_high : float or None
        Confidence interval of the population's standardised effect.
    n_participants : int
        People in the test: complete pairs, or both groups together.
    n_observations : int
        Measured values that these people gave, before averaging.
    status : str
        "ok", "too few people" or "no variance".
    note : str
        Who was left out and why, what was averaged, and on a scale the back-transformed ratio.
    """

    test: str
    term: str
    estimate: float | None
    estimate_unit: str
    ci_low: float | None
    ci_high: float | None
    statistic: float | None
    df: float | None
    df2: float | None
    p: float | None
    effect_size: float | None
    effect_size_name: str | None
    effect_ci_low: float | None
    effect_ci_high: float | None
    n_participants: int
    n_observations: int
    status: Status
    note: str
