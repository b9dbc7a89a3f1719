"""What the people of a comparison are like: number, mean, spread and quartiles of each cell and of the differences."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from bandcairn.statistics.moments import mean, standard_deviation
from bandcairn.statistics.people import gather
from bandcairn.statistics.scales import unit_on

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from bandcairn.statistics.comparison import Comparison


@dataclass(frozen=True, slots=True)
class Description:
    """One cell of a comparison, or the differences of its pairs.

    Attributes
    ----------
    level : str
        The level, or the term of the differences: "night - day".
    scale : str
        Scale of the numbers; "identity" is as measured.
    n : int
        People described: those whom the test compares.
    n_available : int
        People with a usable value at the level; more than `n` where a pair lacks its other half.
    mean, sd, median, q1, q3 : float or None
        Of one value a person; None where there is nobody, `sd` also where there is one alone.
    unit : str
        Of these numbers.
    """

    level: str
    scale: str
    n: int
    n_available: int
    mean: float | None
    sd: float | None
    median: float | None
    q1: float | None
    q3: float | None
    unit: str


def describe(
    values: Sequence[float | None], participants: Sequence[str], levels: Sequence[str], comparison: Comparison
) -> tuple[Description, ...]:
    """Describe the people that `compare` compares, cell by cell.

    Parameters
    ----------
    values, participants, levels, comparison
        As in `bandcairn.statistics.compare`.

    Returns
    -------
    tuple of Description
        As measured, then on the scale if that is another: first level, second level, and for pairs their differences.
        A cell without anybody is there with n = 0.

    Raises
    ------
    StepError
        As `bandcairn.statistics.compare` does.

    References
    ----------
    Hyndman RJ, Fan Y (1996) Sample quantiles in statistical packages. Am Stat 50:361-365: quartiles by their
    definition 7, linear between the values in order.
    """
    sample = gather(values, participants, levels, comparison)
    n_available = (sample.n_first_available, sample.n_second_available)
    described = [
        *_cells("identity", comparison, sample.first_measured, sample.second_measured, n_available),
    ]
    if comparison.scale != "identity":
        described += _cells(comparison.scale, comparison, sample.first, sample.second, n_available)
    return tuple(described)


def _cells(
    scale: str,
    comparison: Comparison,
    first: Sequence[float],
    second: Sequence[float],
    n_available: tuple[int, int],
) -> Iterator[Description]:
    unit = unit_on(scale, comparison.unit)
    yield _described(first, comparison.first, scale, n_available[0], unit)
    yield _described(second, comparison.second, scale, n_available[1], unit)
    if comparison.design == "within":
        differences = [one - other for one, other in zip(first, second, strict=True)]
        yield _described(differences, comparison.term, scale, len(differences), unit)


def _described(values: Sequence[float], level: str, scale: str, n_available: int, unit: str) -> Description:
    ordered = sorted(values)
    return Description(
        level=level,
        scale=scale,
        n=len(ordered),
        n_available=n_available,
        mean=mean(ordered) if ordered else None,
        sd=standard_deviation(ordered) if len(ordered) > 1 else None,
        median=_quantile(ordered, 0.5),
        q1=_quantile(ordered, 0.25),
        q3=_quantile(ordered, 0.75),
        unit=unit,
    )


def _quantile(ordered: Sequence[float], share: float) -> float | None:
    if not ordered:
        return None
    place = share * (len(ordered) - 1)
    below = min(int(place), len(ordered) - 1)
    above = min(below + 1, len(ordered) - 1)
    weight = place - below
    return (1 - weight) * ordered[below] + weight * ordered[above]
