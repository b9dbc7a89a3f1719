"""Epoch counts against their definition."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
from scipy.stats import median_abs_deviation

from bandcairn.signal import Run, Signal
from bandcairn.steps.epoch import Around, Reject, cut_around, cut_epochs, epoch_view
from bandcairn.steps.rejection import robust_z
from reference import published


def test_number_of_whole_epochs() -> None:
    """Truth: definition floor((T fs - L) / step) + 1 with L = round(len fs), step = round(L (1 - overlap))."""
    entry = published("windows_spectra", "EEG-EPOCHS")
    counts = []
    for total_s, rate, length_s, overlap in entry.inputs["cases"]:
        samples = np.zeros((1, total_s * rate))
        signal = Signal(samples, Fraction(rate), ("c",), (Run(0, samples.shape[1], Fraction(0)),))
        counts.append(len(cut_epochs(signal, length_s, overlap).first))

    entry.assert_close(counts)


def test_windows_equal_those_of_numpy() -> None:
    """Truth: independent library. The same windows as a sliding view, every step-th one."""
    samples = np.random.default_rng(1).normal(size=(2, 10_000))
    signal = Signal(samples, Fraction(1000), ("a", "b"), (Run(0, 10_000, Fraction(0)),))
    epochs = cut_epochs(signal, 1.024, 0.25)
    expected = np.lib.stride_tricks.sliding_window_view(samples, 1024, axis=1)[:, ::768]

    np.testing.assert_array_equal(epoch_view(samples, epochs), expected)
    np.testing.assert_array_equal(epochs.peak_to_peak_uv, np.ptp(expected, axis=-1))


def test_robust_z_equals_the_scaled_median_absolute_deviation_of_scipy() -> None:
    """Truth: independent library. scipy scales by 1 / 0.674490 = 1.482602, here it is 1.4826 as printed (Hampel 1974).

    Tolerance: the rounding of the printed factor, 2e-6 of it.
    """
    ranges = np.random.default_rng(3).lognormal(3, 0.5, (4, 301))
    logs = np.log(ranges)
    spread = np.asarray(median_abs_deviation(logs, axis=1, scale="normal"))[:, np.newaxis]
    expected = np.abs(logs - np.median(logs, axis=1, keepdims=True)) / spread

    np.testing.assert_allclose(
        robust_z(ranges, np.ones(ranges.shape, dtype=bool)), expected, rtol=2e-6, atol=1e-12
    )


def test_robust_z_of_normal_logarithms_has_the_tails_of_the_normal_distribution() -> None:
    """Truth: closed form. Beyond 2.5757 lies 1 % of a normal distribution.

    Tolerance: four standard errors of the share, of 200 000 values.
    """
    ranges = np.random.default_rng(4).lognormal(3, 0.5, (1, 200_000))
    share = np.mean(robust_z(ranges, np.ones(ranges.shape, dtype=bool)) > 2.5757)

    np.testing.assert_allclose(share, 0.01, atol=4 * np.sqrt(0.01 * 0.99 / 200_000))


def test_steps_equal_the_differences_of_numpy() -> None:
    """Truth: independent library. The largest of the differences within each window."""
    samples = np.random.default_rng(5).normal(size=(2, 10_000))
    signal = Signal(samples, Fraction(1000), ("a", "b"), (Run(0, 10_000, Fraction(0)),))
    epochs = cut_epochs(signal, 0.9, 0.6, (), Reject(step_uv=1))
    windows = np.lib.stride_tricks.sliding_window_view(samples, 900, axis=1)[:, ::360]

    assert epochs.step_uv is not None
    np.testing.assert_array_equal(epochs.step_uv, np.abs(np.diff(windows, axis=-1)).max(axis=-1))


def test_an_average_about_events_recovers_what_is_locked_to_them() -> None:
    """Truth: definition, planted. A wave 0.3 s after every event, at times off the grid, stands at 0.3 s in the mean.

    Tolerance: half a sample of shift of each event, and noise of 1 uV over the root of 400 events.
    """
    rng, rate_hz = np.random.default_rng(6), 250
    onsets_s = np.round(np.arange(400) * 1.5 + rng.uniform(0.5, 0.9, 400), 4)
    time_s = np.arange(rate_hz * 610) / rate_hz
    samples = rng.normal(0, 1, (1, time_s.size))
    for onset_s in onsets_s:
        samples[0] += 10 * np.exp(-0.5 * ((time_s - onset_s - 0.3) / 0.05) ** 2)
    signal = Signal(samples, Fraction(rate_hz), ("a",), (Run(0, time_s.size, Fraction(0)),))

    epochs = cut_around(signal, Around(-0.2, 0.8, tuple(onsets_s.tolist())))
    mean = epoch_view(signal.samples, epochs)[0].mean(axis=0)

    after_s = np.arange(250) / rate_hz - 0.2
    # Slope of the wave at most 10 exp(-1/2) / 0.05 = 121 uV/s; a shift is uniform within 2 ms to either side.
    shift_uv = 121 * 0.002 / np.sqrt(3 * 400)
    tolerance = 4.5 * np.hypot(shift_uv, 1 / np.sqrt(400))
    np.testing.assert_allclose(mean, 10 * np.exp(-0.5 * ((after_s - 0.3) / 0.05) ** 2), atol=tolerance)
    assert epochs.no_window == {}
