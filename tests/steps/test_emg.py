"""Promises of steps/emg.py."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pytest

from bandcairn.errors import StepError
from bandcairn.steps.emg import EmgEpochs, emg_features, rms, trend

if TYPE_CHECKING:
    from bandcairn.steps.features import FeatureValue

FREQUENCIES_HZ = np.arange(0, 501.0)


def lines(frequency_hz: np.ndarray) -> np.ndarray:
    """Return a density per epoch that holds one line, shape (1, n_epochs, n_freq)."""
    return np.where(frequency_hz[:, np.newaxis] == FREQUENCIES_HZ, 1.0, 0.0)[np.newaxis]


def epochs(
    frequency_hz: np.ndarray, *, kept: np.ndarray | None = None, rms_uv: np.ndarray | None = None
) -> EmgEpochs:
    """Return touching epochs of 2 s of one channel, each a line at its frequency."""
    n = frequency_hz.size
    return EmgEpochs(
        start_s=np.arange(0, 2.0 * n, 2),
        length_s=2.0,
        kept=np.ones((1, n), dtype=bool) if kept is None else kept[np.newaxis],
        rms_uv=np.full((1, n), 3.0) if rms_uv is None else rms_uv[np.newaxis],
        frequencies_hz=FREQUENCIES_HZ,
        density=lines(frequency_hz),
    )


def features(of: EmgEpochs) -> dict[str, FeatureValue]:
    """Return the features by name."""
    return {value.feature: value for value in emg_features(of)}


def test_rms_of_a_sine_is_its_amplitude_over_root_two() -> None:
    """Along the last axis, for any leading ones."""
    sine = 10 * np.sin(2 * np.pi * np.arange(1000) / 50)
    np.testing.assert_allclose(rms(np.stack([sine, 2 * sine])[np.newaxis]), [[10 / 2**0.5, 20 / 2**0.5]])


def test_rms_reads_a_view_of_overlapping_epochs() -> None:
    """A read-only sliding view is as good as a copy."""
    samples = np.random.default_rng(1).normal(size=(2, 100))
    view = np.lib.stride_tricks.sliding_window_view(samples, 20, axis=-1)[:, ::10]
    np.testing.assert_allclose(rms(view), np.sqrt((view.copy() ** 2).mean(axis=-1)))


def test_a_perfect_line_is_found_with_no_width() -> None:
    """Slope, intercept and r squared of a line are its own."""
    line = trend(np.array([1.0, 3.0, 5.0, 7.0]), 80 - 0.5 * np.array([1.0, 3.0, 5.0, 7.0]))
    assert (line.slope, line.intercept, line.r_squared, line.n) == pytest.approx((-0.5, 80, 1, 4))
    assert (line.ci_low, line.ci_high) == pytest.approx((-0.5, -0.5))


def test_a_constant_has_no_share_of_variance_to_explain() -> None:
    """Its slope is 0 and its r squared does not exist."""
    line = trend(np.arange(4.0), np.full(4, 60.0))
    assert line.slope == 0
    assert np.isnan(line.r_squared)


@pytest.mark.parametrize("time_s", [np.array([0.0, 1.0]), np.zeros(5)])
def test_a_trend_without_enough_times_is_refused(time_s: np.ndarray) -> None:
    """Two points, or all at one time, make no trend."""
    with pytest.raises(StepError, match="a trend needs 3 at different times"):
        trend(time_s, np.arange(time_s.size, dtype=float))


def test_a_wider_confidence_gives_a_wider_interval() -> None:
    """The interval grows with the confidence and holds the slope."""
    values = np.random.default_rng(4).normal(size=20)
    narrow, wide = (trend(np.arange(20.0), values, confidence) for confidence in (0.8, 0.99))
    assert wide.ci_low < narrow.ci_low < narrow.slope < narrow.ci_high < wide.ci_high


def test_names_and_units_are_those_of_the_contract() -> None:
    """Each feature once, without a band."""
    found = emg_features(epochs(np.full(5, 80.0)))
    assert {value.feature: value.unit for value in found} == {
        "rms": "uV",
        "median_frequency": "Hz",
        "mean_frequency": "Hz",
        "median_frequency_slope": "Hz/s",
        "median_frequency_slope_percent": "%/s",
        "median_frequency_start": "Hz",
        "median_frequency_end": "Hz",
        "mean_frequency_slope": "Hz/s",
        "rms_slope": "uV/s",
    }
    assert {value.band for value in found} == {""}


def test_a_falling_frequency_is_told_from_the_segments_start_to_its_end() -> None:
    """Lines at 99, 97, ... Hz in epochs of 2 s: -1 Hz/s from 100 Hz at 0 s to 80 Hz at 20 s."""
    found = features(epochs(100 - (2.0 * np.arange(10) + 1)))
    expected = {
        "median_frequency": 90,
        "mean_frequency": 90,
        "median_frequency_slope": -1,
        "mean_frequency_slope": -1,
        "median_frequency_slope_percent": -1,
        "median_frequency_start": 100,
        "median_frequency_end": 80,
    }
    assert {name: found[name].values[0] for name in expected} == pytest.approx(expected)


def test_percent_refers_to_the_fitted_start_not_to_the_first_epoch() -> None:
    """One noisy first epoch moves the percent far less than its own deviation."""
    frequency_hz = 100 - (2.0 * np.arange(30) + 1)
    frequency_hz[0] = 50
    found = features(epochs(frequency_hz))
    start_hz = found["median_frequency_start"].values[0]
    assert start_hz > 90
    assert found["median_frequency_slope_percent"].values[0] == pytest.approx(
        100 * found["median_frequency_slope"].values[0] / start_hz
    )


def test_rejected_epochs_count_nowhere() -> None:
    """An outlier that was rejected changes no feature; the end stays that of the segment's last epoch."""
    frequency_hz = 100 - (2.0 * np.arange(10) + 1)
    frequency_hz[9] = 400
    rms_uv = np.r_[np.full(9, 3.0), 900.0]
    found = features(epochs(frequency_hz, kept=np.arange(10) < 9, rms_uv=rms_uv))
    assert found["median_frequency_slope"].values[0] == pytest.approx(-1)
    assert found["median_frequency_end"].values[0] == pytest.approx(80)
    assert found["rms"].values[0] == pytest.approx(3)


def test_rms_is_pooled_over_the_mean_square() -> None:
    """Epochs of 3 and 4 uV have a root mean square of sqrt 12.5 uV."""
    found = features(epochs(np.full(2, 80.0), rms_uv=np.array([3.0, 4.0])))
    assert found["rms"].values[0] == pytest.approx(np.sqrt(12.5))


def test_two_epochs_give_a_mean_but_no_trend() -> None:
    """Every trend is null with its reason, every mean stays."""
    found = features(epochs(np.full(4, 80.0), kept=np.array([True, True, False, False])))
    trends = [value for name, value in found.items() if name.endswith(("slope", "percent", "start", "end"))]
    assert len(trends) == 6
    assert all(np.isnan(value.values[0]) for value in trends)
    assert {value.note for value in trends} == {("2 epochs are fewer than the 3 that a trend needs",)}
    assert found["median_frequency"].values[0] == pytest.approx(80)
    assert found["median_frequency"].note == ("",)


def test_no_kept_epoch_gives_nulls_with_their_reason() -> None:
    """No value, no warning."""
    found = features(epochs(np.full(4, 80.0), kept=np.zeros(4, dtype=bool)))
    assert all(np.isnan(value.values[0]) and value.note[0] for value in found.values())
    assert found["rms"].note == ("no epoch was kept",)


def test_a_segment_too_short_for_an_epoch_gives_nulls() -> None:
    """No epoch at all is no error here."""
    found = features(epochs(np.empty(0)))
    assert all(np.isnan(value.values[0]) for value in found.values())
    assert found["rms"].note == found["mean_frequency"].note == ("no epoch was kept",)


def test_epochs_of_zeros_have_an_amplitude_and_no_frequency() -> None:
    """A silent channel: rms 0, its frequencies null."""
    found = features(epochs(np.full(4, -1.0), rms_uv=np.zeros(4)))
    assert found["rms"].values[0] == 0
    assert found["median_frequency"].note == ("no power in any kept epoch",)


def test_a_trend_that_starts_below_zero_has_no_percent() -> None:
    """Lines at 2, 10, 18, ... Hz: the fitted start of -2 Hz divides nothing."""
    found = features(epochs(8.0 * np.arange(10) + 2))
    assert found["median_frequency_start"].values[0] == pytest.approx(-2)
    assert np.isnan(found["median_frequency_slope_percent"].values[0])
    assert found["median_frequency_slope_percent"].note == ("the fitted start is not above 0 Hz",)


def test_channels_keep_their_order() -> None:
    """Two channels, each with its own epochs kept."""
    one = epochs(np.full(4, 80.0))
    two = EmgEpochs(
        one.start_s,
        one.length_s,
        np.repeat(one.kept, 2, axis=0),
        np.repeat(one.rms_uv, 2, axis=0),
        FREQUENCIES_HZ,
        np.concatenate([one.density, lines(np.full(4, 120.0))]),
    )
    np.testing.assert_allclose(features(two)["median_frequency"].values, [80, 120])
