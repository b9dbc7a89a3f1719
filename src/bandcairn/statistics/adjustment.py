"""Adjustment of the p values of one declared family."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from bandcairn.errors import StepError

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence


def adjust(p_values: Sequence[float | None], method: str = "holm") -> tuple[float | None, ...]:
    """Adjust the p values of one family for their number.

    Parameters
    ----------
    p_values : sequence of float or None
        None where there is no test: it stays None and does not count to the size of the family.
    method : str
        One of `available_adjustments`.

    Returns
    -------
    tuple of float or None
        In the order given, none below its raw value, none above 1.

    Raises
    ------
    StepError
        If the method is unknown, or a value is neither None nor within 0 and 1.
    """
    if method not in _ADJUSTMENTS:
        raise StepError(f"adjustment: found {method!r}; allowed: {', '.join(_ADJUSTMENTS)}")
    for place, p in enumerate(p_values):
        if p is not None and not 0 <= p <= 1:
            raise StepError(f"p value {place}: found {p}; allowed: 0 to 1, or None where there is no test")
    adjusted = iter(_ADJUSTMENTS[method]([float(p) for p in p_values if p is not None]))
    return tuple(None if p is None else next(adjusted) for p in p_values)


def available_adjustments() -> tuple[str, ...]:
    """Return the names of the methods of adjustment."""
    return tuple(_ADJUSTMENTS)


def _holm(p_values: list[float]) -> list[float]:
    """Hold the family-wise error rate under any dependence, step by step from the smallest p value.

    References
    ----------
    Holm S (1979) A simple sequentially rejective multiple test procedure. Scand J Stat 6:65-70.
    """
    adjusted = [0.0] * len(p_values)
    largest = 0.0
    for rank, place in enumerate(sorted(range(len(p_values)), key=p_values.__getitem__)):
        largest = max(largest, min(1.0, (len(p_values) - rank) * p_values[place]))
        adjusted[place] = largest
    return adjusted


def _bonferroni(p_values: list[float]) -> list[float]:
    """Hold the family-wise error rate under any dependence, each p value times their number.

    References
    ----------
    Dunn OJ (1961) Multiple comparisons among means. J Am Stat Assoc 56:52-64.
    """
    return [min(1.0, len(p_values) * p) for p in p_values]


def _benjamini_hochberg(p_values: list[float]) -> list[float]:
    """Hold the false discovery rate of independent or positively dependent tests, step by step from the largest.

    References
    ----------
    Benjamini Y, Hochberg Y (1995) Controlling the false discovery rate. J R Stat Soc B 57:289-300.
    """
    n = len(p_values)
    adjusted = [0.0] * n
    smallest = 1.0
    for rank, place in sorted(enumerate(sorted(range(n), key=p_values.__getitem__), start=1), reverse=True):
        smallest = min(smallest, n / rank * p_values[place])
        adjusted[place] = smallest
    return adjusted


def _benjamini_yekutieli(p_values: list[float]) -> list[float]:
    """Hold the false discovery rate under any dependence.

    References
    ----------
    Benjamini Y, Yekutieli D (2001) The control of the false discovery rate in multiple testing under dependency. Ann
    Stat 29:1165-1188.
    """
    dearer = math.fsum(1 / rank for rank in range(1, len(p_values) + 1))
    return [min(1.0, dearer * p) for p in _benjamini_hochberg(p_values)] if p_values else []


# In the order in which they are told.
_ADJUSTMENTS: dict[str, Callable[[list[float]], list[float]]] = {
    "holm": _holm,
    "bonferroni": _bonferroni,
    "benjamini_hochberg": _benjamini_hochberg,
    "benjamini_yekutieli": _benjamini_yekutieli,
    "none": list,
}
