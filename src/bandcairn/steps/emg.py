"""Surface EMG features: amplitude, spectral frequencies and their trend over a contraction."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.errors import StepError
from bandcairn.steps.band import mean_frequency, median_frequency
from bandcairn.steps.features import FeatureValue, notes_where_null, stack_channels

if TYPE_CHECKING:
    from numpy.typing import NDArray

LEAST_EPOCHS_FOR_TREND = 3


@dataclass(frozen=True, slots=True)
class Trend:
    """A straight line fitted by ordinary least squares.

    Attributes
    ----------
    slope : float
        Unit of the values per second.
    intercept : float
        Fitted value at time 0.
    ci_low, ci_high : float
        Confidence interval of the slope, by Student's t with n - 2 degrees of freedom.
    r_squared : float
        Share of the values' variance that the line explains; NaN where they do not vary.
    n : int
        Number of values.
    """

    slope: float
    intercept: float
    ci_low: float
    ci_high: float
    r_squared: float
    n: int

    def at(self, time_s: float) -> float:
        """Return the fitted value at `time_s`."""
        return self.intercept + self.slope * time_s


@dataclass(frozen=True, slots=True)
class EmgEpochs:
    """What was measured in the epochs of one segment.

    Attributes
    ----------
    start_s : ndarray, shape (n_epochs,)
        Start of each epoch in seconds from the start of the segment, increasing.
    length_s : float
        Length of every epoch.
    kept : ndarray, shape (n_channels, n_epochs), bool
        False where an epoch was rejected.
    rms_uv : ndarray, shape (n_channels, n_epochs)
        Root mean square of each epoch.
    frequencies_hz : ndarray, shape (n_freq,)
        Evenly spaced from 0 Hz to Nyquist.
    density : ndarray, shape (n_channels, n_epochs, n_freq)
        One-sided density of each epoch, uV^2/Hz.
    """

    start_s: NDArray[np.float64]
    length_s: float
    kept: NDArray[np.bool_]
    rms_uv: NDArray[np.float64]
    frequencies_hz: NDArray[np.float64]
    density: NDArray[np.float64]

    @property
    def middle_s(self) -> NDArray[np.float64]:
        """The time that stands for each epoch in a trend."""
        return self.start_s + self.length_s / 2

    @property
    def stop_s(self) -> float:
        """End of the last epoch, kept or not: the same for every channel."""
        return float(self.start_s[-1]) + self.length_s


def rms(samples: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the root mean square along the last axis, about zero.

    Parameters
    ----------
    samples : ndarray, shape (..., n_samples)

    Returns
    -------
    ndarray, shape (...)
    """
    mean_square = np.einsum("...i,...i->...", samples, samples) / samples.shape[-1]
    root: NDArray[np.float64] = np.sqrt(mean_square)
    return root


def trend(time_s: NDArray[np.float64], values: NDArray[np.float64], confidence: float = 0.95) -> Trend:
    """Fit a straight line over time by ordinary least squares.

    Parameters
    ----------
    time_s, values : ndarray, shape (n,)
        At least three, at two different times or more.
    confidence : float
        Of the slope's interval.

    Returns
    -------
    Trend

    Raises
    ------
    StepError
        If there are too few values, or all at one time.

    Notes
    -----
    The interval takes the residuals as independent. Those of overlapping epochs are not: it is then too
    narrow.
    """
    from scipy.special import stdtrit

    n = values.size
    time_from_mean = time_s - np.mean(time_s)
    spread = float(time_from_mean @ time_from_mean)
    if n < LEAST_EPOCHS_FOR_TREND or spread == 0:
        raise StepError(f"found {n} values over {np.ptp(time_s):g} s; a trend needs 3 at different times")
    value_from_mean = values - np.mean(values)
    slope = float(time_from_mean @ value_from_mean) / spread
    intercept = float(np.mean(values) - slope * np.mean(time_s))
    residual = value_from_mean - slope * time_from_mean
    unexplained, variation = float(residual @ residual), float(value_from_mean @ value_from_mean)
    half_width = float(stdtrit(n - 2, (1 + confidence) / 2)) * np.sqrt(unexplained / (n - 2) / spread)
    r_squared = 1 - unexplained / variation if variation > 0 else np.nan
    return Trend(slope, intercept, float(slope - half_width), float(slope + half_width), float(r_squared), n)


def emg_features(epochs: EmgEpochs) -> tuple[FeatureValue, ...]:
    """Return amplitude, spectral frequencies and their trends of each channel over one segment.

    The range of mean and median frequency is the whole spectrum: the filter has set its limits. A trend
    stands on the kept epochs at their middles; its start and end are the fitted values at the start of the
    segment and at the end of its last epoch, so that one noisy epoch moves neither.

    Parameters
    ----------
    epochs : EmgEpochs

    Returns
    -------
    tuple of FeatureValue
        ``rms`` (uV, root of the mean square over the kept epochs), ``median_frequency`` and
        ``mean_frequency`` (Hz, mean over the kept epochs), ``median_frequency_slope`` and
        ``mean_frequency_slope`` (Hz/s), ``median_frequency_slope_percent`` (%/s of the fitted start),
        ``median_frequency_start`` and ``_end`` (Hz), ``rms_slope`` (uV/s).

    References
    ----------
    De Luca CJ (1984) Myoelectrical manifestations of localized muscular fatigue in humans. Crit Rev Biomed
    Eng 11:251-279.
    """
    end_hz = float(epochs.frequencies_hz[-1])
    median_hz = median_frequency(epochs.frequencies_hz, epochs.density, 0, end_hz)
    mean_hz = mean_frequency(epochs.frequencies_hz, epochs.density, 0, end_hz)
    return stack_channels(
        tuple(
            _features_of_channel(epochs, channel, median_hz[channel], mean_hz[channel])
            for channel in range(epochs.kept.shape[0])
        )
    )


def _features_of_channel(
    epochs: EmgEpochs, channel: int, median_hz: NDArray[np.float64], mean_hz: NDArray[np.float64]
) -> tuple[FeatureValue, ...]:
    kept = epochs.kept[channel]
    rms_uv = epochs.rms_uv[channel]
    # An epoch of zeros has an amplitude but no frequency.
    with_power = kept & np.isfinite(median_hz)
    return (
        _one("rms", "uV", float(np.sqrt(np.mean(rms_uv[kept] ** 2))) if kept.any() else np.nan, _NO_EPOCH),
        _one("median_frequency", "Hz", _mean(median_hz[with_power]), _no_frequency(kept)),
        _one("mean_frequency", "Hz", _mean(mean_hz[with_power]), _no_frequency(kept)),
        *_median_trend(epochs, with_power, median_hz),
        _slope("mean_frequency_slope", "Hz/s", epochs, with_power, mean_hz),
        _slope("rms_slope", "uV/s", epochs, kept, rms_uv),
    )


_NO_EPOCH = "no epoch was kept"


def _no_frequency(kept: NDArray[np.bool_]) -> str:
    return "no power in any kept epoch" if kept.any() else _NO_EPOCH


def _median_trend(
    epochs: EmgEpochs, used: NDArray[np.bool_], median_hz: NDArray[np.float64]
) -> tuple[FeatureValue, ...]:
    line = _fit(epochs, used, median_hz)
    slope, start, end = (line.slope, line.at(0), line.at(epochs.stop_s)) if line else (np.nan,) * 3
    reason = _too_few(used)
    percent = 100 * slope / start if start > 0 else np.nan
    return (
        _one("median_frequency_slope", "Hz/s", slope, reason),
        _one("median_frequency_slope_percent", "%/s", percent, reason if line is None else _NO_START),
        _one("median_frequency_start", "Hz", start, reason),
        _one("median_frequency_end", "Hz", end, reason),
    )


_NO_START = "the fitted start is not above 0 Hz"


def _slope(
    feature: str, unit: str, epochs: EmgEpochs, used: NDArray[np.bool_], values: NDArray[np.float64]
) -> FeatureValue:
    line = _fit(epochs, used, values)
    return _one(feature, unit, line.slope if line else np.nan, _too_few(used))


def _fit(epochs: EmgEpochs, used: NDArray[np.bool_], values: NDArray[np.float64]) -> Trend | None:
    """Fit a line to the used epochs; None where there are too few."""
    if np.count_nonzero(used) < LEAST_EPOCHS_FOR_TREND:
        return None
    return trend(epochs.middle_s[used], values[used])


def _too_few(used: NDArray[np.bool_]) -> str:
    return f"{np.count_nonzero(used)} epochs are fewer than the {LEAST_EPOCHS_FOR_TREND} that a trend needs"


def _mean(values: NDArray[np.float64]) -> float:
    return float(np.mean(values)) if values.size else np.nan


def _one(feature: str, unit: str, value: float, reason: str) -> FeatureValue:
    values = np.array([value], dtype=np.float64)
    return FeatureValue(feature, "", unit, values, notes_where_null(values, reason))
