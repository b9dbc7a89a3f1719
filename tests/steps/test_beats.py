"""Promises of steps/beats.py. Scores on a real recording and over many rates stand in reference_checks."""

from __future__ import annotations

import numpy as np
import pytest

from bandcairn.errors import StepError
from bandcairn.steps.beats import find_r_peaks, valid_intervals

RATE_HZ = 250.0
LENGTH_S = 60.0
R_WAVE = (1000.0, 0.0, 0.011)
T_WAVE = (300.0, 0.25, 0.045)


def ecg(beats_s: np.ndarray, waves: tuple[tuple[float, float, float], ...] = (R_WAVE, T_WAVE)) -> np.ndarray:
    """Return Gaussian waves (height uV, delay s, width s) at each beat."""
    time_s = np.arange(round(LENGTH_S * RATE_HZ)) / RATE_HZ
    samples = np.zeros(time_s.size)
    for height, delay, width in waves:
        samples += height * np.exp(-(((time_s - (beats_s[:, np.newaxis] + delay)) / width) ** 2) / 2).sum(
            axis=0
        )
    return samples


def regular(interval_s: float = 0.83) -> np.ndarray:
    """Return beats that fall between the samples, away from the ends."""
    return np.arange(0.7, LENGTH_S - 0.7, interval_s) + 0.0013


def test_every_beat_is_found_between_the_samples() -> None:
    """Times are right within a twentieth of the sampling step, amplitudes within 1 uV."""
    beats = find_r_peaks(ecg(regular()), RATE_HZ)
    np.testing.assert_allclose(beats.times_s, regular(), atol=0.0002)
    np.testing.assert_allclose(beats.amplitude_uv, 1000, atol=1)
    assert not beats.inverted


def test_an_inverted_lead_gives_the_same_times() -> None:
    """Polarity is found, not assumed; amplitudes keep their sign."""
    upright, inverted = (find_r_peaks(sign * ecg(regular()), RATE_HZ) for sign in (1, -1))
    np.testing.assert_array_equal(inverted.times_s, upright.times_s)
    np.testing.assert_array_equal(inverted.amplitude_uv, -upright.amplitude_uv)
    assert inverted.inverted


def test_gain_does_not_matter() -> None:
    """A lead of 50 uV and one of 5 mV give the same beats."""
    for gain in (0.05, 5):
        found = find_r_peaks(gain * ecg(regular()), RATE_HZ)
        np.testing.assert_allclose(found.times_s, regular(), atol=0.0002)


def test_tall_t_waves_are_no_beats() -> None:
    """A T wave of 80 % of the R wave is not steep enough."""
    found = find_r_peaks(ecg(regular(), (R_WAVE, (800.0, 0.25, 0.045))), RATE_HZ)
    assert found.times_s.size == regular().size


def test_a_fall_of_the_amplitude_hides_no_beat() -> None:
    """After the contact worsens to a third, every smaller beat is still found."""
    samples = ecg(regular())
    samples[7500:] *= 0.33
    assert find_r_peaks(samples, RATE_HZ).times_s.size == regular().size


def test_an_artefact_of_ten_times_the_amplitude_hides_no_other_beat() -> None:
    """The level is a median: one spike midway between two beats adds itself at most."""
    samples = ecg(regular())
    spike_s = regular()[20] + 0.41
    samples += 10_000 * np.exp(-(((np.arange(samples.size) / RATE_HZ - spike_s) / 0.01) ** 2) / 2)
    found = find_r_peaks(samples, RATE_HZ).times_s
    kept = found[np.abs(found - spike_s) > 0.05]
    np.testing.assert_allclose(kept, regular(), atol=0.001)


def test_a_weak_beat_is_found_by_searching_back() -> None:
    """A beat of a quarter of the others lies below the threshold; the long interval gives it away."""
    weak = regular()[30]
    samples = ecg(np.delete(regular(), 30)) + 0.25 * ecg(np.array([weak]))
    np.testing.assert_allclose(find_r_peaks(samples, RATE_HZ).times_s, regular(), atol=0.001)


def test_a_pause_is_not_filled() -> None:
    """Where there is nothing, nothing is found."""
    paused = np.r_[regular()[:20], regular()[25:]]
    noise = np.random.default_rng(1).normal(0, 5, round(LENGTH_S * RATE_HZ))
    assert find_r_peaks(ecg(paused) + noise, RATE_HZ).times_s.size == paused.size


@pytest.mark.parametrize("samples", [np.zeros(5000), np.full(5000, 812.4), np.zeros(100), np.empty(0)])
def test_a_flat_or_very_short_run_has_no_beats(samples: np.ndarray) -> None:
    """No beat, no error, no warning."""
    beats = find_r_peaks(samples, RATE_HZ)
    assert beats.times_s.size == beats.amplitude_uv.size == 0


def test_a_peak_cut_off_by_the_end_is_left_out() -> None:
    """A beat whose top was not recorded has no time."""
    samples = ecg(regular())
    top = round(regular()[40] * RATE_HZ)
    assert find_r_peaks(samples[: top - 1], RATE_HZ).times_s.size == 40


def test_a_rate_that_misses_the_slope_is_refused() -> None:
    """The refusal names the rate and what is needed."""
    with pytest.raises(StepError, match="found 50 Hz; R peaks need 100 Hz"):
        find_r_peaks(np.zeros(5000), 50)


def test_regular_intervals_are_all_valid() -> None:
    """Each interval stands at its later beat."""
    nn = valid_intervals(np.array([1.0, 1.8, 2.7, 3.5]))
    np.testing.assert_allclose(nn.interval_ms, [800, 900, 800])
    np.testing.assert_array_equal(nn.time_s, [1.8, 2.7, 3.5])
    assert nn.valid.all()
    assert nn.valid_pair.tolist() == [True, True]


def test_a_missed_beat_costs_its_interval_and_its_pairs() -> None:
    """The double interval is left out, and so are the two pairs that it is part of."""
    nn = valid_intervals(np.delete(np.arange(0, 20, 0.8), 12))
    assert np.flatnonzero(~nn.valid).tolist() == [11]
    assert np.flatnonzero(~nn.valid_pair).tolist() == [10, 11]


def test_an_extra_beat_costs_both_its_intervals() -> None:
    """Two short intervals are left out."""
    nn = valid_intervals(np.sort(np.r_[np.arange(0, 20, 0.8), 8.3]))
    assert np.count_nonzero(~nn.valid) == 2


def test_a_slow_drift_of_the_rate_is_no_fault() -> None:
    """From 50 to 150 1/min within two minutes, every interval stays valid."""
    interval_s = np.linspace(1.2, 0.4, 150)
    assert valid_intervals(np.cumsum(interval_s)).valid.all()


def test_intervals_out_of_range_are_never_valid() -> None:
    """A whole series at 250 1/min, or at 25, is no sinus rhythm."""
    assert not valid_intervals(np.arange(0, 20, 0.24)).valid.any()
    assert not valid_intervals(np.arange(0, 60, 2.4)).valid.any()


@pytest.mark.parametrize("n", [0, 1, 2])
def test_few_beats_give_few_intervals(n: int) -> None:
    """No beat, no interval; no error, no warning."""
    nn = valid_intervals(np.arange(n, dtype=float))
    assert nn.interval_ms.size == nn.valid.size == max(n - 1, 0)
    assert nn.valid_pair.size == max(n - 2, 0)
