"""The EEG has the spectrum that its model states."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import signal

from bandcairn.demo import brain

MODEL = brain.EegModel(
    background_uv2_per_hz=18.0,
    exponent=1.2,
    theta=brain.Rhythm(6.0, 0.8, (8.0, 7.0, 4.0, 3.0)),
    alpha=brain.Rhythm(10.0, 0.7, (9.0, 14.0, 38.0, 55.0)),
    beta=brain.Rhythm(20.0, 2.5, (5.0, 5.0, 4.0, 4.0)),
)
RATE_HZ = 128


def test_background_power_equals_its_closed_form() -> None:
    """Without rhythms the band power is the integral of k / f^b."""
    none = brain.Rhythm(10.0, 1.0, (0.0,) * 4)
    model = brain.EegModel(18.0, 1.2, none, none, none)

    # The trapezoid rule on a convex curve of 0.01 Hz steps is high by less than 1e-6.
    closed_form = 18 * (8**-0.2 - 13**-0.2) / 0.2
    assert brain.band_power(model, 8, 13) == pytest.approx([closed_form] * 4, rel=1e-6)


def test_measured_density_follows_the_model_from_1_to_45_hz() -> None:
    """A Welch estimate with another library's code scatters round the model, at every channel."""
    samples = brain.eeg(np.random.default_rng(1), MODEL, 600, RATE_HZ)
    frequency_hz, measured = signal.welch(samples, RATE_HZ, nperseg=4 * RATE_HZ)
    inside = (frequency_hz >= 1) & (frequency_hz <= 45)
    ratio = measured[:, inside] / brain.density(MODEL, frequency_hz[inside])

    # About 290 Hann windows at half overlap: a standard error of some 7 % a bin; 180 bins a channel.
    assert np.all(np.abs(ratio - 1) < 0.35)
    assert np.abs(ratio.mean(axis=1) - 1) == pytest.approx(0, abs=0.03)


def test_background_falls_with_the_planted_exponent() -> None:
    """The slope of log density on log frequency, away from the rhythms, is minus the exponent."""
    samples = brain.eeg(np.random.default_rng(2), MODEL, 600, RATE_HZ)
    frequency_hz, measured = signal.welch(samples, RATE_HZ, nperseg=4 * RATE_HZ)
    apart = ((frequency_hz >= 1) & (frequency_hz <= 3)) | ((frequency_hz >= 32) & (frequency_hz <= 45))
    slope = np.polyfit(np.log(frequency_hz[apart]), np.log(measured[:, apart].T), 1)[0]

    assert -slope == pytest.approx(1.2, abs=0.05)


def test_scaled_alpha_changes_the_band_by_the_ratio_and_nothing_else() -> None:
    """The ratio holds for the power from 8 to 13 Hz, background included."""
    ratio = np.array([1.2, 1.2, 1.5, 1.5])
    night = brain.scale_alpha_band(MODEL, ratio)

    assert brain.band_power(night, 8, 13) / brain.band_power(MODEL, 8, 13) == pytest.approx(ratio, rel=1e-9)
    assert (night.theta, night.beta, night.exponent) == (MODEL.theta, MODEL.beta, MODEL.exponent)
    assert all(np.array(night.alpha.power_uv2) / np.array(MODEL.alpha.power_uv2) > ratio)


def test_stated_variance_is_that_of_repeated_measurement() -> None:
    """The relative variance of a band power is that of many drawn recordings."""
    rng = np.random.default_rng(3)
    inside = slice(8 * 60, 13 * 60)  # bins of 1/60 Hz
    drawn = [signal.periodogram(brain.eeg(rng, MODEL, 60, 64), 64)[1] for _ in range(200)]
    powers = np.array(drawn)[:, :, inside].sum(axis=2)
    relative_sd = powers.std(axis=0) / powers.mean(axis=0)

    # 200 draws give a standard deviation to 5 %.
    assert relative_sd == pytest.approx(np.sqrt(brain.relative_variance(MODEL, 8, 13, 60)), rel=0.2)


def test_neighbouring_electrodes_are_more_alike_than_distant_ones() -> None:
    """Volume conduction is felt along the midline."""
    shared = np.atleast_2d(np.corrcoef(brain.eeg(np.random.default_rng(4), MODEL, 120, RATE_HZ)))

    assert shared[0, 1] > shared[0, 2] > shared[0, 3] > 0


def test_blinks_stand_out_at_the_forehead_and_leave_alpha_alone() -> None:
    """A blink is beyond 150 uV at Fz, faint at Oz, and adds less than 0.2 uV^2 from 8 to 13 Hz."""
    samples = np.zeros((4, 60 * RATE_HZ))
    brain.add_blinks(np.random.default_rng(5), samples, RATE_HZ, 4)
    _, density = signal.periodogram(samples[0], RATE_HZ)

    assert samples[0].max() > 150
    assert samples[3].max() < 30
    assert density[8 * 60 : 13 * 60].sum() / 60 < 0.2  # bins of 1/60 Hz
