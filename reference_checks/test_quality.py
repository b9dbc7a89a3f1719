"""Quality of acquisition against closed forms, planted lines and other libraries."""

from __future__ import annotations

import math
from fractions import Fraction
from itertools import groupby
from typing import TYPE_CHECKING

import numpy as np
import pytest
from scipy import ndimage, stats
from scipy import signal as scipy_signal

from bandcairn.signal import Run, Signal
from bandcairn.steps.clipping import find_rests, flat
from bandcairn.steps.mains import find_line
from bandcairn.steps.quality import ChannelQuality, assess
from bandcairn.steps.quantisation import margin_db, noise_density, rmssd_floor_ms
from bandcairn.steps.recorder import loss_db, read_prefilter
from bandcairn.steps.spectrum import Spectrum
from reference import published

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bandcairn.steps.quality import Quality

RATE_HZ = 1000
LENGTH_S = 600
# Bins of half a hertz within 1.5 Hz of a line.
LINE_WIDTH_HZ = 3.5


def white(sd_uv: float, seed: int, rate_hz: int = RATE_HZ, length_s: int = LENGTH_S) -> NDArray[np.float64]:
    """Return white noise, whose one-sided density is 2 sd^2 / rate."""
    return np.random.default_rng(seed).normal(0, sd_uv, rate_hz * length_s)


def sine(amplitude_uv: float, frequency_hz: float, rate_hz: int = RATE_HZ) -> NDArray[np.float64]:
    """Return a sine as long as the noise."""
    return amplitude_uv * np.sin(2 * np.pi * frequency_hz * np.arange(rate_hz * LENGTH_S) / rate_hz + 1)


def measured(samples: NDArray[np.float64], rate_hz: int = RATE_HZ) -> Quality:
    """Assess one channel."""
    return assess(
        Signal(samples[None].copy(), Fraction(rate_hz), ("c",), (Run(0, samples.size, Fraction(0)),)), 50
    )


def channel(samples: NDArray[np.float64], rate_hz: int = RATE_HZ) -> ChannelQuality:
    """Return what is measured of one channel."""
    return measured(samples, rate_hz).channels[0]


def spectrum_of(quality: Quality) -> Spectrum:
    """Return the density of the only channel."""
    assert quality.spectrum is not None
    return Spectrum(quality.spectrum.frequencies_hz, quality.spectrum.density[0])


def test_quantisation_noise_over_all_frequencies_is_the_published_variance() -> None:
    """Kind: published, LSB/sqrt 12. Tolerance: printed digits."""
    over_all_uv = math.sqrt(noise_density(1.0, RATE_HZ) * RATE_HZ / 2)
    published("quality", "SMP-QUANT").assert_close(over_all_uv, "noise_sd_lsb")


def test_p12_a_range_of_262_mv_in_16_bits_leaves_a_hundredth_of_uv2_per_hz() -> None:
    """P12. Kind: closed form, LSB^2/(6 fs): 8 uV at 1000 Hz give 0.0107 uV^2/Hz. Tolerance: two printed digits."""
    assert noise_density(8, 1000) == pytest.approx(0.011, abs=5e-4)


def test_rounding_leaves_noise_of_that_density() -> None:
    """Kind: library, density of what rounding has changed, by scipy.

    Tolerance: 1 %, three standard errors of a mean over 500 bins of 600 segments.
    """
    samples = white(30, seed=1)
    error = np.round(samples / 8) * 8 - samples
    _, density = scipy_signal.welch(error, RATE_HZ, "hann", RATE_HZ, 0)
    assert float(np.mean(density[2:-2])) == pytest.approx(noise_density(8, RATE_HZ), rel=0.01)


@pytest.mark.parametrize(("sd_uv", "step_uv"), [(10.0, 0.1), (10.0, 8.0), (4.0, 5.0)])
def test_c5_margin_of_white_noise(sd_uv: float, step_uv: float) -> None:
    """C5. Kind: closed form, 12 sd^2/step^2, and 1 more for the noise of rounding itself.

    Tolerance: 0.3 dB, four standard errors of 60 bins of 60 segments.
    """
    samples = np.round(white(sd_uv, seed=2) / step_uv) * step_uv
    found = margin_db(spectrum_of(measured(samples)), 30, 60, step_uv, RATE_HZ)
    assert found == pytest.approx(10 * math.log10(12 * sd_uv**2 / step_uv**2 + 1), abs=0.3)
    assert found is not None
    assert (found < 10) == (sd_uv == 4)


@pytest.mark.parametrize(("amplitude_uv", "sd_uv"), [(0.5, 10.0), (2.0, 10.0), (20.0, 10.0), (100.0, 1.0)])
def test_c2_level_of_a_sine_in_white_noise(amplitude_uv: float, sd_uv: float) -> None:
    """C2. Kind: closed form: A^2/2 over what the noise gives within the seven bins of the line, and 1 for the noise.

    Tolerance: 0.5 dB, three standard errors of seven bins and of the median of 18 neighbours, 60 segments each.
    """
    mains = channel(white(sd_uv, seed=3) + sine(amplitude_uv, 50)).mains
    assert mains is not None
    assert mains.fundamental is not None
    floor = 2 * sd_uv**2 / RATE_HZ * LINE_WIDTH_HZ
    assert mains.fundamental.level_db == pytest.approx(
        10 * math.log10(amplitude_uv**2 / 2 / floor + 1), abs=0.5
    )


def test_c2_root_mean_square_of_fundamental_and_harmonics() -> None:
    """C2. Kind: closed form, root of the sum of A^2/2. Tolerance: 1 %, the noise within the lines."""
    mains = channel(white(5, seed=4) + sine(20, 49.97) + sine(6, 149.91) + sine(3, 249.85)).mains
    assert mains is not None
    assert mains.rms_uv == pytest.approx(math.sqrt((20**2 + 6**2 + 3**2) / 2), rel=0.01)


@pytest.mark.parametrize("rate_hz", [256, 500, 2000])
@pytest.mark.parametrize("frequency_hz", [49.5, 49.87, 50.02, 50.13, 50.25, 50.38])
def test_c2_true_frequency(frequency_hz: float, rate_hz: int) -> None:
    """C2. Kind: closed form, the planted frequency. Tolerance: the 0.02 Hz that are promised."""
    found = channel(white(10, 5, rate_hz) + sine(4, frequency_hz, rate_hz), rate_hz)
    assert found.mains_frequency_hz == pytest.approx(frequency_hz, abs=0.02)


def test_c2_true_frequency_of_a_loud_line_is_exact() -> None:
    """C2. Kind: closed form, phase gained in 2 s. Tolerance: 1e-6 Hz, the line's image at negative frequency."""
    for frequency_hz in (49.6, 50.1, 50.24, 50.7):
        found = channel(white(1e-3, seed=6) + sine(10, frequency_hz)).mains_frequency_hz
        assert found == pytest.approx(frequency_hz, abs=1e-6)


@pytest.mark.parametrize("n_averaged", [1, 2, 5, 20, 60])
def test_floor_by_the_median_is_the_mean(n_averaged: int) -> None:
    """Kind: library, median of a gamma variable by scipy. Tolerance: 1.5 % for one segment, 0.5 % for more.

    Neighbours at the median of averaged noise of mean 1: the line of mean 1 then lies at 0 dB.
    """
    median = float(stats.gamma.median(n_averaged, scale=1 / n_averaged))
    frequencies_hz = np.arange(0, 128.25, 0.5)
    density = np.full(frequencies_hz.size, median)
    density[97:104] = 1.0
    density[100] += 1e-9
    line = find_line(Spectrum(frequencies_hz, density), 50, n_averaged)
    assert line is not None
    assert 10 ** (line.level_db / 10) == pytest.approx(1, rel=0.015 if n_averaged == 1 else 0.005)


def test_c1_rests_are_those_of_two_other_ways() -> None:
    """C1. Kind: library, labels of scipy, and definition, groups of equal neighbours. Tolerance: exact."""
    samples = np.repeat(
        np.random.default_rng(7).normal(0, 20, 3000), np.random.default_rng(8).integers(1, 9, 3000)
    )
    rests = find_rests(samples, [0])
    labels, _ = ndimage.label(np.diff(samples) == 0)
    slices = [found[0] for found in ndimage.find_objects(labels)]
    assert rests.stretches.first.tolist() == [one.start for one in slices]
    assert rests.stretches.stop.tolist() == [one.stop + 1 for one in slices]
    lengths = [sum(1 for _ in group) for _, group in groupby(samples)]
    assert rests.stretches.n_samples.tolist() == [length for length in lengths if length > 1]
    assert flat(rests, 6).n_samples.tolist() == [length for length in lengths if length >= 6]


def test_p11_time_constants() -> None:
    """P11. Kind: published, 1/(2 pi tau). Tolerance: printed digits."""
    entry = published("quality", "SMP-TIMECONST")
    entry.assert_close([read_prefilter(f"TC:{tau:g}s").highpass_hz for tau in entry.inputs["tau_s"]])


def test_c3_loss_of_a_band_to_a_low_pass() -> None:
    """C3. Kind: closed form, the integral of 1/(1 + (f/fc)^2) is fc atan(f/fc). Tolerance: rel 1e-6, trapezoids."""
    passed = 70 * (math.atan(95 / 70) - math.atan(55 / 70)) / 40
    assert loss_db(55, 95, None, 70) == pytest.approx(-10 * math.log10(passed), rel=1e-6)


def test_c3_loss_of_a_band_to_a_high_pass() -> None:
    """C3. Kind: closed form, the integral of f^2/(f^2 + fc^2) is f - fc atan(f/fc). Tolerance: rel 1e-6, trapezoids."""
    passed = (4 - 1.6 * math.atan(4 / 1.6) - (0.5 - 1.6 * math.atan(0.5 / 1.6))) / 3.5
    assert loss_db(0.5, 4, 1.6, None) == pytest.approx(-10 * math.log10(passed), rel=1e-6)


def test_c3_loss_is_that_of_a_first_order_filter() -> None:
    """C3. Kind: library, power of white noise behind an analogue filter by scipy. Tolerance: rel 1e-6, trapezoids."""
    frequency_hz = np.linspace(55, 95, 2001)
    _, response = scipy_signal.freqs(
        *scipy_signal.butter(1, 2 * np.pi * 70, analog=True), 2 * np.pi * frequency_hz
    )
    passed = np.trapezoid(np.abs(response) ** 2, frequency_hz) / 40
    assert loss_db(55, 95, None, 70) == pytest.approx(-10 * math.log10(passed), rel=1e-6)


@pytest.mark.parametrize("rate_hz", [100, 128, 250])
def test_h6_times_rounded_to_samples_add_the_stated_floor_to_rmssd(rate_hz: int) -> None:
    """H6. Kind: simulation of 200000 beats, whose times are rounded; floor in quadrature, 1/(2 rate^2).

    Tolerance: 1 %, three standard errors. At 128 Hz 7.07 ms become 9.0 ms.
    """
    intervals_s = np.random.default_rng(9).normal(0.85, 0.005, 200_000)
    times_s = np.cumsum(intervals_s)
    rounded_s = np.round(times_s * rate_hz) / rate_hz
    true_ms, found_ms = (
        1000 * math.sqrt(float(np.mean(np.diff(times, 2) ** 2))) for times in (times_s, rounded_s)
    )
    assert math.sqrt(found_ms**2 - true_ms**2) == pytest.approx(rmssd_floor_ms(rate_hz), rel=0.01)
    assert true_ms == pytest.approx(7.07, rel=0.01)
    if rate_hz == 128:
        assert found_ms == pytest.approx(9.0, abs=0.1)
