"""Promises of steps/mains.py: the level of a mains line, its true frequency, and which mains it is."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING

import numpy as np
import pytest

from bandcairn.errors import StepError
from bandcairn.signal import Run, Signal
from bandcairn.steps.quality import assess

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bandcairn.steps.mains import MainsHz

RATE_HZ = 512


def noise(length_s: int = 120, seed: int = 1, rate_hz: int = RATE_HZ) -> NDArray[np.float64]:
    """Return white noise of 10 uV."""
    return np.random.default_rng(seed).normal(0, 10, length_s * rate_hz)


def hum(amplitude_uv: float, frequency_hz: float, n: int, rate_hz: int = RATE_HZ) -> NDArray[np.float64]:
    """Return a sine."""
    return amplitude_uv * np.sin(2 * np.pi * frequency_hz * np.arange(n) / rate_hz + 0.4)


def signal_of(*rows: NDArray[np.float64], rate_hz: int = RATE_HZ) -> Signal:
    """Return a signal in one run."""
    channels = tuple(f"c{index}" for index in range(len(rows)))
    return Signal(np.stack(rows), Fraction(rate_hz), channels, (Run(0, rows[0].size, Fraction(0)),))


def test_c2_noise_without_mains_has_no_line_and_is_not_refused() -> None:
    """C2: chance makes no line, under either declaration, in two minutes, a minute and four seconds."""
    for seed in range(20):
        for length_s in (4, 30, 120):
            for declared in (50, 60):
                mains = assess(signal_of(noise(length_s, seed)), declared).channels[0].mains
                assert mains is not None
                assert mains.told_by is None
                assert mains.rms_uv == 0


@pytest.mark.parametrize(("declared", "found"), [(50, 60), (60, 50)])
def test_c2_a_line_of_the_other_mains_alone_is_refused(declared: MainsHz, found: int) -> None:
    """C2: declared 50, data 60: refused, with the frequency found, the channel and what to do; and the reverse."""
    rows = (noise(seed=2), noise(seed=3) + hum(5, found, 120 * RATE_HZ))
    told = rf"line at {found}\.0\d Hz in c1, \d+ dB above its neighbours, and none of {declared} Hz.*Correct mains_hz"
    if found == 50:
        told = told.replace(r"50\.0\d", r"(50\.0\d|49\.9\d)")
    with pytest.raises(StepError, match=told.replace(r"60\.0\d", r"(60\.0\d|59\.9\d)")):
        assess(signal_of(*rows), declared)


def test_c2_a_line_of_the_other_mains_is_accepted_where_the_study_says_so() -> None:
    """The reason stands in the study; the measures are those of the declared mains."""
    rows = noise() + hum(5, 60, 120 * RATE_HZ)
    mains = assess(signal_of(rows), 50, accept_other_mains=True).channels[0].mains
    assert mains is not None
    assert mains.told_by is None


def test_c2_both_lines_together_are_no_contradiction() -> None:
    """A screen at 60 Hz beside mains of 50 Hz refuses nothing, not even in another channel."""
    n = 120 * RATE_HZ
    assess(signal_of(noise() + hum(5, 60, n), noise(seed=2) + hum(3, 50, n)), 50)


def test_c2_harmonics_tell_the_mains_where_a_notch_took_the_line() -> None:
    """An amplifier that removes 60 Hz leaves 120 and 180 Hz: declared 50 is refused; 100 Hz speaks for 50."""
    n = 120 * RATE_HZ
    with pytest.raises(StepError, match=r"line at (120\.0\d|119\.9\d) Hz"):
        assess(signal_of(noise() + hum(5, 120, n) + hum(3, 180, n)), 50)
    assess(signal_of(noise() + hum(5, 60, n) + hum(3, 100, n)), 50)


def test_c2_a_harmonic_of_both_mains_decides_nothing() -> None:
    """300 Hz is the sixth of 50 and the fifth of 60."""
    n = 120 * 1000
    assess(signal_of(noise(rate_hz=1000) + hum(8, 300, n, 1000), rate_hz=1000), 50)


def test_a_regular_pulse_is_no_mains() -> None:
    """A paced heart of 180 a minute has a line every 3 Hz, one of them at 60: its neighbours are as high."""
    time_s = np.arange(120 * RATE_HZ) / RATE_HZ
    beats = 1000 * np.exp(-0.5 * (((time_s + 1 / 6) % (1 / 3) - 1 / 6) / 0.004) ** 2)
    assess(signal_of(beats + 0.1 * noise()), 50)


@pytest.mark.parametrize("frequency_hz", [49.8, 49.93, 50.0, 50.07, 50.21, 50.25, 50.4])
def test_true_frequency_is_found_between_the_bins(frequency_hz: float) -> None:
    """C2: within 0.02 Hz, at 14 dB below the noise."""
    found = assess(signal_of(noise() + hum(2.8, frequency_hz, 120 * RATE_HZ)), 50).channels[0]
    assert found.mains_frequency_hz == pytest.approx(frequency_hz, abs=0.02)


def test_no_line_can_be_sought_beyond_half_the_rate() -> None:
    """At 100 Hz nothing of 50 Hz is left to see, and nothing is made up."""
    mains = assess(signal_of(noise(rate_hz=100), rate_hz=100), 50).channels[0].mains
    assert mains is not None
    assert mains.fundamental is None


def test_a_flat_channel_has_no_line_and_speaks_for_none() -> None:
    """Rounding is no hum."""
    assert assess(signal_of(np.full(120 * RATE_HZ, 0.1), noise()), 50).channels[0].mains is None
