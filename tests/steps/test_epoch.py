"""Epochs: which samples belong to a window, to a segment, to a run; what is rejected and why."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bandcairn.errors import StepError
from bandcairn.signal import Run, Signal
from bandcairn.steps.epoch import Epochs, Reject, Segment, cut_epochs, epoch_view

if TYPE_CHECKING:
    from numpy.typing import NDArray


def signal_of(
    samples: NDArray[np.float64], rate_hz: Fraction = Fraction(100), runs: tuple[Run, ...] | None = None
) -> Signal:
    """Return a signal, in one run if none are given."""
    channels = tuple(f"c{row}" for row in range(len(samples)))
    return Signal(samples, rate_hz, channels, runs or (Run(0, samples.shape[1], Fraction(0)),))


def ramp(n_samples: int) -> NDArray[np.float64]:
    """Return one channel whose every sample is its own index."""
    return np.arange(n_samples, dtype=np.float64)[np.newaxis]


def test_whole_recording_is_cut_when_no_segment_is_given() -> None:
    """Windows begin at the first sample, and an incomplete last one is left out."""
    epochs = cut_epochs(signal_of(ramp(1050)), 2, 0.5)

    np.testing.assert_array_equal(epochs.first, np.arange(9) * 100)
    np.testing.assert_array_equal(epochs.start_s, np.arange(9.0))
    assert epochs.segment == ("",) * 9
    assert epochs.length == 200
    assert epochs.kept.all()


def test_segment_holds_the_sample_on_its_start_but_not_the_one_on_its_stop() -> None:
    """Of two segments that share a border, one alone holds the sample on it."""
    halves = (Segment("first", 0, 1), Segment("second", 1, 2))

    epochs = cut_epochs(signal_of(ramp(200)), 0.5, 0, halves)

    np.testing.assert_array_equal(epochs.first, [0, 50, 100, 150])
    assert epochs.segment == ("first", "first", "second", "second")


def test_border_between_two_samples_goes_to_the_next_sample() -> None:
    """The first sample at or after the start; the last one strictly before the stop."""
    epochs = cut_epochs(signal_of(ramp(100)), 0.01, 0, (Segment("a", 0.101, 0.139),))

    np.testing.assert_array_equal(epochs.first, [11, 12, 13])


def test_borders_are_exact_at_rates_without_a_binary_fraction() -> None:
    """0.1 s at 10 Hz is sample 1, though the float 0.1 is a little more: each tenth holds one sample."""
    tenths = tuple(Segment(str(k), k / 10, (k + 1) / 10) for k in range(100))

    epochs = cut_epochs(signal_of(ramp(100), Fraction(10)), 0.1, 0, tenths)

    np.testing.assert_array_equal(epochs.first, np.arange(100))
    assert epochs.segment == tuple(segment.name for segment in tenths)


def test_thirty_second_borders_are_exact_far_into_a_night() -> None:
    """Every border of 24 h at 256 Hz lies on its sample."""
    n_epochs = 2880
    nights = tuple(Segment(str(k), 30.0 * k, 30.0 * (k + 1)) for k in range(n_epochs))
    signal = signal_of(np.zeros((1, n_epochs * 7680)), Fraction(256))

    epochs = cut_epochs(signal, 30, 0, nights)

    np.testing.assert_array_equal(epochs.first, 7680 * np.arange(n_epochs))
    np.testing.assert_array_equal(epochs.start_s, 30.0 * np.arange(n_epochs))


def test_no_window_crosses_a_gap() -> None:
    """Each run is cut by itself, and times are those of the file."""
    runs = (Run(0, 250, Fraction(0)), Run(250, 600, Fraction(10)))

    epochs = cut_epochs(signal_of(ramp(600), runs=runs), 1, 0, (Segment("task", 0, 100),))

    np.testing.assert_array_equal(epochs.first, [0, 100, 250, 350, 450])
    np.testing.assert_array_equal(epochs.start_s, [0, 1, 10, 11, 12])


def test_segment_beyond_a_gap_is_found_by_its_time() -> None:
    """Samples are counted from the start of their run, not of the file."""
    runs = (Run(0, 200, Fraction(0)), Run(200, 600, Fraction("10.5")))

    epochs = cut_epochs(signal_of(ramp(600), runs=runs), 1, 0, (Segment("late", 11, 13),))

    np.testing.assert_array_equal(epochs.first, [250, 350])
    np.testing.assert_array_equal(epochs.start_s, [11, 12])


def test_segment_past_the_end_is_cut_as_far_as_there_are_samples() -> None:
    """Only whole windows within the recording are taken."""
    epochs = cut_epochs(signal_of(ramp(300)), 1, 0, (Segment("a", -5, 1.5), Segment("b", 1.5, 99)))

    np.testing.assert_array_equal(epochs.first, [0, 150])


@pytest.mark.parametrize("segments", [(), (Segment("gone", 50, 60),)])
def test_no_window_is_a_result(segments: tuple[Segment, ...]) -> None:
    """A recording that is too short has no epochs, and every array says so."""
    epochs = cut_epochs(signal_of(ramp(90)), 1, 0, segments, Reject(peak_to_peak_uv=1))

    assert epochs.first.shape == (0,)
    assert epochs.start_s.shape == (0,)
    assert epochs.segment == ()
    assert epochs.peak_to_peak_uv.shape == epochs.reason.shape == epochs.kept.shape == (1, 0)
    assert epoch_view(ramp(90), epochs).shape == (1, 0, 100)


def test_half_samples_are_rounded_to_the_even_number() -> None:
    """A window of 2.5 samples is 2 long; one of 5 with half an overlap steps by 2."""
    assert cut_epochs(signal_of(ramp(50), Fraction(10)), 0.25, 0).length == 2
    np.testing.assert_array_equal(cut_epochs(signal_of(ramp(10), Fraction(10)), 0.5, 0.5).first, [0, 2, 4])


@settings(max_examples=60, deadline=None)
@given(
    n_samples=st.integers(1, 400),
    length=st.integers(1, 60),
    overlap=st.sampled_from([0.0, 0.1, 0.25, 0.5, 0.75, 0.9]),
    seed=st.integers(0, 2**32 - 1),
)
def test_ranges_equal_those_of_the_windows_themselves(
    n_samples: int, length: int, overlap: float, seed: int
) -> None:
    """Extremes found by blocks are those found window by window."""
    samples = np.random.default_rng(seed).normal(size=(2, n_samples))
    if round(length * (1 - Fraction(str(overlap)))) < 1:
        return

    epochs = cut_epochs(signal_of(samples), length / 100, overlap)

    for window, first in enumerate(epochs.first):
        expected = np.ptp(samples[:, first : first + length], axis=1)
        np.testing.assert_array_equal(epochs.peak_to_peak_uv[:, window], expected)


@pytest.mark.parametrize("segments", [(), (Segment("a", 0.13, 2), Segment("b", 2.2, 5), Segment("c", 0, 5))])
def test_view_holds_the_samples_of_every_window(segments: tuple[Segment, ...]) -> None:
    """Evenly spaced or not, row k is the window that begins at first[k]."""
    samples = np.random.default_rng(3).normal(size=(2, 500))
    epochs = cut_epochs(signal_of(samples), 0.5, 0.5, segments)

    view = epoch_view(samples, epochs)

    assert view.shape == (2, len(epochs.first), 50)
    for window, first in enumerate(epochs.first):
        np.testing.assert_array_equal(view[:, window], samples[:, first : first + 50])


def test_evenly_spaced_windows_are_not_copied() -> None:
    """Overlapping epochs take no memory of their own, and cannot be written to."""
    samples = ramp(500).copy()
    view = epoch_view(samples, cut_epochs(signal_of(samples), 1, 0.5))

    assert np.shares_memory(view, samples)
    with pytest.raises(ValueError, match="read-only"):
        view[0, 0, 0] = 1.0


def marked(reject: Reject) -> Epochs:
    """Cut three windows of two channels: ranges 10 0 10 and 300 10 10 uV."""
    samples = np.zeros((2, 300))
    samples[0, [50, 250]] = 10
    samples[1, [50, 150, 250]] = [300, 10, 10]
    return cut_epochs(signal_of(samples), 1, 0, (), reject)


def test_a_channel_that_fails_is_dropped_alone() -> None:
    """With scope channel, the others keep the epoch; the reason is told."""
    epochs = marked(Reject(peak_to_peak_uv=150, flat_uv=0.5))

    np.testing.assert_array_equal(epochs.peak_to_peak_uv, [[10, 0, 10], [300, 10, 10]])
    np.testing.assert_array_equal(epochs.reason, [[0, 2, 0], [1, 0, 0]])
    np.testing.assert_array_equal(epochs.kept, [[True, False, True], [False, True, True]])


def test_an_epoch_is_dropped_for_all_channels_on_demand() -> None:
    """With scope epoch, all channels take the reason of the one that fails."""
    epochs = marked(Reject(peak_to_peak_uv=150, flat_uv=0.5, scope="epoch"))

    np.testing.assert_array_equal(epochs.reason, [[1, 2, 0], [1, 2, 0]])


def test_a_channel_keeps_its_own_reason_beside_another() -> None:
    """Flat stays flat where a neighbour is too large; a channel without fault is called too large."""
    samples = np.zeros((3, 100))
    samples[1, 50], samples[2, 50] = 300, 10
    epochs = cut_epochs(signal_of(samples), 1, 0, (), Reject(150, 0.5, "epoch"))

    np.testing.assert_array_equal(epochs.reason, [[2], [1], [1]])


@pytest.mark.parametrize("reject", [Reject(peak_to_peak_uv=300), Reject(flat_uv=10)])
def test_a_range_on_the_limit_is_kept(reject: Reject) -> None:
    """The limit itself is allowed: beyond it is too large, below it too flat."""
    samples = np.zeros((1, 200))
    samples[0, [50, 150]] = [300, 10]

    assert cut_epochs(signal_of(samples), 1, 0, (), reject).kept.all()


def test_input_is_left_as_it_was() -> None:
    """A step never writes into what it was given."""
    samples = np.random.default_rng(5).normal(size=(2, 500))
    before = samples.copy()

    epoch_view(samples, cut_epochs(signal_of(samples), 1, 0.5, (), Reject(1, 0.5)))

    np.testing.assert_array_equal(samples, before)


@pytest.mark.parametrize(
    ("length_s", "overlap", "message"),
    [
        (0.001, 0, "are 0 samples long"),
        (0.02, 0.9, "and 0 apart"),
        (1, 1.0, "allowed: 0 <= overlap < 1"),
        (1, -0.1, "allowed: 0 <= overlap < 1"),
        (float("inf"), 0, "found length_s inf"),
    ],
)
def test_impossible_windows_are_refused(length_s: float, overlap: float, message: str) -> None:
    """A window holds a sample, and the next one begins later."""
    with pytest.raises(StepError, match=message):
        cut_epochs(signal_of(ramp(500)), length_s, overlap)


@pytest.mark.parametrize(("start_s", "stop_s"), [(2, 2), (3, 2), (float("nan"), 2), (0, float("inf"))])
def test_segment_that_holds_nothing_is_refused(start_s: float, stop_s: float) -> None:
    """A stop lies after its start."""
    with pytest.raises(StepError, match="segment 'rest' runs from"):
        cut_epochs(signal_of(ramp(500)), 1, 0, (Segment("rest", start_s, stop_s),))


def test_limits_that_leave_nothing_are_refused() -> None:
    """No range is both above 10 and below 5."""
    with pytest.raises(StepError, match="allowed: flat_uv below peak_to_peak_uv"):
        cut_epochs(signal_of(ramp(500)), 1, 0, (), Reject(peak_to_peak_uv=5, flat_uv=10))
