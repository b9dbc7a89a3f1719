"""Heart beats of an ECG: R peaks and the intervals between them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.errors import StepError

if TYPE_CHECKING:
    from numpy.typing import NDArray


@dataclass(frozen=True, slots=True)
class Beats:
    """The R peaks of one gap-free run.

    Attributes
    ----------
    times_s : ndarray, shape (n_beats,), float64
        Seconds from the first sample, increasing, refined below the sampling step.
    amplitude_uv : ndarray, shape (n_beats,)
        Value of the signal at the peak; negative where the lead is inverted.
    inverted : bool
        True if the main deflection of this lead points down.
    """

    times_s: NDArray[np.float64]
    amplitude_uv: NDArray[np.float64]
    inverted: bool


@dataclass(frozen=True, slots=True)
class NN:
    """Intervals between successive beats, and which of them count as normal to normal.

    Attributes
    ----------
    interval_ms : ndarray, shape (n_beats - 1,)
    time_s : ndarray, shape (n_beats - 1,)
        Time of the later beat of each interval.
    valid : ndarray, shape (n_beats - 1,), bool
    valid_pair : ndarray, shape (n_beats - 2,), bool
        True where an interval and the next one are both valid.
    """

    interval_ms: NDArray[np.float64]
    time_s: NDArray[np.float64]
    valid: NDArray[np.bool_]
    valid_pair: NDArray[np.bool_]


SHORTEST_INTERVAL_S = 0.3
LONGEST_INTERVAL_S = 2.0
LARGEST_DEVIATION = 0.3
NEIGHBOURS = 11

LEAST_RATE_HZ = 100.0

# The detector's times, by Pan & Tompkins (1985): their filters are moving averages, made for 200 Hz.
_SMOOTH_S = 0.030
_DRIFT_S = 0.160
_SLOPE_S = 0.020
_INTEGRATION_S = 0.150
_REFRACTORY_S = 0.200
_T_WAVE_S = 0.360
_SEARCH_BACK = 1.66
# Ours: the level of the beats is learned from blocks of 2 s, each holding a beat down to a rate of 30 1/min.
_BLOCK_S = 2.0
_LEVEL_BLOCKS = 5
_THRESHOLD = 0.3
_LEAST_LEVEL = 0.3
_LEAST_SLOPE_UV = 1.0
_PEAK_REACH_S = 0.090


@dataclass(frozen=True, slots=True)
class _Candidates:
    """Moments of steep change, at least the refractory time apart.

    Attributes
    ----------
    index : ndarray, shape (n,), int64
        Samples, increasing.
    slope_uv : ndarray, shape (n,)
        Steepness there.
    level_uv : ndarray, shape (n,)
        How steep a beat is expected to be there.
    threshold_uv : ndarray, shape (n,)
        What the steepness must reach to be a beat there.
    """

    index: NDArray[np.int64]
    slope_uv: NDArray[np.float64]
    level_uv: NDArray[np.float64]
    threshold_uv: NDArray[np.float64]


def find_r_peaks(samples: NDArray[np.float64], rate_hz: float) -> Beats:
    """Find the R peaks of one gap-free run of a filtered ECG.

    The QRS complex is the steepest part of an ECG. Its steepness is measured as by Pan and Tompkins:
    band-pass by moving averages, slope, square, integration over 150 ms; here all are centred, so they add
    no delay, and the root is taken, so that thresholds are shares of an amplitude. A beat is a maximum of
    the steepness, 200 ms away from any larger one, that rises from the level of the noise to that of the
    beats round it by 30 % or more; a weaker maximum within 360 ms after a beat is its T wave. Where 166 %
    of the usual interval passes without a beat, half the threshold is enough. Unlike theirs, both levels
    look both ways in time and are medians, that of the beats over blocks of 2 s: they need no learning
    phase, and an artefact does not raise them.

    The peak is the extreme of the signal within 90 ms, of the polarity of most beats, placed between
    samples by a parabola through the three samples round it.

    Parameters
    ----------
    samples : ndarray, shape (n_samples,)
        Microvolt, drift and high frequencies removed (0.5 to 40 Hz, say).
    rate_hz : float
        Sampling rate.

    Returns
    -------
    Beats
        None at all in less than 2 s, or where nothing rises above 1 uV in 20 ms.

    Raises
    ------
    StepError
        If the rate is below 100 Hz: the slope of a QRS complex is not sampled then.

    References
    ----------
    Pan J, Tompkins WJ (1985) A real-time QRS detection algorithm. IEEE Trans Biomed Eng 32:230-236.
    """
    if rate_hz < LEAST_RATE_HZ:
        raise StepError(
            f"found {rate_hz:g} Hz; R peaks need {LEAST_RATE_HZ:g} Hz or more. Keep a higher rate."
        )
    if samples.size < _BLOCK_S * rate_hz:
        return Beats(np.empty(0), np.empty(0), inverted=False)
    candidates = _candidates(_steepness(samples, rate_hz), rate_hz)
    chosen = _without_t_waves(candidates, candidates.slope_uv >= candidates.threshold_uv, rate_hz)
    chosen = _search_back(candidates, chosen, rate_hz)
    return _peaks(samples, candidates.index[chosen], rate_hz)


def _steepness(samples: NDArray[np.float64], rate_hz: float) -> NDArray[np.float64]:
    """Return the root mean square over 150 ms of the change within 20 ms, in microvolt."""
    smooth = _moving_mean(samples - np.mean(samples), _SMOOTH_S * rate_hz)
    smooth = _moving_mean(smooth, _SMOOTH_S * rate_hz)
    smooth -= _moving_mean(smooth, _DRIFT_S * rate_hz)
    half = max(1, round(_SLOPE_S * rate_hz / 2))
    change = np.zeros_like(smooth)
    np.subtract(smooth[2 * half :], smooth[: -2 * half], out=change[half:-half])
    change *= change
    mean_square = _moving_mean(change, _INTEGRATION_S * rate_hz)
    # A difference of running sums may fall below zero by a rounding error.
    return np.sqrt(np.maximum(mean_square, 0, out=mean_square), out=mean_square)


def _moving_mean(values: NDArray[np.float64], width: float) -> NDArray[np.float64]:
    """Average over the nearest odd number of samples, centred; the ends are extended by their values."""
    half = int(width / 2)
    running = np.pad(values, (half + 1, half), mode="edge")
    np.cumsum(running, out=running)
    mean: NDArray[np.float64] = running[2 * half + 1 :] - running[: -2 * half - 1]
    mean /= 2 * half + 1
    return mean


def _candidates(steepness_uv: NDArray[np.float64], rate_hz: float) -> _Candidates:
    """Find the maxima of the steepness and the threshold of each."""
    reach = round(_REFRACTORY_S * rate_hz)
    largest = _moving_max(steepness_uv, reach)
    index = np.flatnonzero((steepness_uv == largest) & (steepness_uv > _LEAST_SLOPE_UV))
    # Equal values within one reach are one maximum.
    index = index[np.diff(index, prepend=-reach - 1) > reach]
    slope_uv, level_uv = steepness_uv[index], _beat_level(steepness_uv, index, rate_hz)
    noise_uv = _noise_level(slope_uv, slope_uv < _THRESHOLD * level_uv)
    return _Candidates(index, slope_uv, level_uv, noise_uv + _THRESHOLD * (level_uv - noise_uv))


def _beat_level(
    steepness_uv: NDArray[np.float64], index: NDArray[np.int64], rate_hz: float
) -> NDArray[np.float64]:
    """Return how steep a beat is expected to be at each candidate, shape (n,)."""
    block = round(_BLOCK_S * rate_hz)
    n_blocks = steepness_uv.size // block
    steepest = np.max(steepness_uv[: n_blocks * block].reshape(n_blocks, block), axis=1)
    # The lower of before and after: a step of the amplitude must not hide the smaller beats beside it.
    level_uv = np.minimum(
        _running_median(steepest, _LEVEL_BLOCKS, before=_LEVEL_BLOCKS - 1),
        _running_median(steepest, _LEVEL_BLOCKS, before=0),
    )
    level_uv = np.maximum(level_uv, _LEAST_LEVEL * np.median(steepest))
    at_candidates: NDArray[np.float64] = level_uv[np.minimum(index // block, n_blocks - 1)]
    return at_candidates


def _noise_level(slope_uv: NDArray[np.float64], weak: NDArray[np.bool_]) -> NDArray[np.float64]:
    """Return the steepness of the weak candidates near each candidate, shape (n,); 0 where all are beats."""
    if not weak.any():
        return np.zeros(slope_uv.size)
    typical = _running_median(slope_uv[weak], NEIGHBOURS, before=NEIGHBOURS // 2)
    n_weak_before = np.cumsum(weak, dtype=np.int64) - weak
    return typical[np.minimum(n_weak_before, typical.size - 1)]


def _moving_max(values: NDArray[np.float64], reach: int) -> NDArray[np.float64]:
    """Return the maximum over `reach` samples on either side, by doubling the width of what is compared."""
    largest = np.pad(values, reach, constant_values=-np.inf)
    width, wanted = 1, 2 * reach + 1
    while width < wanted:
        shift = min(width, wanted - width)
        largest = np.maximum(largest[:-shift], largest[shift:])
        width += shift
    return largest


def _without_t_waves(candidates: _Candidates, chosen: NDArray[np.bool_], rate_hz: float) -> NDArray[np.bool_]:
    """Drop those that follow a beat within 360 ms and are less than half as steep.

    Half of that beat or of what is expected, whichever is less: a beat that follows an artefact is no T wave.
    """
    index, slope_uv = candidates.index, candidates.slope_uv
    kept = chosen.copy()
    last = -1
    for at in map(int, np.flatnonzero(chosen)):
        soon = last >= 0 and index[at] - index[last] < _T_WAVE_S * rate_hz
        if soon and slope_uv[at] < min(slope_uv[last], candidates.level_uv[at]) / 2:
            kept[at] = False
        else:
            last = at
    return kept


def _search_back(candidates: _Candidates, chosen: NDArray[np.bool_], rate_hz: float) -> NDArray[np.bool_]:
    """Accept the steepest candidate above half the threshold wherever a beat is overdue."""
    found = chosen.copy()
    beats = np.flatnonzero(chosen)
    if beats.size < 3:
        return found
    interval = np.diff(candidates.index[beats])
    usual = _running_median(interval.astype(np.float64), NEIGHBOURS, before=NEIGHBOURS // 2)
    overdue = np.flatnonzero(interval > _SEARCH_BACK * usual)
    gaps = [(int(beats[at]), int(beats[at + 1]), float(usual[at])) for at in overdue]
    while gaps:
        before, after, expected = gaps.pop()
        if candidates.index[after] - candidates.index[before] <= _SEARCH_BACK * expected:
            continue
        at = _overdue_beat(candidates, before, after, rate_hz)
        if at is not None:
            found[at] = True
            gaps += [(before, at, expected), (at, after, expected)]
    return found


def _overdue_beat(candidates: _Candidates, before: int, after: int, rate_hz: float) -> int | None:
    """Return the steepest candidate between two beats that is no T wave; None if all are too weak."""
    between = np.arange(before + 1, after)
    late = candidates.index[between] - candidates.index[before] >= _T_WAVE_S * rate_hz
    strong = candidates.slope_uv[between] >= candidates.threshold_uv[between] / 2
    between = between[late & strong]
    return int(between[np.argmax(candidates.slope_uv[between])]) if between.size else None


def _peaks(samples: NDArray[np.float64], index: NDArray[np.int64], rate_hz: float) -> Beats:
    """Place each beat at the extreme of the signal near its steepest moment."""
    reach = int(_PEAK_REACH_S * rate_hz)
    around = np.clip(index[:, np.newaxis] + np.arange(-reach, reach + 1), 0, samples.size - 1)
    windows = samples[around]
    baseline = (windows[:, :1] + windows[:, -1:]) / 2
    up, down = np.max(windows - baseline, axis=1), np.max(baseline - windows, axis=1)
    inverted = bool(np.median(down) > np.median(up)) if index.size else False
    highest = np.take_along_axis(around, np.argmax(windows, axis=1)[:, np.newaxis], axis=1)[:, 0]
    lowest = np.take_along_axis(around, np.argmin(windows, axis=1)[:, np.newaxis], axis=1)[:, 0]
    usual, opposite = (lowest, highest) if inverted else (highest, lowest)
    # A beat that only rises or falls towards the usual side is placed at its opposite extreme, unless the
    # run ends there: then its peak was not recorded.
    cut_off = (usual == 0) | (usual == samples.size - 1)
    peak = np.where(_turns_at(samples, usual) | cut_off, usual, opposite)
    return _refined(samples, peak[_turns_at(samples, peak)], rate_hz, inverted=inverted)


def _turns_at(samples: NDArray[np.float64], index: NDArray[np.int64]) -> NDArray[np.bool_]:
    """Tell whether the signal turns back at each sample; it does not at the first and the last one."""
    inner = np.clip(index, 1, samples.size - 2)
    rise, fall = samples[inner] - samples[inner - 1], samples[inner + 1] - samples[inner]
    turns: NDArray[np.bool_] = (index == inner) & (rise * fall <= 0) & (rise != fall)
    return turns


def _refined(
    samples: NDArray[np.float64], peak: NDArray[np.int64], rate_hz: float, *, inverted: bool
) -> Beats:
    """Lay a parabola through each peak and its two neighbours."""
    before, at, after = samples[peak - 1], samples[peak], samples[peak + 1]
    shift = (before - after) / (2 * (before - 2 * at + after))
    return Beats((peak + shift) / rate_hz, at - (before - after) * shift / 4, inverted=inverted)


def valid_intervals(times_s: NDArray[np.float64]) -> NN:
    """Judge the intervals between successive beats.

    An interval counts when it lasts 0.3 to 2.0 s and differs by at most 30 % from the median of the eleven
    intervals round it (its own and five on either side, shifted inwards at the ends). So a missed beat (a
    double interval), an extra one (two short intervals) and most premature beats with their pauses are left
    out; nothing is replaced.

    Parameters
    ----------
    times_s : ndarray, shape (n_beats,)
        Increasing.

    Returns
    -------
    NN

    Notes
    -----
    Limits of this kind are common practice; their values are a choice of this package without a published
    source. In a lasting bigeminy the median itself is not that of normal beats: look at such a recording
    before using it.
    """
    interval_s = np.diff(times_s)
    median_s = _running_median(interval_s, NEIGHBOURS, before=NEIGHBOURS // 2)
    valid = (
        (interval_s >= SHORTEST_INTERVAL_S)
        & (interval_s <= LONGEST_INTERVAL_S)
        & (np.abs(interval_s - median_s) <= LARGEST_DEVIATION * median_s)
    )
    return NN(1000 * interval_s, times_s[1:], valid, valid[1:] & valid[:-1])


def _running_median(values: NDArray[np.float64], width: int, before: int) -> NDArray[np.float64]:
    """Return the median of `width` values, of which `before` come before each; shifted inwards at the ends.

    Fewer than `width` values share one median.
    """
    if values.size <= width:
        return np.full(values.size, np.median(values) if values.size else np.nan)
    windows = np.lib.stride_tricks.sliding_window_view(values, width)
    medians: NDArray[np.float64] = np.median(windows, axis=-1)
    return medians[np.clip(np.arange(values.size) - before, 0, windows.shape[0] - 1)]
