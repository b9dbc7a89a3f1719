"""Promises of steps/quality.py and of what it is made of: clipping, amplitude, gaps, copies."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bandcairn.demo import brain, heart, muscle
from bandcairn.errors import StepError
from bandcairn.signal import Run, Signal
from bandcairn.steps.quality import ChannelQuality, assess

if TYPE_CHECKING:
    from numpy.typing import NDArray

RATE_HZ = 250
LEVEL_UV = 400.0


def signal_of(rows: NDArray[np.float64], rate_hz: Fraction | int = RATE_HZ, *, gap_at: int = 0) -> Signal:
    """Return a signal of channels c0, c1, …; with half a second missing before sample `gap_at`."""
    rows = np.atleast_2d(rows)
    runs: tuple[Run, ...] = (Run(0, rows.shape[1], Fraction(0)),)
    if gap_at:
        after_s = Fraction(gap_at) / rate_hz + Fraction(1, 2)
        runs = (Run(0, gap_at, Fraction(0)), Run(gap_at, rows.shape[1], after_s))
    return Signal(rows.copy(), Fraction(rate_hz), tuple(f"c{index}" for index in range(len(rows))), runs)


def quality_of(
    row: NDArray[np.float64],
    rate_hz: Fraction | int = RATE_HZ,
    range_uv: tuple[float, float] | None = None,
    *,
    gap_at: int = 0,
) -> ChannelQuality:
    """Return what is measured of one channel."""
    return assess(signal_of(row, rate_hz, gap_at=gap_at), 50, range_uv).channels[0]


def noise(n: int = 10_000, seed: int = 1) -> NDArray[np.float64]:
    """Return reproducible white noise of 20 uV, recorded in steps of 0.1 uV."""
    return np.round(np.random.default_rng(seed).normal(0, 20, n), 1)


def test_clean_noise_is_neither_clipped_nor_flat() -> None:
    """A clean channel passes with nothing to report."""
    quality = quality_of(noise())
    assert quality.clipped_share == 0
    assert quality.flat_share == 0


def test_a_clean_sine_passes_its_tops_within_a_few_samples() -> None:
    """A well sampled rounded top is not called clipped: 100 uV at 10 Hz, steps of 0.1 uV."""
    sine = np.round(100 * np.sin(2 * np.pi * 10 * np.arange(10_000) / 1000.3), 1)
    assert quality_of(sine, Fraction("1000.3")).clipped_share < 0.01


def test_planted_clipping_is_found_to_the_sample() -> None:
    """C1: a stretch of 2 s at the ceiling is reported with its exact place, share and length."""
    samples = noise()
    samples[1000:1500] = 200
    quality = quality_of(samples)
    assert (quality.clipped.first.tolist(), quality.clipped.stop.tolist()) == ([1000], [1500])
    assert quality.clipped_share == pytest.approx(500 / 10_000, abs=0)
    assert quality.clipped_longest_s == 2


@st.composite
def planted(draw: st.DrawFn) -> tuple[list[tuple[int, int, str]], int]:
    """Return stretches that do not touch, each clipped high, clipped low or flat, and a seed."""
    kinds = st.sampled_from(["high", "low", "flat"])
    place, found = 0, []
    for _ in range(draw(st.integers(1, 12))):
        kind = draw(kinds)
        place += draw(st.integers(2, 400))
        length = draw(st.integers(RATE_HZ if kind == "flat" else 3, 600))
        found.append((place, place + length, kind))
        place += length
    return found, draw(st.integers(0, 2**31))


@settings(deadline=None, max_examples=60)
@given(faults=planted())
def test_c1_every_planted_fault_is_found_to_the_sample_and_nothing_else(
    faults: tuple[list[tuple[int, int, str]], int],
) -> None:
    """C1: whatever is planted in white noise is found where it lies, none missed and none invented."""
    stretches, seed = faults
    samples = np.random.default_rng(seed).normal(0, 20, stretches[-1][1] + 500)
    levels = {"high": LEVEL_UV, "low": -LEVEL_UV, "flat": 1.5}
    for first, stop, kind in stretches:
        samples[first:stop] = levels[kind]
    quality = quality_of(samples)
    clipped = [(first, stop) for first, stop, kind in stretches if kind != "flat"]
    flat = [(first, stop) for first, stop, _ in stretches if stop - first >= RATE_HZ]
    assert list(zip(quality.clipped.first, quality.clipped.stop, strict=True)) == clipped
    assert list(zip(quality.flat.first, quality.flat.stop, strict=True)) == flat


def test_a_signal_clipped_on_both_sides_counts_both() -> None:
    """A sine cut at half its amplitude rests two thirds of its time at either limit."""
    sine = 100 * np.sin(2 * np.pi * np.arange(10_000) / 250)
    assert quality_of(np.clip(sine, -50, 50)).clipped_share == pytest.approx(2 / 3, abs=0.01)


def test_rests_at_the_recorders_limits_count_even_below_the_largest_sample() -> None:
    """A limit in microvolt is met by samples that scaling put a rounding error beside it."""
    samples = noise()
    samples[1000:1100] = 200.0
    samples[2000:2050] = np.nextafter(200.0, 0)
    quality = quality_of(samples, range_uv=(-200.0, 200.0))
    assert quality.clipped_share == pytest.approx(150 / 10_000, abs=0)


def test_two_equal_samples_at_the_extreme_are_no_clipping() -> None:
    """It takes three samples to rest."""
    samples = noise()
    samples[500:502] = 300
    assert quality_of(samples).clipped_share == 0


def test_a_constant_channel_is_flat_and_not_clipped() -> None:
    """A dead channel is one fault, not two: it has no typical amplitude, no step and no line either."""
    quality = quality_of(np.full(5000, 7.0), range_uv=(-200.0, 200.0))
    assert (quality.flat_share, quality.flat_longest_s) == (1, 20)
    assert quality.clipped_share == 0
    assert quality.peak_to_peak_uv == 0
    assert (quality.typical_rms_uv, quality.smallest_step_uv, quality.mains) == (None, None, None)


def test_only_stretches_of_a_second_are_flat() -> None:
    """A second without change counts, a sample less does not."""
    samples = noise()
    samples[1000:1250] = 0.05
    samples[3000:3249] = 0.05
    quality = quality_of(samples)
    assert quality.flat_share == pytest.approx(250 / 10_000, abs=0)
    assert quality.flat_longest_s == 1


def test_a_rest_ends_at_a_gap() -> None:
    """Equal samples before and after a gap are two stretches: what lay between them is not known."""
    samples = noise()
    samples[900:1100] = 200
    quality = quality_of(samples, gap_at=1000)
    assert list(zip(quality.clipped.first, quality.clipped.stop, strict=True)) == [(900, 1000), (1000, 1100)]


def test_gaps_are_counted_and_measured_in_true_time() -> None:
    """Half a second missing in 40.5 s."""
    gaps = assess(signal_of(noise(), gap_at=4000), 50).gaps
    assert (gaps.count, gaps.longest_s) == (1, 0.5)
    assert gaps.missing_share == pytest.approx(0.5 / 40.5, rel=1e-12)
    whole = assess(signal_of(noise()), 50).gaps
    assert (whole.count, whole.longest_s, whole.missing_share) == (0, 0, 0)


def test_amplitudes_are_those_of_a_sine_on_an_offset() -> None:
    """A sine of 100 uV on 5 mV: 200 uV peak to peak, 100/sqrt 2 about its mean, in windows and over all."""
    quality = quality_of(5000 + 100 * np.sin(2 * np.pi * np.arange(10_001) / 20))
    assert quality.peak_to_peak_uv == pytest.approx(200)
    assert quality.rms_uv == pytest.approx(100 / np.sqrt(2), rel=1e-3)
    assert quality.typical_rms_uv == pytest.approx(100 / np.sqrt(2))
    assert quality.typical_peak_to_peak_uv == pytest.approx(200)


def test_overall_amplitude_is_that_of_numpy_whatever_the_windows() -> None:
    """The windows' sums are put together without loss, across a gap and with a rest that fills no window."""
    samples = np.cumsum(noise(9_123))
    quality = quality_of(samples, gap_at=4321)
    assert quality.rms_uv == pytest.approx(np.std(samples), rel=1e-12)
    assert quality.peak_to_peak_uv == np.ptp(samples)


def test_p1_drift_and_rare_artefacts_leave_the_typical_amplitude_alone() -> None:
    """P1: a unit is judged by what is typical: 20 uV of noise on a drift of 50 mV with a jolt of 100 mV."""
    samples = noise() + np.linspace(0, 50_000, 10_000)
    samples[6000:6050] += 100_000
    quality = quality_of(samples)
    assert quality.rms_uv > 10_000
    # The drift within two seconds is 2.5 mV, evenly spread.
    assert quality.typical_rms_uv == pytest.approx(np.hypot(20, 2500 / np.sqrt(12)), rel=0.02)


def test_the_smallest_step_is_the_one_that_is_seen() -> None:
    """P12: a converter of 12 bits stored in 16 counts in steps of its own."""
    assert quality_of(np.round(noise() / 1.6) * 1.6).smallest_step_uv == pytest.approx(1.6)


def test_channels_are_judged_one_by_one() -> None:
    """The fault of one channel is not another's."""
    first, second = assess(signal_of(np.stack([noise(), np.zeros(10_000)])), 50).channels
    assert (first.flat_share, second.flat_share) == (0, 1)


def test_channels_with_the_same_samples_are_told_and_dead_ones_are_not() -> None:
    """A copied channel names its twin; two dead channels are flat, which says enough."""
    rows = np.stack([noise(), noise(seed=2), noise(), np.zeros(10_000), np.zeros(10_000)])
    channels = assess(signal_of(rows), 50).channels
    assert [one.identical for one in channels] == [(2,), (), (0,), (), ()]


def test_channels_that_part_late_are_not_the_same() -> None:
    """The first samples alone decide nothing."""
    rows = np.stack([noise(), noise()])
    rows[1, -1] += 0.1
    assert [one.identical for one in assess(signal_of(rows), 50).channels] == [(), ()]


def test_a_recording_shorter_than_two_seconds_has_no_spectrum() -> None:
    """What needs no spectrum is measured all the same."""
    quality = assess(signal_of(noise(400)), 50)
    assert quality.spectrum is None
    assert quality.channels[0].mains is None
    assert quality.channels[0].rms_uv > 0


def test_a_recording_without_samples_is_refused() -> None:
    """Nothing can be said of nothing."""
    with pytest.raises(StepError, match="without samples"):
        assess(signal_of(np.empty((1, 0))), 50)


def test_nothing_measured_depends_on_a_limit_and_no_input_is_modified() -> None:
    """The samples stay as they were."""
    signal = signal_of(np.stack([noise(), noise(seed=2)]))
    before = signal.samples.copy()
    assess(signal, 50)
    np.testing.assert_array_equal(signal.samples, before)


@pytest.mark.parametrize("seed", range(12))
def test_clean_signals_of_every_kind_are_not_flagged(seed: int) -> None:
    """C1: EEG, ECG and EMG without a planted fault stay below 1 % clipped and flat, and are not refused.

    The models of the demo, stored in 16 bits, at the limits that hold by default.
    """
    rng = np.random.default_rng(seed)
    rhythm = brain.Rhythm(10, 1, (20.0,) * 4)
    model = brain.EegModel(15, 1.2, rhythm, rhythm, rhythm)
    signals = (
        (brain.eeg(rng, model, 60, 256), 256, 400.0),
        (heart.ecg(rng, heart.HeartModel(65, 45, 1.5), 60, 500), 500, 5000.0),
        (muscle.emg(rng, _muscle(), muscle.Contraction(10, 50), 60, 2000), 2000, 5000.0),
    )
    for samples, rate_hz, limit_uv in signals:
        lsb_uv = 2 * limit_uv / 65_535
        rows = np.atleast_2d(np.clip(np.round(samples / lsb_uv) * lsb_uv, -limit_uv, limit_uv))
        for channel in assess(signal_of(rows, rate_hz), 50).channels:
            assert channel.clipped_share < 0.01
            assert channel.flat_share < 0.01
            assert channel.identical == ()


def _muscle() -> muscle.MuscleModel:
    return muscle.MuscleModel(110, -0.12, 250, 0.2)
