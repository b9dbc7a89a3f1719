"""Heart rate and its variability, by the definitions of the Task Force (1996).

References
----------
Task Force of the European Society of Cardiology and the North American Society of Pacing and
Electrophysiology (1996) Heart rate variability: standards of measurement, physiological interpretation and
clinical use. Circulation 93:1043-1065.
"""

from __future__ import annotations

from dataclasses import dataclass, fields, replace
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.steps.band import band_power
from bandcairn.steps.beats import valid_intervals
from bandcairn.steps.features import FeatureValue, notes_where_null

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from bandcairn.steps.beats import NN

LEAST_INTERVALS = 3
LEAST_COVERED_SHARE = 0.8
# A spline forgets a knot by a factor of four at each further one: twenty are as good as all.
_BEATS_BEYOND = 20
_HOLE_S = 4.0
_UNITS = {"heart_rate": "1/min", "mean_nn": "ms", "sdnn": "ms", "rmssd": "ms", "pnn50": "%"}
NO_TACHOGRAM = "no tachogram in any kept epoch"
_FEW = f"fewer than {LEAST_INTERVALS} valid intervals"


@dataclass(frozen=True, slots=True)
class TimeDomain:
    """Time-domain measures of one stretch of beats; NaN where there are too few valid intervals.

    Attributes
    ----------
    heart_rate : float
        1/min: 60000 over the mean interval.
    mean_nn : float
        ms.
    sdnn : float
        ms: standard deviation of the intervals, divisor n - 1.
    rmssd : float
        ms: root mean square of successive differences, over valid pairs.
    pnn50 : float
        Percent of the valid pairs that differ by more than 50 ms.
    """

    heart_rate: float
    mean_nn: float
    sdnn: float
    rmssd: float
    pnn50: float


@dataclass(frozen=True, slots=True)
class Tachogram:
    """Evenly sampled intervals.

    Attributes
    ----------
    nn_ms : ndarray, shape (n_samples,)
        Empty where `note` tells why there is none.
    start_s : float
        Time of the first sample, on the time axis of the beats.
    rate_hz : float
        Samples per second.
    covered_share : float
        Share of the stretch asked for, 0 to 1, that lies within valid intervals.
    note : str
        Why there is no tachogram; empty otherwise.
    """

    nn_ms: NDArray[np.float64]
    start_s: float
    rate_hz: float
    covered_share: float
    note: str


def time_domain(
    interval_ms: NDArray[np.float64], valid: NDArray[np.bool_], valid_pair: NDArray[np.bool_]
) -> TimeDomain:
    """Compute the time-domain measures of successive intervals.

    Parameters
    ----------
    interval_ms : ndarray, shape (n,)
    valid : ndarray, shape (n,), bool
    valid_pair : ndarray, shape (n - 1,), bool

    Returns
    -------
    TimeDomain
        All NaN with fewer than three valid intervals; rmssd and pnn50 NaN without a valid pair.
    """
    used_ms = interval_ms[valid]
    if used_ms.size < LEAST_INTERVALS:
        return TimeDomain(np.nan, np.nan, np.nan, np.nan, np.nan)
    mean_ms = float(np.mean(used_ms))
    difference_ms = np.diff(interval_ms)[valid_pair]
    if difference_ms.size:
        rmssd = float(np.sqrt(np.mean(difference_ms**2)))
        pnn50 = float(100 * np.mean(np.abs(difference_ms) > 50))
    else:
        rmssd, pnn50 = np.nan, np.nan
    return TimeDomain(60_000 / mean_ms, mean_ms, float(np.std(used_ms, ddof=1)), rmssd, pnn50)


def heart_features(
    beat_times_s: NDArray[np.float64], epoch_start_s: NDArray[np.float64], epoch_length_s: float
) -> tuple[FeatureValue, ...]:
    """Return the time-domain features of one channel, computed per epoch and averaged over the epochs.

    An interval belongs to an epoch when both its beats lie within ``[start, start + length)``. Which
    intervals are valid is judged on the whole series, so that an epoch's first beats have neighbours on
    both sides.

    Parameters
    ----------
    beat_times_s : ndarray, shape (n_beats,)
        Increasing, on the same time axis as the epochs.
    epoch_start_s : ndarray, shape (n_epochs,)
        Starts of the kept epochs; none lies across a gap.
    epoch_length_s : float
        Length of every epoch.

    Returns
    -------
    tuple of FeatureValue
        ``heart_rate`` (1/min), ``mean_nn``, ``sdnn``, ``rmssd`` (ms), ``pnn50`` (%) and ``beats`` (1: beats
        within the kept epochs, each counted once though epochs overlap). Values have the shape (1,).
    """
    nn = valid_intervals(beat_times_s)
    first = np.searchsorted(beat_times_s, epoch_start_s, side="left")
    stop = np.searchsorted(beat_times_s, epoch_start_s + epoch_length_s, side="left")
    measures = [_of_beats(nn, int(a), int(b)) for a, b in zip(first, stop, strict=True)]
    counted = np.zeros(beat_times_s.size, dtype=np.bool_)
    for a, b in zip(first, stop, strict=True):
        counted[a:b] = True
    n_beats = float(np.count_nonzero(counted)) if epoch_start_s.size else np.nan
    return (
        *(_mean_over_epochs(field.name, measures) for field in fields(TimeDomain)),
        _one("beats", "1", n_beats, _NO_EPOCH),
    )


_NO_EPOCH = "no epoch was kept"


def _of_beats(nn: NN, first: int, stop: int) -> TimeDomain:
    """Measure the intervals between the beats `first` to `stop` - 1."""
    last = max(stop - 1, first)
    return time_domain(
        nn.interval_ms[first:last], nn.valid[first:last], nn.valid_pair[first : max(last - 1, first)]
    )


def _mean_over_epochs(feature: str, measures: list[TimeDomain]) -> FeatureValue:
    values = np.array([getattr(measure, feature) for measure in measures], dtype=np.float64)
    given = values[np.isfinite(values)]
    mean = float(np.mean(given)) if given.size else np.nan
    wanting = f"{_FEW} or no successive pair" if feature in ("rmssd", "pnn50") else _FEW
    if not measures:
        return _one(feature, _UNITS[feature], mean, _NO_EPOCH)
    if 0 < given.size < values.size:
        note = f"{values.size - given.size} of {values.size} epochs left out: {wanting}"
        return FeatureValue(feature, "", _UNITS[feature], np.array([mean]), (note,))
    return _one(feature, _UNITS[feature], mean, f"{wanting} in every kept epoch")


def tachogram(
    beat_times_s: NDArray[np.float64], start_s: float, stop_s: float, interpolation_hz: float
) -> Tachogram:
    """Sample the valid intervals evenly by a cubic spline.

    Each interval stands at its later beat. The samples lie at ``start_s + k / interpolation_hz`` before
    `stop_s`; those before the first or after the last valid interval are left out, for a spline says
    nothing there. Beats outside ``[start_s, stop_s)`` are used where there are any, so that only the ends
    of a run shorten the tachogram.

    Parameters
    ----------
    beat_times_s : ndarray, shape (n_beats,)
        Increasing, of one gap-free run.
    start_s, stop_s : float
        The stretch to be sampled, on the time axis of the beats.
    interpolation_hz : float
        Samples per second.

    Returns
    -------
    Tachogram
        Empty, with its reason, where valid intervals are too few or cover less than 80 % of the stretch (a
        limit of this package: a spectrum of mostly invented intervals is none).
    """
    from scipy.interpolate import CubicSpline

    first, stop = np.searchsorted(beat_times_s, [start_s, stop_s])
    nn = valid_intervals(beat_times_s[max(int(first) - _BEATS_BEYOND, 0) : int(stop) + _BEATS_BEYOND])
    covered = _covered_share(nn, start_s, stop_s)
    connected = _connected(nn.time_s[nn.valid], start_s, stop_s)
    time_s, interval_ms = nn.time_s[nn.valid][connected], nn.interval_ms[nn.valid][connected]
    if time_s.size < 4:
        return Tachogram(np.empty(0), start_s, interpolation_hz, covered, "fewer than 4 valid intervals")
    grid_s = start_s + np.arange(round((stop_s - start_s) * interpolation_hz)) / interpolation_hz
    grid_s = grid_s[(grid_s >= time_s[0]) & (grid_s <= time_s[-1])]
    if covered < LEAST_COVERED_SHARE:
        reason = f"valid intervals cover {covered:.1%} of the epoch, less than {LEAST_COVERED_SHARE:.0%}"
        return Tachogram(np.empty(0), start_s, interpolation_hz, covered, reason)
    nn_ms = np.asarray(CubicSpline(time_s, interval_ms)(grid_s), dtype=np.float64)
    return Tachogram(nn_ms, float(grid_s[0]), interpolation_hz, covered, "")


def _covered_share(nn: NN, start_s: float, stop_s: float) -> float:
    """Return the share of a stretch that lies within valid intervals."""
    later_s = nn.time_s[nn.valid]
    earlier_s = later_s - nn.interval_ms[nn.valid] / 1000
    within_s = np.clip(later_s, start_s, stop_s) - np.clip(earlier_s, start_s, stop_s)
    return float(np.sum(within_s) / (stop_s - start_s))


def _connected(time_s: NDArray[np.float64], start_s: float, stop_s: float) -> slice:
    """Leave out what lies outside a stretch and beyond a hole: a gap of the recording, or lost beats."""
    first, stop = np.searchsorted(time_s, [start_s, stop_s])
    after_hole = np.flatnonzero(np.diff(time_s) > _HOLE_S) + 1
    before, behind = after_hole[after_hole <= first], after_hole[after_hole >= stop]
    return slice(int(before[-1]) if before.size else 0, int(behind[0]) if behind.size else time_s.size)


def heart_band_features(
    frequencies_hz: NDArray[np.float64],
    density_ms2_per_hz: NDArray[np.float64],
    bands_hz: Mapping[str, tuple[float, float]],
    epoch_length_s: float,
) -> tuple[FeatureValue, ...]:
    """Return the band powers of the intervals and their ratios.

    Parameters
    ----------
    frequencies_hz : ndarray, shape (n_freq,)
        Evenly spaced from 0 Hz to half the interpolation rate.
    density_ms2_per_hz : ndarray, shape (n_channels, n_freq)
        Averaged over the kept epochs; NaN for a channel without a tachogram.
    bands_hz : mapping of str to (float, float)
        Named bands; ``lf`` and ``hf`` make the ratios.
    epoch_length_s : float
        A band needs an epoch of 60 s at least (from 0.15 Hz up), of 120 s (from 0.04 Hz) or of 300 s
        (below): ten cycles of its slowest wave are asked for by the Task Force; shorter epochs give no
        value.

    Returns
    -------
    tuple of FeatureValue
        ``band_power`` per band and ``total_power`` from the lowest to the highest edge of the bands (ms^2),
        ``lf_nu`` and ``hf_nu`` (%: of LF + HF), ``lf_hf_ratio`` (1).

    Raises
    ------
    StepError
        If a band reaches beyond the spectrum.
    """
    powers = {
        name: _power("band_power", name, band_power(frequencies_hz, density_ms2_per_hz, *edges_hz))
        for name, edges_hz in bands_hz.items()
    }
    total_hz = (min(low for low, _ in bands_hz.values()), max(high for _, high in bands_hz.values()))
    total = _power("total_power", "", band_power(frequencies_hz, density_ms2_per_hz, *total_hz))
    guarded = {
        name: _unless_too_short(power, bands_hz[name][0], epoch_length_s) for name, power in powers.items()
    }
    return (
        *guarded.values(),
        _unless_too_short(total, total_hz[0], epoch_length_s),
        *_balance(guarded, density_ms2_per_hz.shape[0]),
    )


def _power(feature: str, band: str, power: NDArray[np.float64]) -> FeatureValue:
    return FeatureValue(feature, band, "ms^2", power, notes_where_null(power, NO_TACHOGRAM))


def _unless_too_short(power: FeatureValue, low_hz: float, epoch_length_s: float) -> FeatureValue:
    """Withdraw the power of a band that is too slow for the epoch."""
    needed_s = _needed_s(low_hz)
    if epoch_length_s >= needed_s:
        return power
    reason = f"epoch of {epoch_length_s:g} s is shorter than {needed_s:g} s"
    return replace(power, values=np.full(power.values.shape, np.nan), note=(reason,) * power.values.size)


def _needed_s(low_hz: float) -> float:
    """Return the shortest epoch for a band that starts at `low_hz`."""
    if low_hz < 0.04:
        return 300.0
    return 120.0 if low_hz < 0.15 else 60.0


def _balance(powers: Mapping[str, FeatureValue], n_channels: int) -> tuple[FeatureValue, ...]:
    """Return the normalised units of LF and HF, and their ratio."""
    missing = [name for name in ("lf", "hf") if name not in powers]
    if missing:
        nothing = np.full(n_channels, np.nan)
        notes = (f"no band is named {' or '.join(missing)}",) * n_channels
        return tuple(FeatureValue(name, "", unit, nothing, notes) for name, unit in _BALANCE_UNITS.items())
    lf, hf = powers["lf"].values, powers["hf"].values
    reasons = [
        low or high or "no power in the divisor"
        for low, high in zip(powers["lf"].note, powers["hf"].note, strict=True)
    ]
    ratios = (_divide(100 * lf, lf + hf), _divide(100 * hf, lf + hf), _divide(lf, hf))
    return tuple(
        FeatureValue(name, "", unit, values, _told(values, reasons))
        for (name, unit), values in zip(_BALANCE_UNITS.items(), ratios, strict=True)
    )


_BALANCE_UNITS = {"lf_nu": "%", "hf_nu": "%", "lf_hf_ratio": "1"}


def _told(values: NDArray[np.float64], reasons: list[str]) -> tuple[str, ...]:
    return tuple(reason if np.isnan(value) else "" for value, reason in zip(values, reasons, strict=True))


def _divide(part: NDArray[np.float64], whole: NDArray[np.float64]) -> NDArray[np.float64]:
    result: NDArray[np.float64] = np.divide(part, whole, out=np.full(whole.shape, np.nan), where=whole > 0)
    return result


def _one(feature: str, unit: str, value: float, reason: str) -> FeatureValue:
    values = np.array([value], dtype=np.float64)
    return FeatureValue(feature, "", unit, values, notes_where_null(values, reason))
