"""The smallest p value that can be told, and the words where it is reached."""

from __future__ import annotations

import sys

_SMALLEST = sys.float_info.min


def tellable(p: float) -> float:
    """Return a p value, never below the smallest number that keeps all its digits: no p is 0."""
    return max(p, _SMALLEST)


def remarks_on(p: float) -> tuple[str, ...]:
    """Tell of a p value that is below the smallest number, as it came out of the distribution."""
    return () if p >= _SMALLEST else (f"p is below {_SMALLEST:.2g}, the smallest number that can be told",)
