"""Two one-sided tests of whether a difference of means is so small that it does not matter."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

from bandcairn.errors import StepError
from bandcairn.statistics.comparing import result_of
from bandcairn.statistics.p_values import remarks_on, tellable
from bandcairn.statistics.people import gather
from bandcairn.statistics.registry import function_of
from bandcairn.statistics.result import Interval, Outcome

if TYPE_CHECKING:
    from collections.abc import Sequence

    from bandcairn.statistics.comparison import Comparison
    from bandcairn.statistics.result import Result

# The one-sided tests are those of a t statistic.
_OF_MEANS = ("paired_t", "welch_t")


def equivalence(
    values: Sequence[float | None],
    participants: Sequence[str],
    levels: Sequence[str],
    comparison: Comparison,
    bounds: Interval,
) -> Result:
    """Test whether the difference of two levels lies within bounds, with people as n.

    The null hypothesis is that it does not; p is the larger of the two one-sided p values. The statistic is the t of
    that side. The interval covers 2 * confidence - 1 (90 % for 95 %): it lies within the bounds exactly where p is
    below 1 - confidence.

    Parameters
    ----------
    values, participants, levels, comparison
        As in `bandcairn.statistics.compare`; the test is paired_t or welch_t.
    bounds : Interval
        The largest differences that do not matter, below and above 0, on the scale of the comparison.

    Returns
    -------
    Result
        Named "tost"; without an effect size.

    Raises
    ------
    StepError
        If the test is another, 0 does not lie between the bounds, or `compare` would refuse.

    References
    ----------
    Schuirmann DJ (1987) A comparison of the two one-sided tests procedure and the power approach for assessing the
    equivalence of average bioavailability. J Pharmacokinet Biopharm 15:657-680.
    """
    if comparison.test not in _OF_MEANS:
        raise StepError(f"test with equivalence: found {comparison.test}; allowed: {', '.join(_OF_MEANS)}")
    if not bounds.low < 0 < bounds.high:
        found = f"[{bounds.low:g}, {bounds.high:g}]"
        raise StepError(f"equivalence: found {found}; allowed: two values with 0 between them")
    sample = gather(values, participants, levels, comparison)
    test = function_of(comparison.test, comparison.design)
    outcome = test(sample.first, sample.second, 2 * comparison.confidence - 1)
    result = result_of(comparison, sample, two_one_sided(outcome, bounds, comparison.confidence))
    return replace(result, test="tost", term=f"{comparison.term} within {bounds.low:g} to {bounds.high:g}")


def two_one_sided(outcome: Outcome, bounds: Interval, confidence: float) -> Outcome:
    """Turn the outcome of a t test into that of two one-sided ones.

    Parameters
    ----------
    outcome : Outcome
        Of a t test whose interval covers ``2 * confidence - 1``.
    bounds : Interval
        In the unit of the estimate.
    confidence : float
        One minus the level of each one-sided test.
    """
    if outcome.interval is None or outcome.estimate is None or outcome.df is None:
        return replace(outcome, effect=None)
    from scipy.special import stdtr, stdtrit

    error = (outcome.interval.high - outcome.interval.low) / 2 / float(stdtrit(outcome.df, confidence))
    above, below = (outcome.estimate - bounds.low) / error, (outcome.estimate - bounds.high) / error
    p_above, p_below = float(stdtr(outcome.df, -above)), float(stdtr(outcome.df, below))
    p = max(p_above, p_below)
    covered = f"interval covers {100 * (2 * confidence - 1):g} %, each one-sided test at {100 * (1 - confidence):g} %"
    return Outcome(
        status="ok",
        estimate=outcome.estimate,
        interval=outcome.interval,
        statistic=above if p_above >= p_below else below,
        df=outcome.df,
        p=tellable(p),
        notes=(covered, *remarks_on(p)),
    )
