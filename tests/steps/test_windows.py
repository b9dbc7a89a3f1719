"""Windows about events: which samples they hold, which events have none, and how far an event is moved (F1, P16)."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from bandcairn.errors import StepError
from bandcairn.signal import Run, Signal
from bandcairn.steps.epoch import Around, Segment, cut_around, cut_epochs, epoch_view


def ramp(n_samples: int, rate_hz: Fraction = Fraction(100), runs: tuple[Run, ...] | None = None) -> Signal:
    """Return one channel whose every sample is its own index."""
    samples = np.arange(n_samples, dtype=np.float64)[np.newaxis]
    return Signal(samples, rate_hz, ("c",), runs or (Run(0, n_samples, Fraction(0)),))


def test_f1_a_window_begins_and_ends_about_its_event() -> None:
    """From 0.2 s before the event up to 0.8 s after it, the sample there not included: 100 samples."""
    epochs = cut_around(ramp(1000), Around(-0.2, 0.8, (1.0, 5.0)))

    np.testing.assert_array_equal(epochs.first, [80, 480])
    np.testing.assert_array_equal(epochs.start_s, [0.8, 4.8])
    assert epochs.length == 100
    assert epochs.largest_shift_s == 0


def test_f1_an_event_whose_window_ends_with_the_last_sample_has_it_and_one_later_has_none() -> None:
    """The last window that fits is laid; an event one sample on is counted, as is one too near the start."""
    epochs = cut_around(ramp(1000), Around(-0.2, 0.8, (0.19, 0.2, 9.2, 9.21)))

    np.testing.assert_array_equal(epochs.first, [0, 900])
    assert epochs.no_window == {"": 2}


def test_f1_an_event_on_the_last_sample_has_a_window_that_lies_before_it() -> None:
    """A window may end at or before its event."""
    epochs = cut_around(ramp(1000), Around(-1, 0, (9.99,)))

    np.testing.assert_array_equal(epochs.first, [899])


def test_f1_near_events_have_windows_that_overlap() -> None:
    """Every event has a window of its own."""
    signal = ramp(1000)
    epochs = cut_around(signal, Around(0, 1, (2.0, 2.5)))

    np.testing.assert_array_equal(epochs.first, [200, 250])
    np.testing.assert_array_equal(epoch_view(signal.samples, epochs)[0, :, 0], [200, 250])


def test_p16_an_event_between_two_samples_goes_to_the_nearer_and_the_shift_is_told() -> None:
    """1.2345 s at 128 Hz is sample 158, 0.125 ms earlier; the time itself is never rounded."""
    epochs = cut_around(ramp(1000, Fraction(128)), Around(0, 1, (1.2345,)))

    np.testing.assert_array_equal(epochs.first, [158])
    assert epochs.largest_shift_s == pytest.approx(1.2345 - 158 / 128, abs=1e-12)


def test_p16_an_event_half_way_goes_to_the_even_sample() -> None:
    """One rule for every rounding."""
    epochs = cut_around(ramp(1000), Around(0, 1, (1.005, 1.015)))

    np.testing.assert_array_equal(epochs.first, [100, 102])
    assert epochs.largest_shift_s == 0.005


@settings(max_examples=60, deadline=None)
@given(
    onset=st.decimals(0, 60, places=4, allow_nan=False),
    rate=st.sampled_from([Fraction(128), Fraction(256), Fraction(1000), Fraction(5000, 3)]),
)
def test_p16_no_event_is_moved_by_more_than_half_a_sample(onset: object, rate: Fraction) -> None:
    """Resampling changes the grid, never the time of an event."""
    onset_s = float(str(onset))
    epochs = cut_around(ramp(round(62 * rate), rate), Around(0, 1, (onset_s,)))

    assert epochs.largest_shift_s <= 0.5 / rate
    assert epochs.start_s[0] == pytest.approx(onset_s, abs=0.5 / rate + Fraction(1, 10**9))


def test_p16_events_far_into_a_night_lie_on_their_samples() -> None:
    """Every 30 s of 8 h at 999.5 Hz, by true time: no drift adds up."""
    rate_hz, onsets_s = Fraction("999.5"), tuple(30.0 * k for k in range(1, 960))
    signal = Signal(np.zeros((1, 28_800 * 1000)), rate_hz, ("c",), (Run(0, 28_800_000, Fraction(0)),))

    epochs = cut_around(signal, Around(0, 1, onsets_s))

    np.testing.assert_array_equal(epochs.first, [29_985 * k for k in range(1, 960)])


def test_f2_no_window_about_an_event_crosses_a_gap() -> None:
    """Of events on both sides of a gap and in it, those alone have a window that one run holds whole."""
    runs = (Run(0, 300, Fraction(0)), Run(300, 800, Fraction(10)))

    epochs = cut_around(ramp(800, runs=runs), Around(-0.5, 0.5, (2.5, 2.51, 5.0, 10.49, 10.5)))

    np.testing.assert_array_equal(epochs.first, [200, 300])
    assert epochs.no_window == {"": 3}


def test_p19_a_window_behind_a_gap_is_found_by_its_time() -> None:
    """Samples are counted from the start of their run."""
    runs = (Run(0, 300, Fraction(0)), Run(300, 800, Fraction("10.005")))

    epochs = cut_around(ramp(800, runs=runs), Around(0, 1, (11.005,)))

    np.testing.assert_array_equal(epochs.first, [400])
    np.testing.assert_array_equal(epochs.start_s, [11.005])


def test_f2_a_window_lies_whole_within_the_segment_of_its_event() -> None:
    """An event belongs to the segment it lies in, start included and stop not; its window must fit there."""
    segments = (Segment("first", 0, 4), Segment("second", 4, 8))

    epochs = cut_around(ramp(1000), Around(0, 1, (3.0, 3.5, 4.0, 9.0)), segments)

    np.testing.assert_array_equal(epochs.first, [300, 400])
    assert epochs.segment == ("first", "second")
    assert epochs.no_window == {"first": 1}


def test_no_event_is_a_result() -> None:
    """A recording without the event has no epochs."""
    epochs = cut_around(ramp(100), Around(0, 0.5, ()))

    assert epochs.peak_to_peak_uv.shape == (1, 0)
    assert epochs.no_window == {}


def test_a_window_without_a_sample_is_refused() -> None:
    """At 100 Hz, 4 ms hold nothing."""
    with pytest.raises(StepError, match="holds 0 samples"):
        cut_around(ramp(100), Around(0, 0.004, (0.5,)))


def test_g8_thirty_second_borders_are_exact_between_scored_stages() -> None:
    """Stages of 30 s that share their borders hold every sample once."""
    stages = tuple(Segment(f"stage {k % 5}", 30.0 * k, 30.0 * (k + 1)) for k in range(120))
    epochs = cut_epochs(ramp(120 * 30 * 200, Fraction(200)), 30, 0, stages)

    np.testing.assert_array_equal(epochs.first, 6000 * np.arange(120))
