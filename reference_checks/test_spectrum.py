"""Power densities against published windows, closed forms, scipy and mne."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Any

import mne
import numpy as np
import pytest
from scipy import signal as scipy_signal

from bandcairn.steps.spectrum import power_density, segment_count, window
from reference import load, published

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bandcairn.steps.spectrum import Detrend, Window

ENTRIES = load("windows_spectra")
WINDOWS: tuple[Window, ...] = ("hann", "hamming", "blackman", "boxcar")


def autocorrelation(weights: NDArray[np.float64], overlap: float) -> float:
    """Return the correlation of two windows that overlap by a share, in percent."""
    step = round(len(weights) * (1 - overlap))
    return float(100 * np.dot(weights[step:], weights[: len(weights) - step]) / np.dot(weights, weights))


def gain_db(weights: NDArray[np.float64], bins: NDArray[np.float64] | float) -> NDArray[np.float64]:
    """Return the gain of a window at a distance from its centre, in dB of its peak."""
    turns = np.exp(-2j * np.pi * np.multiply.outer(bins, np.arange(len(weights))) / len(weights))
    return np.asarray(20 * np.log10(np.abs(turns @ weights) / weights.sum()))


@pytest.mark.parametrize(
    ("name", "entry_id"),
    [
        ("boxcar", "WIN-HARRIS-rectangular"),
        ("hann", "WIN-HARRIS-hann"),
        ("blackman", "WIN-HARRIS-blackman"),
    ],
)
def test_windows_have_the_published_figures_of_merit(name: Window, entry_id: str) -> None:
    """Truth: published table (Harris 1978, Table I), evaluated on 1024 samples."""
    entry = ENTRIES[entry_id]
    weights = window(name, 1024)
    enbw = len(weights) * np.dot(weights, weights) / weights.sum() ** 2
    scalloping_db = -float(gain_db(weights, 0.5))

    entry.assert_close(weights.mean(), "coherent_gain")
    entry.assert_close(enbw, "enbw_bins")
    entry.assert_close(scalloping_db, "scalloping_db")
    entry.assert_close(scalloping_db + 10 * math.log10(enbw), "worst_case_loss_db")
    entry.assert_close(autocorrelation(weights, 0.75), "overlap_corr_75_pct")
    entry.assert_close(autocorrelation(weights, 0.5), "overlap_corr_50_pct")
    for drop_db in (3, 6):
        # Half widths: the main lobe falls monotonically over the first 1.5 bins.
        bins = np.linspace(0, 1.5, 1501)
        half = float(bins[np.argmax(gain_db(weights, bins) < -drop_db)])
        entry.assert_close(2 * half, f"bw{drop_db}db_bins")


def test_hann_has_the_figures_of_the_newer_table() -> None:
    """Truth: published table (Heinzel et al. 2002), one digit more."""
    entry = published("windows_spectra", "WIN-HEINZEL-hann")
    weights = window("hann", 4096)

    entry.assert_close(4096 * np.dot(weights, weights) / weights.sum() ** 2, "nenbw_bins")
    entry.assert_close(-float(gain_db(weights, 0.5)), "max_abs_amplitude_error_db")


@pytest.mark.parametrize("name", ["hann", "hamming", "blackman"])
def test_noise_bandwidth_has_a_closed_form(name: Window) -> None:
    """Truth: closed form of the equivalent noise bandwidth; exact at any length beyond twice the cosines."""
    entry = published("windows_spectra", "WIN-ENBW-CLOSED")
    for n in (8, 255, 1000):
        weights = window(name, n)
        entry.assert_close(n * np.dot(weights, weights) / weights.sum() ** 2, name)


@pytest.mark.parametrize("name", WINDOWS)
@pytest.mark.parametrize("n", [2, 7, 256, 999])
def test_windows_equal_scipy(name: Window, n: int) -> None:
    """Truth: independent library, in its periodic form; 1e-15 is rounding of a sum of three."""
    np.testing.assert_allclose(window(name, n), scipy_signal.get_window(name, n), atol=1e-15)


def test_number_of_segments_and_bin_width() -> None:
    """Truth: definition (Welch 1967)."""
    entry = published("windows_spectra", "SPEC-NSEG")
    counts, widths_hz = [], []
    for n, segment, shared, rate_hz in entry.inputs["cases"]:
        counts.append(segment_count(n, segment, segment - shared))
        spectrum = power_density(
            np.zeros(n), rate_hz, method="welch", window="hann", segment_s=segment / rate_hz, overlap=0.5
        )
        widths_hz.append(spectrum.frequencies_hz[1])

    entry.assert_close(counts, "segments")
    entry.assert_close(widths_hz, "df_hz")


@pytest.mark.parametrize(
    ("entry_id", "detrend"), [("SPEC-HANDDFT", "none"), ("SPEC-HANDDFT-MEAN", "constant")]
)
def test_four_samples_by_hand(entry_id: str, detrend: Detrend) -> None:
    """Truth: computed by hand. Frequency 0 and Nyquist are not doubled; the sum is the power."""
    entry = ENTRIES[entry_id]
    spectrum = power_density(
        np.array([1.0, 2.0, 3.0, 4.0]), 4, method="periodogram", window="boxcar", detrend=detrend
    )

    entry.assert_close(spectrum.density, "psd")
    entry.assert_close(spectrum.density.sum() * spectrum.frequencies_hz[1], "sum_psd_df")


def lehmer(n: int) -> NDArray[np.float64]:
    """Return the first n values of the generator of Park and Miller (1988) after its seed 1, in 0 .. 1."""
    inputs = published("windows_spectra", "GEN-LEHMER").inputs
    state, values = inputs["seed"], np.empty(n)
    for index in range(n):
        state = inputs["a"] * state % inputs["m"]
        values[index] = state / inputs["m"]
    return values


def test_generator_gives_the_published_numbers() -> None:
    """Truth: published check (Park & Miller 1988); the next test rests on it."""
    entry = published("windows_spectra", "GEN-LEHMER")
    values = lehmer(10_000)

    entry.assert_close(values[:5] * entry.inputs["m"], "first5")
    entry.assert_close(values.mean(), "mean_u")
    entry.assert_close(values.var(), "var_u")


def test_densities_add_up_to_the_mean_square() -> None:
    """Truth: Parseval's relation on published pseudo-random numbers."""
    entry = published("windows_spectra", "SPEC-PARSEVAL")
    samples = (lehmer(1000) - 0.5) * math.sqrt(12)
    spectrum = power_density(samples, 250, method="periodogram", window="boxcar", detrend="none")

    entry.assert_close(spectrum.density.sum() * 0.25)


@pytest.mark.parametrize("name", WINDOWS)
@pytest.mark.parametrize("n", [255, 256])
def test_parseval_holds_for_every_window_and_length(name: Window, n: int) -> None:
    """Truth: closed form. The integral is the window-weighted mean square, odd length or even."""
    samples = np.random.default_rng(1).normal(size=n)
    weights = window(name, n)
    spectrum = power_density(samples, 100, method="periodogram", window=name, detrend="none")

    expected = np.sum((weights * samples) ** 2) / np.sum(weights**2)
    # Rounding of 256 terms.
    assert spectrum.density.sum() * spectrum.frequencies_hz[1] == pytest.approx(expected, rel=1e-12)


def test_white_noise_has_the_expected_level() -> None:
    """Truth: closed form 2 sigma^2 / fs. The mean over all bins of 1e6 samples varies by 0.14 % (1 sd)."""
    entry = published("windows_spectra", "SPEC-WHITE-LEVEL")
    rng = np.random.default_rng(1)
    for case, level in zip(entry.inputs["cases"], entry.expected, strict=True):
        samples = case["sigma"] * rng.normal(size=1_000_000)
        spectrum = power_density(
            samples, case["fs_hz"], method="welch", window="hann", segment_s=2, overlap=0.5, detrend="none"
        )

        # Four standard deviations.
        assert spectrum.density[1:-1].mean() == pytest.approx(level, rel=0.006)


@pytest.mark.parametrize("entry_id", [key for key in ENTRIES if key.startswith("SPEC-SINEPOWER")])
def test_power_of_a_sine_around_its_frequency(entry_id: str) -> None:
    """Truth: closed form A^2/2 within 3 Hz."""
    entry = ENTRIES[entry_id]
    inputs = entry.inputs
    angle = 2 * np.pi * inputs["f_hz"] * np.arange(inputs["N"]) / inputs["fs_hz"]
    spectrum = power_density(
        inputs["A"] * np.sin(angle), inputs["fs_hz"], method="periodogram", window=inputs["window"]
    )

    near = np.abs(spectrum.frequencies_hz - inputs["f_hz"]) <= 3
    entry.assert_close(spectrum.density[near].sum() * spectrum.frequencies_hz[1], "band_power")


@pytest.mark.parametrize("name", WINDOWS)
@pytest.mark.parametrize("segment_s", [1, 2, 4])
def test_sine_has_half_its_squared_amplitude_whatever_the_window(name: Window, segment_s: float) -> None:
    """Truth: closed form A^2/2 (P26): 20 uV of 10 Hz are 200 uV^2, though the peak of the density changes."""
    samples = 20 * np.sin(2 * np.pi * 10 * np.arange(60 * 256) / 256)
    spectrum = power_density(samples, 256, method="welch", window=name, segment_s=segment_s, overlap=0.5)

    assert spectrum.density.sum() * spectrum.frequencies_hz[1] == pytest.approx(200, rel=1e-10)


def test_peak_density_of_a_sine_doubles_with_the_segment() -> None:
    """Truth: closed form A^2/2 / (ENBW df): 133, 267, 533 for 1, 2 and 4 s of Hann's window (P26)."""
    samples = 20 * np.sin(2 * np.pi * 10 * np.arange(60 * 256) / 256)
    for segment_s in (1, 2, 4):
        spectrum = power_density(
            samples, 256, method="welch", window="hann", segment_s=segment_s, overlap=0.5
        )

        assert spectrum.density.max() == pytest.approx(200 / 1.5 * segment_s, rel=1e-10)


@pytest.mark.parametrize("name", WINDOWS)
@pytest.mark.parametrize("detrend", ["none", "constant", "linear"])
@pytest.mark.parametrize(("segment", "shared"), [(256, 128), (255, 64), (1000, 750)])
def test_welch_equals_scipy(name: Window, detrend: Detrend, segment: int, shared: int) -> None:
    """Truth: independent library on the same noise, offset and drift; 1e-12 of the largest density."""
    rng = np.random.default_rng(2)
    samples = rng.normal(size=(3, 5000)) + 5 + np.linspace(0, 3, 5000)
    other: Any = False if detrend == "none" else detrend
    frequencies_hz, expected = scipy_signal.welch(
        samples, 250.0, window=name, nperseg=segment, noverlap=shared, detrend=other
    )

    found = power_density(
        samples,
        250.0,
        method="welch",
        window=name,
        segment_s=segment / 250,
        overlap=shared / segment,
        detrend=detrend,
    )

    np.testing.assert_allclose(found.frequencies_hz, frequencies_hz, rtol=1e-14)
    # Its line is fitted by least squares on another basis, which costs a few digits at frequency 0.
    np.testing.assert_allclose(found.density, expected, rtol=1e-12, atol=1e-12 * expected.max())


@pytest.mark.parametrize("n", [511, 512])
def test_periodogram_equals_scipy(n: int) -> None:
    """Truth: independent library on the same noise, even length and odd."""
    samples = np.random.default_rng(3).normal(size=(4, 7, n))
    _, expected = scipy_signal.periodogram(samples, 128.0, window="hann")

    found = power_density(samples, 128.0, method="periodogram", window="hann")

    # Behind a removed mean frequency 0 holds little but rounding and leakage: judged by the largest density.
    np.testing.assert_allclose(found.density, expected, rtol=1e-12, atol=1e-12 * expected.max())


def test_welch_equals_mne() -> None:
    """Truth: independent library. It takes the mean off each segment as well."""
    samples = np.random.default_rng(4).normal(size=(2, 5000))
    expected, frequencies_hz = mne.time_frequency.psd_array_welch(
        samples,
        250.0,
        fmin=0,
        fmax=125,
        n_fft=500,
        n_per_seg=500,
        n_overlap=250,
        window="hann",
        verbose="error",
    )

    found = power_density(samples, 250.0, method="welch", window="hann", segment_s=2, overlap=0.5)

    np.testing.assert_allclose(found.frequencies_hz, frequencies_hz, rtol=1e-14)
    np.testing.assert_allclose(found.density, expected, rtol=1e-12)
