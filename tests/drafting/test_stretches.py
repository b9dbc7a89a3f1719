"""From events to segments."""

from __future__ import annotations

from bandcairn.drafting.findings import FoundSegment
from bandcairn.drafting.stretches import counted, stretches_of


def _event(onset: object, duration: object, name: str) -> dict[str, str]:
    return {"onset": str(onset), "duration": str(duration), "trial_type": name}


def test_events_that_last_become_segments_and_repeats_are_numbered() -> None:
    """Moments are passed over; a type that returns has a number for each stretch."""
    events = [_event(0, 10, "open"), _event(10, 5, "hold"), _event(20, 5, "hold"), _event(3, 0, "beep")]
    stretches = stretches_of(events, 30.0)
    expected = (FoundSegment("open", 0, 10), FoundSegment("hold 1", 10, 15), FoundSegment("hold 2", 20, 25))
    assert stretches.segments == expected
    assert stretches.remarks == ()


def test_trials_become_no_segments_and_it_is_told() -> None:
    """Short or frequent events are trials, which no question can name one by one."""
    events = [_event(2 * k, 0.5, "go") for k in range(3)] + [_event(3 * k, 2, "stop") for k in range(13)]
    stretches = stretches_of(events, 100.0)
    assert stretches.segments == ()
    assert [text.split(" are ")[0] for text in stretches.remarks] == ["the events go", "the events stop"]


def test_an_event_beyond_the_recording_is_left_out_and_told() -> None:
    """Nothing is cut to fit."""
    stretches = stretches_of([_event(25, 10, "late"), _event(-1, 5, "early"), _event("n/a", 5, "x")], 30.0)
    assert stretches.segments == ()
    assert len(stretches.remarks) == 2


def test_a_name_that_no_table_takes_is_written_with_a_dash() -> None:
    """A slash would make a path of the segment."""
    assert stretches_of([_event(0, 5, "arm/left")], None).segments[0].name == "arm-left"


def test_sentences_are_counted() -> None:
    """What holds for some recordings says for how many."""
    assert counted(["a", "b", "a"], 2, "files") == ["A.", "B (in 1 of 2 files)."]
