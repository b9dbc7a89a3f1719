"""Filtering: cascades, runs, edges, refusals. Responses against truth stand in reference_checks."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING

import numpy as np
import pytest

from bandcairn.errors import StepError
from bandcairn.signal import Run, Signal
from bandcairn.steps import filter_design
from bandcairn.steps.filter import (
    FilterStage,
    apply_stages,
    effective_cutoffs,
    response,
    sections,
    short_runs,
)

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bandcairn.steps.filter import Phase

LOW = FilterStage(type="lowpass", cutoff_hz=(30.0,), order=4)
HIGH = FilterStage(type="highpass", cutoff_hz=(1.0,), order=2)
STOP = FilterStage(type="bandstop", cutoff_hz=(48.0, 52.0), order=2)
CAUSAL = FilterStage(type="lowpass", cutoff_hz=(30.0,), order=2, phase="causal")


def signal_of(samples: NDArray[np.float64], runs: tuple[Run, ...] | None = None) -> Signal:
    """Return a signal at 250 Hz, in one run if none are given."""
    channels = tuple(f"c{row}" for row in range(len(samples)))
    return Signal(samples, Fraction(250), channels, runs or (Run(0, samples.shape[1], Fraction(0)),))


def noise(n_channels: int, n_samples: int, seed: int = 1) -> NDArray[np.float64]:
    """Return white noise of variance 1."""
    return np.random.default_rng(seed).normal(size=(n_channels, n_samples))


def test_no_stage_gives_back_the_signal_itself() -> None:
    """An absent filter passes its input on, unchanged."""
    signal = signal_of(noise(1, 100))

    assert apply_stages(signal, ()) is signal


@pytest.mark.parametrize("stages", [(LOW, STOP), (CAUSAL,), (HIGH, CAUSAL)])
def test_input_is_left_as_it_was(stages: tuple[FilterStage, ...]) -> None:
    """A step never writes into what it was given, though the passes run in place."""
    signal = signal_of(noise(2, 3000))
    before = signal.samples.copy()

    apply_stages(signal, stages)

    np.testing.assert_array_equal(signal.samples, before)


def test_each_run_is_filtered_by_itself() -> None:
    """Samples beyond a gap have no influence, and runs stay as they are."""
    samples = noise(2, 4000)
    runs = (Run(0, 1500, Fraction(0)), Run(1500, 4000, Fraction(60)))

    both = apply_stages(signal_of(samples, runs), (HIGH, LOW))
    alone = apply_stages(signal_of(samples[:, 1500:].copy()), (HIGH, LOW))

    assert both.runs == runs
    np.testing.assert_array_equal(both.samples[:, 1500:], alone.samples)


def test_zero_phase_stages_commute() -> None:
    """Neighbouring stages of one phase are one cascade: their order changes no more than the last digits."""
    signal = signal_of(noise(1, 5000))

    one = apply_stages(signal, (HIGH, STOP, LOW)).samples
    other = apply_stages(signal, (LOW, HIGH, STOP)).samples

    np.testing.assert_allclose(one, other, atol=1e-10)


def test_a_stage_after_a_change_of_phase_runs_on_its_own() -> None:
    """Zero phase, causal, zero phase are three cascades, used in their order."""
    signal = signal_of(noise(1, 5000))

    together = apply_stages(signal, (HIGH, CAUSAL, LOW)).samples
    in_turn = apply_stages(apply_stages(apply_stages(signal, (HIGH,)), (CAUSAL,)), (LOW,)).samples

    np.testing.assert_array_equal(together, in_turn)


@pytest.mark.parametrize("phase", ["zero", "causal"])
def test_offset_does_not_ring(phase: Phase) -> None:
    """A constant passes a low-pass unchanged and a high-pass not at all, from the first sample on."""
    signal = signal_of(np.full((1, 5000), 1e4))
    low = FilterStage(type="lowpass", cutoff_hz=(30.0,), order=4, phase=phase)
    high = FilterStage(type="highpass", cutoff_hz=(0.5,), order=4, phase=phase)

    np.testing.assert_allclose(apply_stages(signal, (low,)).samples, 1e4, rtol=1e-9)
    np.testing.assert_allclose(apply_stages(signal, (high,)).samples, 0, atol=1e-4)


def test_causal_output_knows_nothing_of_the_future() -> None:
    """Samples before a change are the same to the last bit."""
    samples = noise(1, 1000)
    changed = samples.copy()
    changed[0, 700:] += 50

    one, other = (apply_stages(signal_of(some), (CAUSAL,)).samples for some in (samples, changed))

    np.testing.assert_array_equal(one[0, :700], other[0, :700])
    assert not np.array_equal(one[0, 700:], other[0, 700:])


def test_step_far_from_the_edges_leaves_a_symmetric_trace() -> None:
    """Forward and backward together favour neither side."""
    samples = np.concatenate([np.full(2000, -1.0), [0.0], np.full(2000, 1.0)])[np.newaxis]

    filtered = apply_stages(signal_of(samples), (LOW,)).samples[0]

    np.testing.assert_allclose(filtered, -filtered[::-1], atol=1e-12)


def test_run_no_longer_than_the_filter_settles_is_refused_with_both_lengths() -> None:
    """0.5 Hz of order 4 settles in 958 samples (FIL-IRLEN-2): 958 are refused, 959 pass."""
    slow = FilterStage(type="highpass", cutoff_hz=(0.5,), order=4)

    with pytest.raises(StepError, match=r"gap-free run of 3\.832 s; needed: more than 3\.832 s"):
        apply_stages(signal_of(noise(1, 958)), (slow,))
    assert apply_stages(signal_of(noise(1, 959)), (slow,)).samples.shape == (1, 959)


def test_one_short_run_among_long_ones_is_left_out_and_listed() -> None:
    """A gap costs what lies too close to it, not the recording; the runs that stay keep their times."""
    samples = noise(1, 6100)
    runs = (Run(0, 3000, Fraction(0)), Run(3000, 3100, Fraction(60)), Run(3100, 6100, Fraction(90)))
    signal = signal_of(samples, runs)

    filtered = apply_stages(signal, (HIGH,))

    assert filtered.runs == (Run(0, 3000, Fraction(0)), Run(3000, 6000, Fraction(90)))
    (short,) = short_runs(signal, (HIGH,))
    assert (short.run, short.length_s) == (runs[1], 0.4)
    alone = apply_stages(signal_of(samples[:, 3100:].copy()), (HIGH,))
    np.testing.assert_array_equal(filtered.samples[:, 3000:], alone.samples)


def test_runs_that_are_all_too_short_are_refused_with_the_longest() -> None:
    """Where nothing can be filtered, the recording is refused by name."""
    runs = (Run(0, 100, Fraction(0)), Run(100, 150, Fraction(60)))

    with pytest.raises(StepError, match=r"2 gap-free runs, the longest of 0\.400 s"):
        apply_stages(signal_of(noise(1, 150), runs), (HIGH,))


@pytest.mark.parametrize("bad", [np.nan, np.inf])
def test_samples_that_are_not_finite_are_refused(bad: float) -> None:
    """One of them would spread over its whole run."""
    samples = noise(1, 3000)
    samples[0, 1234] = bad

    with pytest.raises(StepError, match="not finite"):
        apply_stages(signal_of(samples), (LOW,))


def test_pole_at_zero_settles_at_once() -> None:
    """Order 1 at a quarter of the rate has its pole at 0, whose logarithm does not exist."""
    stage = FilterStage(type="lowpass", cutoff_hz=(62.5,), order=1)

    assert apply_stages(signal_of(noise(1, 10)), (stage,)).samples.shape == (1, 10)


@pytest.mark.parametrize(
    ("stage", "message"),
    [
        (FilterStage(type="lowpass", cutoff_hz=(122.5,), order=2), r"below 122\.5 Hz \(0\.98 of Nyquist\)"),
        (FilterStage(type="highpass", cutoff_hz=(0.0,), order=2), "cut-offs above 0"),
        (FilterStage(type="bandpass", cutoff_hz=(40.0, 8.0), order=2), "allowed: two increasing cut-offs"),
        (FilterStage(type="bandpass", cutoff_hz=(8.0,), order=2), "allowed: two increasing cut-offs"),
        (FilterStage(type="lowpass", cutoff_hz=(8.0, 40.0), order=2), "allowed: one cut-off"),
        (FilterStage(type="lowpass", cutoff_hz=(8.0,), order=0), "an order of at least 1"),
        (FilterStage(type="lowpass", cutoff_hz=(float("nan"),), order=2), "cut-offs above 0"),
        (
            FilterStage(type="lowpass", cutoff_hz=(8.0,), order=2, design="gauss"),  # type: ignore[arg-type]
            "found design 'gauss'; allowed: butterworth, ",
        ),
    ],
)
def test_impossible_stage_is_refused(stage: FilterStage, message: str) -> None:
    """What was found and what is allowed are both told."""
    with pytest.raises(StepError, match=message):
        sections(stage, 250.0)


def test_unstable_pole_is_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    """Whatever a design routine returns, a pole on or outside the unit circle goes no further."""
    monkeypatch.setattr(filter_design, "largest_radius", lambda _sos: 1.0)

    with pytest.raises(StepError, match="pole at radius 1 at 250 Hz and is unstable"):
        sections(LOW, 250.0)


def test_effective_cutoffs_come_in_the_order_of_the_study() -> None:
    """One result for each cut-off, with the index of its stage."""
    found = effective_cutoffs((HIGH, STOP), 250.0)

    assert [(edge.stage, edge.requested_hz) for edge in found] == [(0, 1.0), (1, 48.0), (1, 52.0)]


def test_no_stage_passes_everything() -> None:
    """The response of an absent filter is 1, in the shape that was asked for."""
    np.testing.assert_array_equal(response((), 250.0, [[0.0, 50.0], [100.0, 125.0]]), np.ones((2, 2)))
