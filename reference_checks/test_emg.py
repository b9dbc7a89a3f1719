"""Spectral frequencies and trends of EMG, against closed forms and another library."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import signal, stats

from bandcairn.steps.band import band_power, mean_frequency, median_frequency
from bandcairn.steps.emg import EmgEpochs, emg_features, rms, trend
from reference import published


def shwedyk(frequencies_hz: np.ndarray, low_hz: float, high_hz: float) -> np.ndarray:
    """Return the model spectrum of Shwedyk, Balasubramanian & Scott (1977), of unit gain."""
    square = frequencies_hz**2
    return square / ((square + low_hz**2) * (square + high_hz**2) ** 2)


def test_mean_and_median_of_the_toy_spectrum() -> None:
    """Kind: definition. Tolerance: as stated, rounding."""
    reference = published("emg", "EMG-DEF")
    frequencies_hz = np.array(reference.inputs["f_hz"], dtype=float)
    power = np.array(reference.inputs["P"], dtype=float)
    reference.assert_close(mean_frequency(frequencies_hz, power, 5, 55), "mnf_hz")
    reference.assert_close(median_frequency(frequencies_hz, power, 5, 55), "mdf_hz")


def test_mean_of_a_line_spectrum() -> None:
    """Kind: definition, recomputed in R. Tolerance: as stated, rel 1e-8."""
    reference = published("emg", "EMG-MOMENTS")
    frequencies_hz = np.arange(0, 501.0)
    density = np.zeros(frequencies_hz.size)
    density[reference.inputs["f_hz"]] = reference.inputs["P"]
    reference.assert_close(mean_frequency(frequencies_hz, density, 0, 500), "mnf_hz")


@pytest.mark.parametrize("entry", ["EMG-FLAT-20-450", "EMG-FLAT-10-500"])
def test_a_flat_band_has_both_in_its_middle(entry: str) -> None:
    """Kind: closed form. Tolerance: as stated, 1e-6 Hz."""
    reference = published("emg", entry)
    frequencies_hz = np.arange(0, 1000.5, 0.5)
    flat = np.ones(frequencies_hz.size)
    low_hz, high_hz = reference.inputs["band_hz"]
    reference.assert_close(mean_frequency(frequencies_hz, flat, low_hz, high_hz), "mnf_hz")
    reference.assert_close(median_frequency(frequencies_hz, flat, low_hz, high_hz), "mdf_hz")


@pytest.mark.parametrize("entry", ["EMG-SHWEDYK-60-120", "EMG-SHWEDYK-30-60", "EMG-SHWEDYK-50-150"])
def test_the_model_spectrum_within_a_band(entry: str) -> None:
    """Kind: closed form. Tolerance: as stated, rel 1e-6; the cells of 0.01 Hz leave less than 1e-7."""
    reference = published("emg", entry)
    frequencies_hz = np.arange(100_001) / 100
    density = shwedyk(frequencies_hz, reference.inputs["fl_hz"], reference.inputs["fh_hz"])
    reference.assert_close(mean_frequency(frequencies_hz, density, 20, 450), "mnf_20_450_hz")
    reference.assert_close(median_frequency(frequencies_hz, density, 20, 450), "mdf_20_450_hz")


@pytest.mark.parametrize("entry", ["EMG-SHWEDYK-60-120", "EMG-SHWEDYK-30-60", "EMG-SHWEDYK-50-150"])
def test_the_whole_model_spectrum(entry: str) -> None:
    """Kind: closed form. Tolerance: as stated, rel 1e-6; the tail above 400 kHz holds 1e-7 of the first moment."""
    reference = published("emg", entry)
    frequencies_hz = np.arange(4_000_001) / 10
    density = shwedyk(frequencies_hz, reference.inputs["fl_hz"], reference.inputs["fh_hz"])
    reference.assert_close(band_power(frequencies_hz, density, 0, 400_000), "total_integral")
    reference.assert_close(mean_frequency(frequencies_hz, density, 0, 400_000), "mnf_hz")
    reference.assert_close(median_frequency(frequencies_hz, density, 0, 400_000), "mdf_hz")


def test_slower_conduction_scales_both_frequencies() -> None:
    """Kind: closed form. Tolerance: 1e-6, for both spectra are cut at 20 kHz and sampled at 0.01 Hz.

    The source's 1e-8 holds for the integrals to infinity; the tail above 20 kHz holds some 1e-5 of the
    first moment, but nearly the same share of both when the range is scaled along.
    """
    reference = published("emg", "EMG-CVSCALE-0p8")
    scale = reference.inputs["s"]
    low_hz, high_hz = reference.inputs["fl_hz"], reference.inputs["fh_hz"]
    frequencies_hz = np.arange(2_000_001) / 100
    rested = shwedyk(frequencies_hz, low_hz, high_hz)
    tired = shwedyk(frequencies_hz, scale * low_hz, scale * high_hz)
    for measure, key in ((mean_frequency, "mnf_ratio"), (median_frequency, "mdf_ratio")):
        ratio = measure(frequencies_hz, tired, 0, scale * 20_000) / measure(frequencies_hz, rested, 0, 20_000)
        assert float(ratio) == pytest.approx(reference.expected[key], abs=1e-6)


def test_a_triangular_spectrum() -> None:
    """Kind: closed form, F/3 and F (1 - 1/sqrt 2). Tolerance: as stated, 1e-6 Hz; the bins lie at half steps."""
    reference = published("emg", "EMG-TRIANGLE")
    end_hz = reference.inputs["F_hz"]
    frequencies_hz = (np.arange(end_hz * 100) + 0.5) / 100
    density = end_hz - frequencies_hz
    reference.assert_close(mean_frequency(frequencies_hz, density, 0, end_hz), "mnf_hz")
    reference.assert_close(median_frequency(frequencies_hz, density, 0, end_hz), "mdf_hz")


def test_the_median_of_band_limited_noise() -> None:
    """Kind: closed form, (20 + 450)/2 Hz. Tolerance: five standard errors.

    With N = T * (450 - 20) independent values, the median of a flat band scatters by 430 / (2 sqrt N) Hz:
    1.0 Hz at 100 s.
    """
    samples = np.random.default_rng(11).normal(size=200_000)
    spectrum = np.fft.rfft(samples)
    spectrum_hz = np.fft.rfftfreq(samples.size, 1 / 2000)
    spectrum[(spectrum_hz < 20) | (spectrum_hz >= 450)] = 0
    frequencies_hz, density = signal.welch(np.fft.irfft(spectrum), 2000, "hann", 2000)
    assert float(median_frequency(frequencies_hz, density, 0, 1000)) == pytest.approx(235, abs=5)


def test_rms_against_the_variance() -> None:
    """Kind: another library. Tolerance: rounding."""
    samples = np.random.default_rng(5).normal(0, 30, (3, 7, 1000))
    np.testing.assert_allclose(rms(samples), np.linalg.norm(samples, axis=-1) / np.sqrt(1000), rtol=1e-13)


@pytest.mark.parametrize("n", [3, 10, 120])
@pytest.mark.parametrize("confidence", [0.9, 0.95])
def test_a_trend_against_another_library(n: int, confidence: float) -> None:
    """Kind: another library (scipy.stats.linregress, Student's t). Tolerance: rounding, rel 1e-9."""
    generator = np.random.default_rng(n)
    time_s = np.sort(generator.uniform(0, 60, n))
    values = 90 - 0.3 * time_s + generator.normal(0, 2, n)
    expected = stats.linregress(time_s, values)
    half_width = stats.t.ppf((1 + confidence) / 2, n - 2) * expected.stderr
    found = trend(time_s, values, confidence)
    assert found.slope == pytest.approx(expected.slope, rel=1e-9)
    assert found.intercept == pytest.approx(expected.intercept, rel=1e-9)
    assert found.r_squared == pytest.approx(expected.rvalue**2, rel=1e-9)
    assert found.ci_low == pytest.approx(expected.slope - half_width, rel=1e-9)
    assert found.ci_high == pytest.approx(expected.slope + half_width, rel=1e-9)


def test_a_slowing_model_muscle_has_its_slope() -> None:
    """Kind: closed form. Tolerance: 0.1 % of the frequency; the spectra end at 4000 Hz.

    The conduction velocity falls from 1 by 0.5 %/s: so do the median frequency and its percent of the start.
    """
    start_s = np.arange(60.0)
    velocity = 1 - 0.005 * (start_s + 0.5)
    frequencies_hz = np.arange(0, 4001.0)
    density = np.stack([shwedyk(frequencies_hz, 60 * v, 120 * v) for v in velocity])[np.newaxis]
    kept = np.ones((1, 60), dtype=bool)
    found = {
        value.feature: float(value.values[0])
        for value in emg_features(EmgEpochs(start_s, 1.0, kept, np.ones((1, 60)), frequencies_hz, density))
    }
    full_hz = published("emg", "EMG-SHWEDYK-60-120").expected["mdf_hz"]
    assert found["median_frequency_start"] == pytest.approx(full_hz, rel=1e-3)
    assert found["median_frequency_end"] == pytest.approx(0.7 * full_hz, rel=1e-3)
    assert found["median_frequency_slope_percent"] == pytest.approx(-0.5, rel=1e-3)
