"""Resampling: times, lengths, edges, refusals. What the filter does to tones stands in reference_checks."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING

import numpy as np
import pytest

from bandcairn.errors import StepError
from bandcairn.signal import Run, Signal
from bandcairn.steps.resample import anti_alias, resample

if TYPE_CHECKING:
    from numpy.typing import NDArray


def signal_of(
    samples: NDArray[np.float64], rate_hz: Fraction, lengths: tuple[int, ...] | None = None
) -> Signal:
    """Return a signal of runs of the given lengths, 10 s apart; one run if none is given."""
    runs, first = [], 0
    for position, length in enumerate(lengths or (samples.shape[1],)):
        runs.append(Run(first, first + length, Fraction(10 * position)))
        first += length
    channels = tuple(f"c{row}" for row in range(len(samples)))
    return Signal(samples, rate_hz, channels, tuple(runs))


def noise(n_channels: int, n_samples: int, seed: int = 1) -> NDArray[np.float64]:
    """Return white noise of variance 1."""
    return np.random.default_rng(seed).normal(size=(n_channels, n_samples))


def test_equal_rate_gives_back_the_signal_itself() -> None:
    """Nothing is computed where nothing is to be done."""
    signal = signal_of(noise(2, 100), Fraction(250))

    assert resample(signal, Fraction(250)) is signal


def test_input_is_left_as_it_was() -> None:
    """A step never writes into what it was given."""
    signal = signal_of(noise(2, 5000), Fraction(500))
    before = signal.samples.copy()

    resample(signal, Fraction(200))

    np.testing.assert_array_equal(signal.samples, before)


@pytest.mark.parametrize(("rate", "target"), [(500, 200), (256, 128), (1000, 256), (250, 249)])
@pytest.mark.parametrize("n_samples", [1, 2, 3, 50, 1001, 40_000])
def test_constant_stays_constant_up_to_the_edges(rate: int, target: int, n_samples: int) -> None:
    """An offset comes out as it went in, in runs of any length: every phase of the filter adds up to 1."""
    signal = signal_of(np.full((1, n_samples), 1e4), Fraction(rate))

    resampled = resample(signal, Fraction(target))

    np.testing.assert_allclose(resampled.samples, 1e4, rtol=1e-12)


@pytest.mark.parametrize("n_samples", [2, 3, 50, 2000])
def test_slow_drift_goes_on_across_the_edges(n_samples: int) -> None:
    """The odd extension continues a straight line, however often a short run is turned about its ends."""
    seconds = np.arange(n_samples) / 500
    signal = signal_of(30 + 7 * seconds[np.newaxis], Fraction(500))

    resampled = resample(signal, Fraction(200)).samples[0]

    # At most half a filter of 68 samples is extended, a slope of 0.014 a sample: rounding only.
    np.testing.assert_allclose(resampled, 30 + 7 * np.arange(len(resampled)) / 200, rtol=1e-12)


@pytest.mark.parametrize("n_samples", [4999, 5000, 5001, 5007])
def test_no_output_lies_beyond_the_run(n_samples: int) -> None:
    """There is one output for each multiple of the new sampling interval before the run ends."""
    resampled = resample(signal_of(noise(1, n_samples), Fraction(500)), Fraction(200))
    times = Fraction(1, 200) * np.arange(resampled.samples.shape[1] + 1)

    assert times[-2] < Fraction(n_samples, 500) <= times[-1]


def test_each_run_is_resampled_by_itself() -> None:
    """A neighbouring run has no influence, and runs keep their times."""
    samples = noise(2, 3000)
    both = resample(signal_of(samples, Fraction(500), (1001, 1999)), Fraction(200))
    alone = resample(signal_of(samples[:, 1001:].copy(), Fraction(500)), Fraction(200))

    assert both.runs == (Run(0, 401, Fraction(0)), Run(401, 401 + 800, Fraction(10)))
    np.testing.assert_array_equal(both.samples[:, 401:], alone.samples)


def test_a_longer_recording_does_not_change_a_bit_of_what_came_before() -> None:
    """Products of matrices of one shape only: the same samples give the same bits."""
    samples = noise(1, 150_000)
    long = resample(signal_of(samples, Fraction(256)), Fraction(128))
    short = resample(signal_of(samples[:, :99_999].copy(), Fraction(256)), Fraction(128))

    np.testing.assert_array_equal(short.samples[:, :49_900], long.samples[:, :49_900])


def test_channels_do_not_depend_on_their_neighbours() -> None:
    """A channel gives the same bits alone as among others."""
    samples = noise(3, 10_000)
    together = resample(signal_of(samples, Fraction(1000)), Fraction(250))
    alone = resample(signal_of(samples[1:2].copy(), Fraction(1000)), Fraction(250))

    np.testing.assert_array_equal(together.samples[1], alone.samples[0])


def test_upsampling_is_refused_with_both_rates() -> None:
    """A higher rate would pretend to information that is not there."""
    with pytest.raises(StepError, match=r"new rate of 500 Hz for a signal at 250 Hz; allowed: above 0"):
        resample(signal_of(noise(1, 100), Fraction(250)), Fraction(500))


def test_rate_of_nothing_is_refused() -> None:
    """A rate of 0 Hz is no rate."""
    with pytest.raises(StepError, match="new rate of 0 Hz"):
        resample(signal_of(noise(1, 100), Fraction(250)), Fraction(0))


def test_crooked_ratio_is_refused_with_rates_that_would_do() -> None:
    """999.4121 to 500 Hz needs millions of phases; half the rate is what was meant."""
    signal = signal_of(noise(1, 100), Fraction(9_994_121, 10_000))

    with pytest.raises(StepError, match=r"Nearest simple rates: 499\.70605 Hz \(1/2 of the rate\)"):
        resample(signal, Fraction(500))


def test_rate_far_below_the_signal_is_refused_without_a_remedy_that_does_not_exist() -> None:
    """A ratio below 1/1000 has its nearest simple one at 1/1000."""
    with pytest.raises(StepError, match=r"Nearest simple rates: 2 Hz \(1/1000 of the rate\)"):
        resample(signal_of(noise(1, 100), Fraction(2000)), Fraction(3, 2))


def test_nearest_rate_is_written_so_that_it_can_be_copied() -> None:
    """A rate without a short decimal is given as a fraction too."""
    signal = signal_of(noise(1, 100), Fraction(1000, 3))

    with pytest.raises(StepError, match=r"333\.3333333 Hz \(1000/3\)"):
        resample(signal, Fraction("100.001"))


def test_taps_cannot_be_written_to() -> None:
    """The design is shared between calls."""
    design = anti_alias(Fraction(500), Fraction(200))

    with pytest.raises(ValueError, match="read-only"):
        design.taps[0] = 1.0


def test_taps_that_miss_their_promise_are_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    """The filter is measured each time it is designed, not trusted."""
    monkeypatch.setattr("bandcairn.steps.resample._DESIGN_ATTENUATION_DB", 60.0)

    with pytest.raises(StepError, match=r"from 997 to 331 Hz has .* of attenuation; allowed: below 0\.01"):
        anti_alias(Fraction(997), Fraction(331))
