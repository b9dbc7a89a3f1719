"""The ECG beats as its model states, and its waves are where the beats are."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import signal

from bandcairn.demo import heart

MODEL = heart.HeartModel(rate_per_min=66.0, sdnn_ms=45.0, lf_hf_ratio=1.6)
RATE_HZ = 100
LENGTH_S = 240


def drawn_nn_ms(model: heart.HeartModel, count: int, seed: int) -> list[np.ndarray]:
    """Return the intervals between beats of `count` recordings in ms."""
    rng = np.random.default_rng(seed)
    times = (heart.beat_times(heart.intervals(rng, model, LENGTH_S, RATE_HZ), RATE_HZ) for _ in range(count))
    return [1e3 * np.diff(each) for each in times]


def test_mean_heart_rate_is_that_of_the_model() -> None:
    """Beats over time are exact but for the two edges of the recording."""
    rates = [60e3 / nn_ms.mean() for nn_ms in drawn_nn_ms(MODEL, 20, seed=1)]

    # Each edge moves the count by up to a twentieth of a beat in 264.
    assert rates == pytest.approx([66.0] * 20, abs=0.05)


def test_interval_statistics_are_those_of_the_model() -> None:
    """SDNN is planted; RMSSD follows from the spectrum in closed form."""
    drawn = drawn_nn_ms(MODEL, 20, seed=2)

    # Unequal intervals sample the rhythms unevenly: second order, (45 / 909)^2, some 0.3 %.
    assert np.mean([nn_ms.std() for nn_ms in drawn]) == pytest.approx(45, rel=0.01)
    rmssd_ms = np.mean([np.sqrt(np.mean(np.diff(nn_ms) ** 2)) for nn_ms in drawn])
    assert rmssd_ms == pytest.approx(heart.expected_rmssd_ms(MODEL), rel=0.01)


def test_power_of_the_intervals_lies_in_two_peaks_with_the_planted_ratio() -> None:
    """A periodogram over beats, the frequency in cycles a beat over the mean interval, finds LF/HF."""
    ratios = []
    for nn_ms in drawn_nn_ms(MODEL, 30, seed=3):
        cycles_per_beat, power = signal.periodogram(nn_ms)
        frequency_hz = cycles_per_beat / MODEL.mean_nn_s
        low = power[(frequency_hz >= 0.04) & (frequency_hz < 0.15)].sum()
        high = power[(frequency_hz >= 0.15) & (frequency_hz < 0.4)].sum()
        ratios.append(low / high)

    # Frequency modulation of the beats puts side bands of a few per cent round each peak.
    assert np.mean(ratios) == pytest.approx(1.6, rel=0.05)


def test_r_waves_follow_the_beats_at_a_constant_distance() -> None:
    """The largest peak of each cycle lies where the phase passes 2 pi k, within 4 ms of a fixed lag."""
    seed, rate_hz = 4, 500
    beats = heart.beat_times(heart.intervals(np.random.default_rng(seed), MODEL, 60, rate_hz), rate_hz)
    ecg = heart.ecg(np.random.default_rng(seed), MODEL, 60, rate_hz)
    peaks, _ = signal.find_peaks(ecg, height=600, distance=rate_hz // 3)
    lag_s = peaks / rate_hz - beats

    assert np.ptp(lag_s) < 0.008
    assert np.abs(np.median(lag_s)) < 0.01


def test_waves_have_the_size_of_a_limb_lead() -> None:
    """R near 1 mV, nothing beyond 3 mV, and no transient at the start."""
    ecg = heart.ecg(np.random.default_rng(5), MODEL, 60, 500)

    assert 700 < np.percentile(ecg, 99.8) < 1500
    assert np.abs(ecg).max() < 3000
    assert np.abs(ecg[:500].mean() - ecg[500:].mean()) < 100
