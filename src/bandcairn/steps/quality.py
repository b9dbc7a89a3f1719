"""Quality of acquisition: what can be said of a channel before anything is done to it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.errors import StepError

if TYPE_CHECKING:
    from numpy.typing import NDArray

LEAST_CLIPPED_SAMPLES = 3
LEAST_FLAT_S = 1.0


@dataclass(frozen=True, slots=True)
class ChannelQuality:
    """What `assess` found; every array has the shape (n_channels,).

    Attributes
    ----------
    clipped_share : ndarray
        Share of the samples, 0 to 1, that rest at an extreme for three samples or longer.
    clipped_longest_s : ndarray
        Longest such rest.
    flat_share : ndarray
        Share of the samples, 0 to 1, within stretches of one second or longer that do not change at all.
    flat_longest_s : ndarray
        Longest such stretch.
    peak_to_peak_uv : ndarray
        Largest minus smallest sample.
    rms_uv : ndarray
        Root mean square about the mean.
    """

    clipped_share: NDArray[np.float64]
    clipped_longest_s: NDArray[np.float64]
    flat_share: NDArray[np.float64]
    flat_longest_s: NDArray[np.float64]
    peak_to_peak_uv: NDArray[np.float64]
    rms_uv: NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class _Rests:
    """Runs of two or more equal samples in a row: their value and their number of samples."""

    value: NDArray[np.float64]
    n_samples: NDArray[np.int64]


def assess(
    samples: NDArray[np.float64], digital_limits: tuple[tuple[float, float] | None, ...], rate_hz: float
) -> ChannelQuality:
    """Measure how much of each channel is clipped or flat, and its amplitude.

    A clean signal passes its extremes within a sample or two; a clipped one rests there. A rest counts when
    it lasts three equal samples or longer at the channel's own extreme (an amplifier saturates before its
    converter) or at the limits of the recorder. A channel that never changes is flat, not clipped.

    Parameters
    ----------
    samples : ndarray, shape (n_channels, n_samples)
        As recorded, unfiltered, in microvolt.
    digital_limits : tuple of (float, float) or None
        For each channel the lowest and the highest value that the recorder can give, in microvolt; None if
        unknown.
    rate_hz : float
        Sampling rate.

    Returns
    -------
    ChannelQuality

    Raises
    ------
    StepError
        If there are no samples.
    """
    if samples.shape[-1] == 0:
        raise StepError("found a recording without samples; its quality cannot be assessed")
    low, high = np.min(samples, axis=-1), np.max(samples, axis=-1)
    rests = [_rests(channel) for channel in samples]
    clipped = [
        _clipped_lengths(rest, float(lowest), float(highest), limits)
        for rest, lowest, highest, limits in zip(rests, low, high, digital_limits, strict=True)
    ]
    flat = [rest.n_samples[rest.n_samples >= LEAST_FLAT_S * rate_hz] for rest in rests]
    n_samples = samples.shape[-1]
    return ChannelQuality(
        clipped_share=_total(clipped) / n_samples,
        clipped_longest_s=_longest(clipped) / rate_hz,
        flat_share=_total(flat) / n_samples,
        flat_longest_s=_longest(flat) / rate_hz,
        peak_to_peak_uv=high - low,
        rms_uv=np.std(samples, axis=-1),
    )


def _rests(samples: NDArray[np.float64]) -> _Rests:
    """Find all runs of equal samples, shape (n_samples,)."""
    same_as_next = np.zeros(samples.size + 1, dtype=np.int8)
    np.equal(samples[1:], samples[:-1], out=same_as_next[1:-1].view(np.bool_))
    edges = np.flatnonzero(np.diff(same_as_next))
    first, last = edges[::2], edges[1::2]
    return _Rests(samples[first], last - first + 1)


def _clipped_lengths(
    rests: _Rests, low: float, high: float, limits: tuple[float, float] | None
) -> NDArray[np.int64]:
    """Return the numbers of samples of those rests that are clipped; `low` and `high` are the extremes."""
    if low == high:
        return rests.n_samples[:0]
    if limits is not None:
        # Scaling to microvolt rounds: a value within a billionth of the range is the limit itself.
        tolerance = 1e-9 * (limits[1] - limits[0])
        low, high = max(low, limits[0] + tolerance), min(high, limits[1] - tolerance)
    at_extreme = (rests.value <= low) | (rests.value >= high)
    return rests.n_samples[at_extreme & (rests.n_samples >= LEAST_CLIPPED_SAMPLES)]


def _total(lengths: list[NDArray[np.int64]]) -> NDArray[np.float64]:
    """Sum each channel's lengths."""
    return np.array([np.sum(of_channel) for of_channel in lengths], dtype=np.float64)


def _longest(lengths: list[NDArray[np.int64]]) -> NDArray[np.float64]:
    """Return each channel's largest length; 0 where there is none."""
    return np.array([np.max(of_channel, initial=0) for of_channel in lengths], dtype=np.float64)
