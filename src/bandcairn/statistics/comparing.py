"""From rows to one result: people first, then the test, then the words."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Protocol

from bandcairn.statistics.people import Sample, gather
from bandcairn.statistics.registry import function_of
from bandcairn.statistics.result import Outcome, Result
from bandcairn.statistics.scales import scale_of, unit_on

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from bandcairn.statistics.comparison import Comparison


class Table(Protocol):
    """Anything that hands out a column by its name: a dict of lists, a pandas DataFrame."""

    def __getitem__(self, column: str, /) -> Iterable[Any]:
        """Return the values of one column."""
        ...


def compare_table(
    table: Table, comparison: Comparison, value: str = "value", participant: str = "participant"
) -> Result:
    """Compare two levels of the column that `comparison.factor` names.

    Parameters
    ----------
    table : mapping of columns
        Rows of **one** feature, band and channel: every row counts as a value of its participant.
    comparison : Comparison
        What is asked.
    value, participant : str
        Names of the columns that hold the values and the people.

    Returns
    -------
    Result
        See `compare`.
    """
    return compare(list(table[value]), list(table[participant]), list(table[comparison.factor]), comparison)


def compare(
    values: Sequence[float | None], participants: Sequence[str], levels: Sequence[str], comparison: Comparison
) -> Result:
    """Compare two levels by the declared test, with people as n.

    Several values of one participant at one level are averaged first (arithmetic mean of the measured values),
    then put on the scale. A within comparison keeps complete pairs only. Means that the scale cannot take (not
    above 0 under a logarithm, outside 0 to 1 under the logit) are left out. The note names everyone left out.
    The order of the rows does not change a bit of the result.

    Parameters
    ----------
    values : sequence of float or None
        Measured values; None and NaN are missing.
    participants, levels : sequence of str
        Whose value each is, and at which level of the factor. Rows of other levels are ignored.
    comparison : Comparison
        What is asked.

    Returns
    -------
    Result
        With None for every number that cannot be given, and the reason in `status`.

    Raises
    ------
    StepError
        If the three differ in length, a participant has no name, a value is infinite, or someone stands in
        both groups of a between comparison.

    Examples
    --------
    >>> from bandcairn.statistics import Comparison, compare
    >>> night_day = Comparison("within", "condition", "night", "day", "paired_t", unit="uV^2")
    >>> result = compare([3, 1, 5, 2], ["P1", "P1", "P2", "P2"], ["night", "day", "night", "day"], night_day)
    >>> result.term, result.estimate, result.statistic, result.df
    ('night - day', 2.5, 5.0, 1.0)
    """
    sample = gather(values, participants, levels, comparison)
    test = function_of(comparison.test, comparison.design, comparison.seed)
    return result_of(comparison, sample, test(sample.first, sample.second, comparison.confidence))


def result_of(comparison: Comparison, sample: Sample, outcome: Outcome) -> Result:
    """Return what a test makes of a sample in full, with the words on the people."""
    interval, effect = outcome.interval, outcome.effect
    notes = [*_ratio(comparison, outcome), *outcome.notes, *sample.notes]
    return Result(
        test=comparison.test,
        term=comparison.term,
        estimate=outcome.estimate,
        estimate_unit=unit_on(comparison.scale, comparison.unit),
        ci_low=interval.low if interval else None,
        ci_high=interval.high if interval else None,
        statistic=outcome.statistic,
        df=outcome.df,
        df2=outcome.df2,
        p=outcome.p,
        effect_size=effect.size if effect else None,
        effect_size_name=effect.name if effect else None,
        effect_ci_low=effect.interval.low if effect else None,
        effect_ci_high=effect.interval.high if effect else None,
        n_participants=sample.n_participants,
        n_observations=sample.n_observations,
        status=outcome.status,
        note="; ".join(notes),
    )


def _ratio(comparison: Comparison, outcome: Outcome) -> list[str]:
    """Return the estimate as a ratio with its interval, where the scale's differences are ratios."""
    scale = scale_of(comparison.scale)
    if scale.base is None or outcome.estimate is None:
        return []
    words = f"{scale.ratio_name} {comparison.first}/{comparison.second} {scale.ratio(outcome.estimate):.3g}"
    if outcome.interval is None:
        return [words]
    low, high = scale.ratio(outcome.interval.low), scale.ratio(outcome.interval.high)
    return [f"{words} [{low:.3g}, {high:.3g}]"]
