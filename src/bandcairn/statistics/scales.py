"""The scales on which values are compared, and the way back to a ratio."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

if TYPE_CHECKING:
    from collections.abc import Callable

ScaleName = Literal["identity", "log10", "ln", "logit"]


@dataclass(frozen=True, slots=True)
class Scale:
    """A monotone transformation with its domain.

    Attributes
    ----------
    apply : callable
        From the measured value to the scale.
    low, high : float
        Open interval of the values it takes.
    domain : str
        The same in words.
    base : float or None
        ``base ** difference`` is a ratio; None where a difference is no ratio.
    ratio_name : str
        What that ratio is called.
    """

    apply: Callable[[float], float]
    low: float = -math.inf
    high: float = math.inf
    domain: str = "any number"
    base: float | None = None
    ratio_name: str = "ratio"

    def holds(self, value: float) -> bool:
        """Return whether the scale can take `value`."""
        return self.low < value < self.high

    def ratio(self, difference: float) -> float:
        """Return the ratio that a difference on this scale stands for; infinite where it exceeds a float."""
        if self.base is None:
            raise ValueError("a difference on this scale is not the logarithm of a ratio")
        try:
            return math.pow(self.base, difference)
        except OverflowError:
            return math.inf


def _logit(share: float) -> float:
    return math.log(share) - math.log1p(-share)


_SCALES: dict[str, Scale] = {
    "identity": Scale(apply=float),
    "log10": Scale(apply=math.log10, low=0.0, domain="a value above 0", base=10.0),
    "ln": Scale(apply=math.log, low=0.0, domain="a value above 0", base=math.e),
    "logit": Scale(
        apply=_logit,
        low=0.0,
        high=1.0,
        domain="a value between 0 and 1",
        base=math.e,
        ratio_name="odds ratio",
    ),
}


def available_scales() -> tuple[str, ...]:
    """Return the names of the scales."""
    return tuple(_SCALES)


def scale_of(name: str) -> Scale:
    """Return the scale of that name."""
    return _SCALES[name]


def unit_on(name: str, unit: str) -> str:
    """Return the unit of a value on a scale: "log10(uV^2)".

    Parameters
    ----------
    name : str
        Name of the scale.
    unit : str
        Unit of the measured value; may be empty.
    """
    if name == "identity":
        return unit
    return f"{name}({unit})" if unit else name
