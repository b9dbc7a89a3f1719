"""Stretches in which a channel rests: at a limit of its range, or anywhere for a second or longer."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

LEAST_CLIPPED_SAMPLES = 3
LEAST_FLAT_S = 1.0
# Samples looked at together: they stay in a core's cache.
_BLOCK = 1 << 15


@dataclass(frozen=True, slots=True)
class Stretches:
    """Stretches of one channel, in the order of time, as half-open ranges of sample indices.

    Attributes
    ----------
    first, stop : ndarray, shape (n_stretches,), int64
        None of them reaches across a gap.
    """

    first: NDArray[np.int64]
    stop: NDArray[np.int64]

    @property
    def n_samples(self) -> NDArray[np.int64]:
        """Number of samples of each, shape (n_stretches,)."""
        return self.stop - self.first


@dataclass(frozen=True, slots=True)
class Rests:
    """All runs of two or more equal samples of one channel, and its smallest step.

    Attributes
    ----------
    stretches : Stretches
        Where they lie.
    value_uv : ndarray, shape (n_stretches,)
        The value at which the channel rests.
    smallest_step_uv : float or None
        Smallest difference of two neighbours that differ; None where no two do.
    """

    stretches: Stretches
    value_uv: NDArray[np.float64]
    smallest_step_uv: float | None


def find_rests(samples: NDArray[np.float64], run_starts: Sequence[int]) -> Rests:
    """Find where a channel does not change from one sample to the next.

    Parameters
    ----------
    samples : ndarray, shape (n_samples,)
        Microvolt.
    run_starts : sequence of int
        First sample of each gap-free run: samples before and after a gap are no neighbours.

    Returns
    -------
    Rests
    """
    same = np.zeros(samples.size + 1, dtype=np.int8)
    same_as_next = same[1:-1].view(np.bool_)
    smallest = np.inf
    for start in range(0, samples.size - 1, _BLOCK):
        block = samples[start : start + _BLOCK + 1]
        step = block[1:] - block[:-1]
        here = same_as_next[start : start + step.size]
        np.equal(step, 0, out=here)
        np.abs(step, out=step)
        np.copyto(step, np.inf, where=here)
        smallest = min(smallest, float(step.min()))
    same_as_next[[first - 1 for first in run_starts if first > 0]] = False
    edges = np.flatnonzero(np.diff(same))
    stretches = Stretches(edges[::2], edges[1::2] + 1)
    return Rests(stretches, samples[stretches.first], None if np.isinf(smallest) else smallest)


def clipped(rests: Rests, low_uv: float, high_uv: float, range_uv: tuple[float, float] | None) -> Stretches:
    """Return the rests that are clipped.

    A clean signal passes its extremes within a sample or two; a clipped one rests there. A rest counts when it
    lasts three equal samples or longer at the channel's own extreme (an amplifier saturates before its converter)
    or at the limits of the recorder. A channel that never changes is flat, not clipped.

    Parameters
    ----------
    rests : Rests
        Of the channel.
    low_uv, high_uv : float
        Its smallest and its largest sample.
    range_uv : tuple of float or None
        The lowest and the highest value that the recorder can give; None if unknown.

    Returns
    -------
    Stretches
    """
    if range_uv is not None:
        # Scaling to microvolt rounds: a value within a billionth of the range is the limit itself.
        tolerance_uv = 1e-9 * (range_uv[1] - range_uv[0])
        low_uv = max(low_uv, range_uv[0] + tolerance_uv)
        high_uv = min(high_uv, range_uv[1] - tolerance_uv)
    long_enough = rests.stretches.n_samples >= LEAST_CLIPPED_SAMPLES
    moves = rests.smallest_step_uv is not None
    return _chosen(rests, moves & long_enough & ((rests.value_uv <= low_uv) | (rests.value_uv >= high_uv)))


def flat(rests: Rests, rate_hz: float) -> Stretches:
    """Return the rests of one second or longer, at whatever value."""
    return _chosen(rests, rests.stretches.n_samples >= LEAST_FLAT_S * rate_hz)


def _chosen(rests: Rests, which: NDArray[np.bool_]) -> Stretches:
    return Stretches(rests.stretches.first[which], rests.stretches.stop[which])
