"""Promises of steps/quality.py."""

from __future__ import annotations

import numpy as np
import pytest

from bandcairn.errors import StepError
from bandcairn.steps.quality import assess

RATE_HZ = 250.0


def noise(n: int = 10_000) -> np.ndarray:
    """Return reproducible white noise of 20 uV, recorded in steps of 0.1 uV."""
    return np.round(np.random.default_rng(1).normal(0, 20, n), 1)


def test_clean_noise_is_neither_clipped_nor_flat() -> None:
    """A clean channel passes with nothing to report."""
    quality = assess(noise()[np.newaxis], (None,), RATE_HZ)
    assert quality.clipped_share[0] == 0
    assert quality.flat_share[0] == 0


def test_a_clean_sine_passes_its_tops_within_a_few_samples() -> None:
    """A well sampled rounded top is not called clipped: 100 uV at 10 Hz, steps of 0.1 uV."""
    sine = np.round(100 * np.sin(2 * np.pi * 10 * np.arange(10_000) / 1000.3), 1)
    assert assess(sine[np.newaxis], (None,), 1000.3).clipped_share[0] < 0.01


def test_planted_clipping_is_found_to_the_sample() -> None:
    """A stretch of 2 s at the ceiling is reported with its exact share and length."""
    samples = noise()
    samples[1000:1500] = 200
    quality = assess(samples[np.newaxis], (None,), RATE_HZ)
    assert quality.clipped_share[0] == pytest.approx(500 / 10_000, abs=0)
    assert quality.clipped_longest_s[0] == 2


def test_a_signal_clipped_on_both_sides_counts_both() -> None:
    """A sine cut at half its amplitude rests two thirds of its time at either limit."""
    sine = 100 * np.sin(2 * np.pi * np.arange(10_000) / 250)
    quality = assess(np.clip(sine, -50, 50)[np.newaxis], (None,), RATE_HZ)
    assert quality.clipped_share[0] == pytest.approx(2 / 3, abs=0.01)


def test_rests_at_the_recorders_limits_count_even_below_the_largest_sample() -> None:
    """A limit in microvolt is met by samples that scaling put a rounding error beside it."""
    samples = noise()
    samples[1000:1100] = 200.0
    samples[2000:2050] = np.nextafter(200.0, 0)
    quality = assess(samples[np.newaxis], ((-200.0, 200.0),), RATE_HZ)
    assert quality.clipped_share[0] == pytest.approx(150 / 10_000, abs=0)


def test_two_equal_samples_at_the_extreme_are_no_clipping() -> None:
    """It takes three samples to rest."""
    samples = noise()
    samples[500:502] = 300
    assert assess(samples[np.newaxis], (None,), RATE_HZ).clipped_share[0] == 0


def test_a_constant_channel_is_flat_and_not_clipped() -> None:
    """A dead channel is one fault, not two."""
    quality = assess(np.full((1, 5000), 7.0), ((-200.0, 200.0),), RATE_HZ)
    assert (quality.flat_share[0], quality.flat_longest_s[0]) == (1, 20)
    assert quality.clipped_share[0] == 0
    assert quality.peak_to_peak_uv[0] == 0


def test_only_stretches_of_a_second_are_flat() -> None:
    """A second without change counts, a sample less does not."""
    samples = noise()
    samples[1000:1250] = 0.05
    samples[3000:3249] = 0.05
    quality = assess(samples[np.newaxis], (None,), RATE_HZ)
    assert quality.flat_share[0] == pytest.approx(250 / 10_000, abs=0)
    assert quality.flat_longest_s[0] == 1


def test_amplitudes_are_those_of_a_sine_on_an_offset() -> None:
    """A sine of 100 uV on 5 mV: 200 uV peak to peak, 100/sqrt 2 about its mean."""
    sine = 5000 + 100 * np.sin(2 * np.pi * np.arange(10_000) / 40)
    quality = assess(sine[np.newaxis], (None,), RATE_HZ)
    assert quality.peak_to_peak_uv[0] == pytest.approx(200)
    assert quality.rms_uv[0] == pytest.approx(100 / np.sqrt(2))


def test_channels_are_judged_one_by_one() -> None:
    """The fault of one channel is not another's."""
    quality = assess(np.stack([noise(), np.zeros(10_000)]), (None, None), RATE_HZ)
    np.testing.assert_array_equal(quality.flat_share, [0, 1])


def test_a_recording_without_samples_is_refused() -> None:
    """Nothing can be said of nothing."""
    with pytest.raises(StepError, match="without samples"):
        assess(np.empty((1, 0)), (None,), RATE_HZ)
