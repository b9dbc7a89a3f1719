"""Means and standard deviations whose last bit does not depend on the order of the values.

`math.fsum` rounds once, so any order of the rows gives the same mean; deviations are scaled by `math.hypot`, so
neither 1e-200 nor 1e200 leaves the range of a float when squared.
"""

from __future__ import annotations

import math
import sys
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Sequence

# The mean of equal values, and the difference of two numbers, are off by about one unit in the last place;
# eight leave room for the logarithms of both.
_ROUNDING = 8 * sys.float_info.epsilon


def mean(values: Sequence[float]) -> float:
    """Return the arithmetic mean of at least one value."""
    return math.fsum(values) / len(values)


def root_of_squares(values: Sequence[float]) -> float:
    """Return the square root of the summed squared deviations from the mean."""
    centre = mean(values)
    return math.hypot(*sorted(value - centre for value in values))


def standard_deviation(values: Sequence[float]) -> float:
    """Return the standard deviation (n - 1 below) of at least two values."""
    return root_of_squares(values) / math.sqrt(len(values) - 1)


def is_rounding(spread: float, values: Sequence[float]) -> bool:
    """Return whether `spread` is no more than the rounding error of the values it was computed from.

    Differences that are equal on paper (1.1 - 1.0 and 2.1 - 2.0) have a spread near 1e-16 in floats; a t of
    1e15 made of it would be noise.
    """
    return spread <= rounding_of(values)


def rounding_of(values: Sequence[float]) -> float:
    """Return the rounding error that a difference of two of the values may have."""
    return _ROUNDING * max(abs(value) for value in values)
