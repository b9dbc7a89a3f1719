"""Pains P4 and P5: gaps are never glued, and a start between two seconds is never lost."""

from __future__ import annotations

import time
from fractions import Fraction
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest

from bandcairn.errors import RecordingError
from bandcairn.recordings import Declared, RawIndex, RawSignal, content_digests, inspect, read
from bandcairn.signal import Annotation, Gap, Run

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    Build = Callable[..., Path]
    Make = Callable[..., Any]

NOTHING = Declared()
# Two records of 1 s, a gap of 100 s, two more; the first sample lies 0.25 s behind the start of the header.
STARTS = (b"+0.25", b"+1.25", b"+102.25", b"+103.25")
NOTE = b"\0+102.75\x152\x14eyes closed\x14"


def lists(starts: tuple[bytes, ...] = STARTS, last: bytes = b"") -> tuple[bytes, ...]:
    """Return the time-keeping list of each record, the last with something behind it."""
    return (*(start + b"\x14\x14" for start in starts[:-1]), starts[-1] + b"\x14\x14" + last)


@pytest.fixture(params=["one.edf", "one.bdf"])
def gapped(request: pytest.FixtureRequest, build: Build, channel: Make) -> Path:
    """Write a discontinuous file of two rates."""
    channels = [channel("Cz", np.arange(400)), channel("EMG", np.arange(800), per_record=200)]
    reserved = f"{request.param[-3:].upper()}+D"
    return build(channels, name=request.param, reserved=reserved, lists=lists(last=NOTE))


def test_p4_a_gap_ends_a_run_at_its_true_time_and_no_sample_moves(gapped: Path) -> None:
    """100 s without samples stay 100 s, for every rate of the file."""
    cz, emg = (read(gapped, (label,), NOTHING, None, None) for label in ("Cz", "EMG"))
    assert cz.runs == (Run(0, 200, Fraction(0)), Run(200, 400, Fraction(102)))
    assert emg.runs == (Run(0, 400, Fraction(0)), Run(400, 800, Fraction(102)))
    assert cz.samples[0].tolist() == list(range(400))


def test_p4_facts_tell_the_gap_and_the_true_length(gapped: Path) -> None:
    """104 s by the clock, though 4 s of samples are there."""
    facts = inspect(gapped)
    assert facts.gaps == (Gap(Fraction(2), Fraction(102)),)
    assert facts.duration_s == 104
    assert facts.channels[0].n_samples == 400


def test_p4_annotations_do_not_slide_into_the_gap(gapped: Path) -> None:
    """Written 102.75 s after the start of the header, which the first sample follows by 0.25 s."""
    assert inspect(gapped).annotations == (Annotation(102.5, 2.0, "eyes closed"),)


@pytest.mark.parametrize(
    ("start_s", "stop_s", "expected", "first"),
    [
        (1.5, 102.5, ((0, 50, Fraction(3, 2)), (50, 100, Fraction(102))), 150),
        (50.0, None, ((0, 200, Fraction(102)),), 200),
        (None, 60.0, ((0, 200, Fraction(0)),), 0),
        (102.004, 102.02, ((0, 1, Fraction("102.01")),), 201),
    ],
)
def test_p4_a_cut_is_by_true_time(
    gapped: Path, start_s: float | None, stop_s: float | None, expected: tuple[Any, ...], first: int
) -> None:
    """A cut may lie across a gap or begin inside of one."""
    raw = read(gapped, ("Cz",), NOTHING, start_s, stop_s)
    assert raw.runs == tuple(Run(*run) for run in expected)
    assert raw.samples[0].tolist() == list(range(first, first + raw.runs[-1].stop))


def test_p4_a_cut_within_a_gap_is_refused(gapped: Path) -> None:
    """It holds no sample."""
    with pytest.raises(RecordingError, match=r"a cut from 10.0 s to 20.0 s, without a sample at 100 Hz"):
        read(gapped, ("Cz",), NOTHING, 10.0, 20.0)
    with pytest.raises(RecordingError, match=r"stop <= 104 s"):
        read(gapped, ("Cz",), NOTHING, 10.0, 104.5)


def test_p4_another_gap_is_another_content(build: Build, channel: Make) -> None:
    """The same samples a second later are another recording; without a gap they are the plain one."""
    made = {}
    for name, last in (("near", "+9"), ("far", "+10"), ("none", "+1")):
        texts = lists((b"+0", last.encode()))
        made[name] = build([channel("Cz")], name=f"{name}.edf", reserved="EDF+D", lists=texts)
    plain = build([channel("Cz")], name="plain.edf")
    digests = {name: content_digests(path).of(("Cz",)) for name, path in (made | {"plain": plain}).items()}
    assert digests["near"] != digests["far"]
    assert digests["none"] == digests["plain"]
    assert digests["near"] != digests["plain"]


def test_p4_rounded_time_stamps_are_no_gaps(build: Build, channel: Make) -> None:
    """Records of a third of a second whose stamps have three digits: less than half a sample off."""
    starts = (b"+0", b"+0.333", b"+0.667", b"+1")
    path = build([channel("Cz", np.arange(400))], record_s="0.333333", reserved="EDF+D", lists=lists(starts))
    assert len(read(path, ("Cz",), NOTHING, None, None).runs) == 1


def test_p4_overlapping_records_are_refused(build: Build, channel: Make) -> None:
    """Two samples for one moment: nobody can tell which."""
    path = build(
        [channel("Cz", np.arange(400))], reserved="EDF+D", lists=lists((b"+0", b"+1", b"+1.5", b"+9"))
    )
    with pytest.raises(RecordingError, match=r"data record 3 starting at 1\.5 s; allowed: 2 s, .*or later"):
        inspect(path)


def test_p4_a_discontinuous_file_without_time_stamps_is_refused(build: Build, channel: Make) -> None:
    """Where its gaps lie cannot be told."""
    with pytest.raises(RecordingError, match=r"discontinuous file \(EDF\+D\) without the time stamps"):
        inspect(build([channel("Cz")], reserved="EDF+D"))


def test_p4_a_gap_behind_every_record_is_a_damaged_duration(build: Build, channel: Make) -> None:
    """Records of 1 s that start every 2 s: one character of the header would make them whole."""
    path = build(
        [channel("Cz", np.arange(500))], reserved="EDF+D", lists=lists((b"+0", b"+2", b"+4", b"+6", b"+8"))
    )
    with pytest.raises(RecordingError, match="data records of 1 s that all start 2 s after another"):
        inspect(path)


@pytest.mark.parametrize("offset", ["0.1", "0.000061", "0.123456789012345678"])
def test_p5_the_start_between_two_seconds_is_kept_exactly(build: Build, channel: Make, offset: str) -> None:
    """As a decimal, not as the nearest binary number; samples still count from 0."""
    second = f"+1.{offset.partition('.')[2]}".encode()
    path = build(
        [channel("Cz")],
        start="24.12.2523.59.58",
        reserved="EDF+C",
        lists=lists((f"+{offset}".encode(), second)),
    )
    details = inspect(path).details
    assert details.start_offset_s == Fraction(offset)
    assert details.start == "24.12.25 23.59.58"
    assert read(path, ("Cz",), NOTHING, None, None).runs == (Run(0, 200, Fraction(0)),)


def test_p10_a_date_that_is_none_is_flagged_and_enters_no_digest(build: Build, channel: Make) -> None:
    """Odd dates are kept as text: nothing rests on them."""
    odd = build([channel("Cz")], name="odd.edf", start="31.13.9925.61.61")
    even = build([channel("Cz")], name="even.edf")
    assert inspect(odd).details.start == "31.13.99 25.61.61 (no valid date and time)"
    assert content_digests(odd).channels == content_digests(even).channels


def test_runs_become_a_signal_whose_parts_can_be_told(gapped: Path) -> None:
    """What the steps get: samples in microvolt and the runs they must not cross."""
    raw: RawSignal = read(gapped, ("Cz",), NOTHING, None, None)
    parts = [(run.start_s, samples.shape) for run, samples in raw.to_signal().each_run()]
    assert parts == [(Fraction(0), (1, 200)), (Fraction(102), (1, 200))]


@pytest.mark.parametrize(("record_s", "refused"), [("1", False), ("1.001", True), ("0.999", True)])
def test_b8_a_rate_that_the_time_stamps_contradict_is_refused(
    build: Build, channel: Make, record_s: str, *, refused: bool
) -> None:
    """One part in a thousand is half a sample after five records, and seconds after an hour."""
    starts = tuple(f"+{record}".encode() for record in range(60))
    path = build([channel("Cz", np.arange(6000))], record_s=record_s, reserved="EDF+C", lists=lists(starts))
    if refused:
        with pytest.raises(
            RecordingError, match=r"starting at \d+ s; allowed: [\d.]+ s, .*says it is continuous"
        ):
            inspect(path)
    else:
        assert inspect(path).channels[0].rate_hz == 100


def test_what_is_remembered_of_a_file_is_all_that_it_says(gapped: Path, tmp_path: Path) -> None:
    """Gaps, length, repair, texts and the exact offset come back from memory as they were found."""
    gapped.write_bytes(gapped.read_bytes() + b"\0" * 5)
    time.sleep(0.15)
    memory = RawIndex.load(tmp_path / "index.json")
    facts = inspect(gapped)
    assert facts.repair is not None
    assert memory.facts(gapped, tmp_path) == facts
    memory.save()
    assert RawIndex.load(tmp_path / "index.json").facts(gapped, tmp_path) == facts
