"""The noncentral t distribution: its cumulative probability and the interval of its noncentrality.

`scipy.special.nctdtr` sums a series whose length grows with the noncentrality: at t = 1e5 it gives nan, at 1e8 it
does not return. The integral below costs the same everywhere and agrees with it to 1e-11 where both work.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.statistics.result import Interval

if TYPE_CHECKING:
    from numpy.typing import NDArray

# The normal density beyond 9 standard deviations holds 1e-19 of the probability.
_REACH = 9.0
_NODES = 100
_TAIL = 1e-17
# Beyond, the normal part is lost beside t in a float, and the chi-square part alone is exact to 1e-12.
_HUGE = 1e12


@dataclass(frozen=True, slots=True)
class _Probability:
    """P(T <= t) and its derivative by the noncentrality."""

    value: float
    slope: float


@dataclass(frozen=True, slots=True)
class _Nodes:
    """Nodes on (-1, 1) with the weights of their quadrature."""

    at: NDArray[np.float64]
    weights: NDArray[np.float64]


@lru_cache(maxsize=8)
def _nodes(n_panels: int) -> _Nodes:
    """Return Gauss-Legendre nodes, repeated over equal panels."""
    at, weights = np.polynomial.legendre.leggauss(_NODES)
    centres = (2 * np.arange(n_panels) + 1) / n_panels - 1
    return _Nodes(np.add.outer(centres, at / n_panels).ravel(), np.tile(weights / n_panels, n_panels))


def _density(z: float) -> float:
    return math.exp(-z * z / 2) / math.sqrt(2 * math.pi)


def _probability(t: float, df: float, noncentrality: float) -> _Probability:
    """Integrate P(T <= t) over the normal part of T, for t > 0.

    T = (Z + noncentrality) / sqrt(X / df) with Z normal and X chi-square: T <= t holds always where
    Z <= -noncentrality, and beyond with the probability that X >= df ((z + noncentrality) / t)^2.
    """
    from scipy.special import chdtrc, chdtri, ndtr

    below = float(ndtr(-noncentrality))
    slope_below = -_density(noncentrality)
    low = max(-_REACH, -noncentrality)
    high = min(_REACH, t * math.sqrt(chdtri(df, _TAIL) / df) - noncentrality)
    if high <= low:
        return _Probability(below, slope_below)
    # The chi-square part falls from 1 to 0 ever more steeply: 100 nodes hold it to 1e-11 up to df 1000.
    nodes = _nodes(1 + int(math.sqrt(df) / 32))
    half = (high - low) / 2
    z = (high + low) / 2 + half * nodes.at
    share = half * nodes.weights * np.exp(-z * z / 2) / math.sqrt(2 * math.pi)
    share = share * chdtrc(df, df * ((z + noncentrality) / t) ** 2)
    return _Probability(below + float(share.sum()), slope_below + float((share * z).sum()))


def noncentral_t_cdf(t: float, df: float, noncentrality: float) -> float:
    """Return P(T <= t) of the noncentral t distribution.

    Parameters
    ----------
    t : float
        Any sign.
    df : float
        Degrees of freedom, at least 1.
    noncentrality : float
        Any sign.

    References
    ----------
    Johnson NL, Kotz S, Balakrishnan N (1995) Continuous Univariate Distributions, vol. 2, ch. 31 (from memory).
    """
    if t < 0:
        return 1 - noncentral_t_cdf(-t, df, -noncentrality)
    if t == 0:
        from scipy.special import ndtr

        return float(ndtr(-noncentrality))
    return _probability(t, df, noncentrality).value


def noncentrality_interval(t: float, df: float, confidence: float) -> Interval:
    """Return the exact confidence interval of the noncentrality, given one observed t.

    Its ends are the noncentralities under which the observed t cuts off half of ``1 - confidence`` above and
    below. Swapping the sign of t mirrors the interval to the last bit.

    Parameters
    ----------
    t : float
        Observed t.
    df : float
        Degrees of freedom, at least 1.
    confidence : float
        Between 0 and 1.

    References
    ----------
    Cumming G, Finch S (2001) A primer on the understanding, use, and calculation of confidence intervals that
    are based on central and noncentral distributions. Educ Psychol Meas 61:532-574.
    """
    if t < 0:
        mirrored = noncentrality_interval(-t, df, confidence)
        return Interval(-mirrored.high, -mirrored.low)
    if t == 0:
        from scipy.special import ndtri

        reach = float(ndtri(0.5 + confidence / 2))
        return Interval(-reach, reach)
    tail = (1 - confidence) / 2
    return Interval(_noncentrality_at(t, df, 1 - tail), _noncentrality_at(t, df, tail))


def _noncentrality_at(t: float, df: float, probability: float) -> float:
    """Solve P(T <= t) = probability for the noncentrality, for t > 0, by Newton's method inside a bracket."""
    from scipy.special import chdtri, ndtri

    if t > _HUGE:
        return t * math.sqrt(chdtri(df, probability) / df)
    low, high = -_REACH, t * math.sqrt(chdtri(df, _TAIL) / df) + _REACH
    # First guess: T is nearly normal around the noncentrality, with variance 1 + t^2 / (2 df).
    at = t - float(ndtri(probability)) * math.sqrt(1 + t * t / (2 * df))
    for _ in range(200):
        found = _probability(t, df, at)
        low, high = (at, high) if found.value > probability else (low, at)
        following = at - (found.value - probability) / found.slope if found.slope < 0 else math.inf
        # Newton's error shrinks by its square: a step of 1e-9 leaves one far below the last bit.
        if abs(following - at) <= 1e-9 * max(1.0, abs(at)):
            return following
        at = following if low < following < high else (low + high) / 2
    raise ArithmeticError(f"no noncentrality found for t {t}, df {df}, probability {probability}")
