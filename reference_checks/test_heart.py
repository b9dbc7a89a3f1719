"""Heart rate variability, against the definitions of the Task Force (1996) and closed forms."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import signal

from bandcairn.steps.heart import heart_band_features, heart_features, tachogram
from reference import published

BANDS_HZ = {"vlf": (0.003, 0.04), "lf": (0.04, 0.15), "hf": (0.15, 0.4)}


@pytest.mark.parametrize("entry", ["HRV-TIME-A", "HRV-TIME-C"])
def test_time_domain_of_a_short_series(entry: str) -> None:
    """Kind: definition, recomputed in two languages. Tolerance: as stated, 1e-5."""
    reference = published("ecg", entry)
    beats_s = np.r_[0, np.cumsum(reference.inputs["nn_ms"])] / 1000
    found = {value.feature: value.values[0] for value in heart_features(beats_s, np.array([0.0]), 30)}
    keys = {
        "mean_nn": "mean_nn_ms",
        "sdnn": "sdnn_ms",
        "rmssd": "rmssd_ms",
        "pnn50": "pnn50_pct",
        "heart_rate": "hr_of_mean_bpm",
    }
    for feature, key in keys.items():
        reference.assert_close(found[feature], key)
    assert found["beats"] == reference.expected["n"] + 1


def balance(nn_ms: np.ndarray) -> dict[str, float]:
    """Return the features of the periodogram of intervals at 4 Hz, their mean removed."""
    frequencies_hz, density = signal.periodogram(nn_ms, 4, detrend="constant")
    found = heart_band_features(frequencies_hz, density[np.newaxis], BANDS_HZ, 300)
    return {value.band or value.feature: float(value.values[0]) for value in found}


@pytest.mark.parametrize("entry", ["HRV-LFHF-EVEN-20-15", "HRV-LFHF-EVEN-30-10"])
def test_two_waves_in_an_even_tachogram(entry: str) -> None:
    """Kind: closed form. Tolerance: as stated, rel 1e-6."""
    reference = published("ecg", entry)
    time_s = np.arange(1200) / 4
    slow = reference.inputs["A1_ms"] * np.sin(2 * np.pi * 0.1 * time_s)
    fast = reference.inputs["A2_ms"] * np.sin(2 * np.pi * 0.25 * time_s)
    found = balance(800 + slow + fast)
    for feature, key in (("lf", "LF_ms2"), ("hf", "HF_ms2"), ("lf_hf_ratio", "LF_HF"), ("lf_nu", "LF_nu")):
        reference.assert_close(found[feature], key)


@pytest.mark.parametrize("entry", ["HRV-LFHF-BEAT-800", "HRV-LFHF-BEAT-600"])
def test_two_waves_sampled_by_the_beats(entry: str) -> None:
    """Kind: another implementation (two libraries). Tolerance: as stated, rel 0.002."""
    reference = published("ecg", entry)
    beats_s = [0.0]
    while beats_s[-1] < 320:
        now_s = beats_s[-1]
        slow = reference.inputs["A1_ms"] * np.sin(2 * np.pi * 0.1 * now_s)
        fast = reference.inputs["A2_ms"] * np.sin(2 * np.pi * 0.25 * now_s)
        beats_s.append(now_s + (reference.inputs["rr0_ms"] + slow + fast) / 1000)
    sampled = tachogram(np.array(beats_s), 10, 310, 4)
    assert (sampled.nn_ms.size, sampled.start_s) == (1200, 10)
    found = balance(sampled.nn_ms)
    for feature, key in (("lf", "LF_ms2"), ("hf", "HF_ms2"), ("lf_hf_ratio", "LF_HF")):
        reference.assert_close(found[feature], key)


def test_the_powers_of_the_bands_are_the_variance() -> None:
    """Kind: closed form (Parseval). Tolerance: 1 %, the leakage of waves that do not fit the stretch."""
    time_s = np.arange(1200) / 4
    nn_ms = 800 + sum(
        a * np.sin(2 * np.pi * f * time_s) for a, f in ((30, 0.0213), (20, 0.0987), (15, 0.2511))
    )
    found = balance(np.asarray(nn_ms))
    assert found["total_power"] == pytest.approx(np.var(nn_ms), rel=0.01)
    assert found["vlf"] + found["lf"] + found["hf"] == pytest.approx(found["total_power"], rel=1e-12)
