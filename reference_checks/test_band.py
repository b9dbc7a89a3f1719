"""Band powers and the frequencies that divide them, against closed forms and another library."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from scipy import integrate, signal

from bandcairn.steps.band import band_power, mean_frequency, median_frequency, spectral_edge
from bandcairn.steps.eeg import eeg_features
from reference import published


@pytest.mark.parametrize("n_samples", [4096, 4095])
def test_bands_that_tile_the_spectrum_hold_the_mean_square(n_samples: int) -> None:
    """Kind: closed form (Parseval). Tolerance: rounding of a sum of 4096 terms.

    The density is that of another library, for an even and an odd number of samples.
    """
    samples = np.random.default_rng(7).normal(3.0, 10.0, n_samples)
    frequencies_hz, density = signal.periodogram(samples, 250, detrend=False)
    cuts_hz = (0, 0.5, 4, 8, 13.1, 30, 45, 125)
    parts = [float(band_power(frequencies_hz, density, low, high)) for low, high in pairwise(cuts_hz)]
    assert sum(parts) == pytest.approx(np.mean(samples**2), rel=1e-12)


@pytest.mark.parametrize("segment_s", [1, 2, 4])
@pytest.mark.parametrize("window", ["hann", "hamming", "blackman"])
def test_a_sine_has_half_its_squared_amplitude_whatever_the_window(segment_s: int, window: str) -> None:
    """Kind: closed form, A^2/2. Tolerance: leakage beyond the band, below 1e-4 of the power of these windows."""
    sine = 20 * np.sin(2 * np.pi * 10 * np.arange(60 * 250) / 250)
    frequencies_hz, density = signal.welch(sine, 250, window, segment_s * 250)
    # The band holds the whole main lobe: four bins on either side at 1 s.
    assert float(band_power(frequencies_hz, density, 5, 15)) == pytest.approx(200, rel=1e-4)


@pytest.mark.parametrize("entry", ["EEG-SEF-1-30", "EEG-SEF-0p5-47", "EEG-SEF-8-13"])
@pytest.mark.parametrize(("colour", "exponent"), [("white", 0), ("pink", 1), ("brown", 2)])
def test_edges_of_power_laws(entry: str, colour: str, exponent: int) -> None:
    """Kind: closed form. Tolerance: as published, 0.0002 Hz; the cells of 0.001 Hz leave about 1e-6 Hz."""
    reference = published("eeg", entry)
    low_hz, high_hz = reference.inputs["band_hz"]
    frequencies_hz = np.arange(50_001) / 1000
    density = np.zeros(frequencies_hz.size)
    density[1:] = frequencies_hz[1:] ** -float(exponent)
    reference.assert_close(median_frequency(frequencies_hz, density, low_hz, high_hz), f"{colour}_median")
    for percent in (90, 95):
        edge_hz = spectral_edge(frequencies_hz, density, low_hz, high_hz, percent / 100)
        reference.assert_close(edge_hz, f"{colour}_sef{percent}")


def test_band_power_of_a_power_law_by_quadrature() -> None:
    """Kind: another method (adaptive quadrature). Tolerance: curvature of 1/f within cells of 0.01 Hz, 1e-5."""
    frequencies_hz = np.arange(10_001) / 100
    density = np.zeros(frequencies_hz.size)
    density[1:] = 1 / frequencies_hz[1:]
    for low_hz, high_hz in ((0.5, 4), (4, 8), (8.003, 12.997), (13, 30), (30, 99)):
        expected, _ = integrate.quad(lambda f: 1 / f, low_hz, high_hz)
        found = float(band_power(frequencies_hz, density, low_hz, high_hz))
        assert found == pytest.approx(expected, rel=2e-4 if low_hz < 1 else 1e-5)


def test_relative_power_is_the_share_of_the_total() -> None:
    """Kind: definition. Tolerance: as stated, rounding."""
    reference = published("eeg", "EEG-RELPOWER")
    bands_hz = {"delta": (1.0, 4.0), "theta": (4.0, 8.0), "alpha": (8.0, 13.0), "beta": (13.0, 30.0)}
    frequencies_hz = np.arange(0, 128.25, 0.25)
    density = np.zeros((1, frequencies_hz.size))
    for name, power in reference.inputs["abs_power_uv2"].items():
        low_hz, high_hz = bands_hz[name]
        # One line well inside each band.
        density[0, frequencies_hz == (low_hz + high_hz) // 2] = power / 0.25
    found = {
        value.band: float(value.values[0])
        for value in eeg_features(frequencies_hz, density, bands_hz, (1.0, 30.0))
        if value.feature == "relative_band_power"
    }
    for name in bands_hz:
        reference.assert_close(found[name], "relative", name)


def test_both_middles_of_a_symmetric_spectrum_are_its_centre() -> None:
    """Kind: closed form. Tolerance: rounding; the edges fall within bins."""
    frequencies_hz = np.arange(0, 501.0)
    flat = np.ones(frequencies_hz.size)
    for low_hz, high_hz in ((20, 450), (20.3, 449.1)):
        centre_hz = (low_hz + high_hz) / 2
        assert float(median_frequency(frequencies_hz, flat, low_hz, high_hz)) == pytest.approx(centre_hz)
        assert float(mean_frequency(frequencies_hz, flat, low_hz, high_hz)) == pytest.approx(centre_hz)
