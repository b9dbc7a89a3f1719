"""Resampling against tones, constants and scipy."""

from __future__ import annotations

import math
from fractions import Fraction
from typing import TYPE_CHECKING

import numpy as np
import pytest
from scipy import signal as scipy_signal

from bandcairn.signal import Run, Signal
from bandcairn.steps.resample import anti_alias, resample
from reference import load

if TYPE_CHECKING:
    from numpy.typing import NDArray

ENTRIES = load("filters")
RATIOS = [(2000, 1000), (256, 128), (500, 200), (1000, 256), (360, 250), (2048, 200), (250, 249)]


def signal_of(samples: NDArray[np.float64], rate_hz: int) -> Signal:
    """Return one channel in one run."""
    return Signal(samples[np.newaxis], Fraction(rate_hz), ("c",), (Run(0, len(samples), Fraction(0)),))


def resampled_tone(frequency_hz: float, rate: int, target: int) -> NDArray[np.float64]:
    """Return a resampled sine of amplitude 1 and 20 s, without the first and last 2 s."""
    tone = np.sin(2 * np.pi * frequency_hz * np.arange(20 * rate) / rate)
    return resample(signal_of(tone, rate), Fraction(target)).samples[0, 2 * target : -2 * target]


@pytest.mark.parametrize("entry_id", [key for key in ENTRIES if key.startswith("RES-RATIO")])
def test_factors_and_lengths(entry_id: str) -> None:
    """Truth: arithmetic. Smallest whole factors, ceil(n up / down) samples."""
    entry = ENTRIES[entry_id]
    rate, target = entry.inputs["fs_in"], entry.inputs["fs_out"]
    design = anti_alias(Fraction(rate), Fraction(target))

    assert (design.up, design.down) == (entry.expected["up"], entry.expected["down"])
    lengths = [
        resample(signal_of(np.zeros(n), rate), Fraction(target)).samples.shape[1] for n in entry.inputs["N"]
    ]
    entry.assert_close(lengths, "n_out")


@pytest.mark.parametrize(("rate", "target"), RATIOS)
def test_tones_of_the_pass_band_keep_amplitude_and_time(rate: int, target: int) -> None:
    """Truth: closed form, the sine itself at the new times: gain within 0.01 dB, no delay (D1)."""
    for share in (0.0, 0.01, 0.2, 0.5, 0.8, 0.9):
        frequency_hz = share * target / 2
        found = resampled_tone(frequency_hz, rate, target)
        expected = np.sin(2 * np.pi * frequency_hz * (np.arange(len(found)) + 2 * target) / target)

        # 0.01 dB is 0.00115 of the amplitude; a delay of a hundredth of a sample at 0.9 Nyquist would be 0.028.
        np.testing.assert_allclose(found, expected, atol=10 ** (0.01 / 20) - 1)


@pytest.mark.parametrize(("rate", "target"), RATIOS)
def test_what_aliases_into_the_pass_band_is_below_80_db(rate: int, target: int) -> None:
    """Truth: definition (D1). Tones that fold into the pass-band leave less than 1e-4 of their amplitude."""
    stop_hz = 1.1 * target / 2
    for frequency_hz in np.linspace(stop_hz, rate / 2, 12, endpoint=False) if stop_hz < rate / 2 else ():
        assert np.abs(resampled_tone(frequency_hz, rate, target)).max() < 1e-4


@pytest.mark.parametrize("share", [1.01, 1.05, 1.09])
def test_what_folds_from_just_above_nyquist_lands_above_the_pass_band(share: float) -> None:
    """Truth: folding formula |f - fs round(f / fs)| (Oppenheim & Schafer 1999, section 4.2)."""
    frequency_hz = share * 64
    found = resampled_tone(frequency_hz, 256, 128)
    power = np.abs(np.fft.rfft(found * np.hanning(len(found))))
    peak_hz = np.argmax(power) * 128 / len(found)

    assert peak_hz == pytest.approx(abs(frequency_hz - 128 * round(frequency_hz / 128)), abs=0.1)
    assert peak_hz > 0.9 * 64


@pytest.mark.parametrize(("rate", "target"), [*RATIOS, (1000, 999), (1000, 1), (44_100, 44_000)])
def test_measured_response_is_the_sum_of_cosines(rate: int, target: int) -> None:
    """Truth: definition of the response, summed at frequencies other than those of the design's own grid."""
    design = anti_alias(Fraction(rate), Fraction(target))
    fast_hz = float(rate * design.up)
    passed = np.linspace(0, design.pass_hz, 97)
    stopped = np.linspace(design.stop_hz, fast_hz / 2, 99)
    step = 2 * np.pi / fast_hz
    middle = len(design.taps) // 2
    # The taps are symmetric: a real sum of cosines.
    lag = np.arange(1, middle + 1)
    right = design.taps[middle + 1 :]

    def gain(frequency_hz: float) -> float:
        total = design.taps[middle] + 2 * np.dot(right, np.cos(step * frequency_hz * lag))
        return abs(float(total)) / design.up

    ripple = max(abs(20 * math.log10(gain(frequency_hz))) for frequency_hz in passed)
    leak = max(gain(frequency_hz) for frequency_hz in stopped)
    # Both edges lie on both grids; a peak between points of the design's grid is at most 1 % higher.
    assert ripple <= 1.01 * design.ripple_db < 0.01
    assert -20 * math.log10(leak) >= design.attenuation_db - 0.1 > 80


@pytest.mark.parametrize(("up", "down"), [(1, 4), (2, 5), (25, 36)])
def test_constant_is_kept_to_the_edges(up: int, down: int) -> None:
    """Truth: closed form. A constant stays what it is at every sample, to rounding."""
    entry = ENTRIES["RES-DC"]
    assert [up, down] in entry.inputs["ratios"]
    value = entry.inputs["value"]

    resampled = resample(signal_of(np.full(5000, value), down), Fraction(up))

    np.testing.assert_allclose(resampled.samples, value, rtol=1e-12)


@pytest.mark.parametrize(("rate", "target"), RATIOS)
def test_noise_equals_scipy_with_the_same_taps(rate: int, target: int) -> None:
    """Truth: independent library, polyphase by another algorithm; far from the edges, where it pads zeros."""
    samples = np.random.default_rng(1).normal(size=60_007)
    design = anti_alias(Fraction(rate), Fraction(target))
    # It scales the taps by `up`, which ours already hold.
    expected = scipy_signal.resample_poly(samples, design.up, design.down, window=design.taps / design.up)  # type: ignore[call-overload] # its stubs know no taps

    found = resample(signal_of(samples, rate), Fraction(target)).samples[0]

    # Sums of about a hundred products of order 1.
    assert len(found) == len(expected)
    np.testing.assert_allclose(found[300:-300], expected[300:-300], atol=1e-13)


def test_band_limited_noise_equals_scipy_with_its_own_taps() -> None:
    """Truth: independent library and design. Within both pass-bands only the designs' ripples differ."""
    spectrum = np.zeros(30_001, np.complex128)
    rng = np.random.default_rng(2)
    spectrum[1:6000] = rng.normal(size=5999) + 1j * rng.normal(size=5999)
    samples = np.fft.irfft(spectrum, 60_000)
    samples /= samples.std()
    taps = scipy_signal.firwin(401, 0.5, window=("kaiser", 12.0))

    found = resample(signal_of(samples, 500), Fraction(250)).samples[0]

    expected = scipy_signal.resample_poly(samples, 1, 2, window=taps)  # type: ignore[call-overload] # as above
    # 6e-5 is our measured ripple; content ends at 0.4 of the new Nyquist.
    np.testing.assert_allclose(found[300:-300], expected[300:-300], atol=5 * 6e-5)
