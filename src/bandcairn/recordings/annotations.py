"""The annotations of EDF+ and BDF+ files, and the clock that they keep.

Each data record opens with a time-keeping list that says when it starts; the first of them may lie up to a
second after the start time of the header. Here time counts from the first sample, so that offset is taken
off every onset. Where a file declares that it is discontinuous, a record that starts later than the one before
it ends opens a new stretch; what is less than half a sample apart is rounding in the text.
"""

from __future__ import annotations

import itertools
import re
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING

from bandcairn.recordings.header import as_text, encoding_of, one_character_apart
from bandcairn.recordings.records import bytes_of, each_block
from bandcairn.recordings.refusal import refusal
from bandcairn.signal import Annotation, Gap, Run

if TYPE_CHECKING:
    from pathlib import Path

    from bandcairn.errors import RecordingError
    from bandcairn.recordings.header import Header, SignalHeader

# +onset [0x15 duration] 0x14 text 0x14 text 0x14; lists are parted by zero bytes.
_LIST = re.compile(
    rb"([+-][0-9]{1,15}(?:\.[0-9]{0,24})?)(?:\x15([0-9]{1,15}(?:\.[0-9]{0,24})?))?\x14((?:[^\x14]*\x14)*)",
    re.DOTALL,
)
_START = re.compile(rb"[+-]?[0-9]{1,15}(\.[0-9]{0,24})?")


@dataclass(frozen=True, slots=True)
class Stretch:
    """Data records that follow each other without a gap: a half-open range, and when the first one starts."""

    first: int
    stop: int
    start_s: Fraction


@dataclass(frozen=True, slots=True)
class Timeline:
    """When the data records of a file were recorded, and what was noted meanwhile.

    Attributes
    ----------
    annotations : tuple of Annotation
        Sorted by onset, duration and text, so that the record that carries an annotation makes no difference.
        Texts that are empty are left out: nothing can refer to them.
    stretches : tuple of Stretch
        In order; they tile the records.
    start_offset_s : Fraction
        How long after the start time of the header the first sample lies.
    encoding : str
        What reads the texts of the annotations.
    """

    annotations: tuple[Annotation, ...]
    stretches: tuple[Stretch, ...]
    start_offset_s: Fraction = Fraction(0)
    encoding: str = "ASCII"

    def runs(self, signal: SignalHeader) -> tuple[Run, ...]:
        """Return the gap-free runs of a signal."""
        n = signal.samples_per_record
        return tuple(Run(one.first * n, one.stop * n, one.start_s) for one in self.stretches)

    def gaps(self, record_s: Fraction) -> tuple[Gap, ...]:
        """Return the times between the stretches."""
        return tuple(
            Gap(before.start_s + (before.stop - before.first) * record_s, after.start_s)
            for before, after in itertools.pairwise(self.stretches)
        )

    def duration_s(self, record_s: Fraction) -> Fraction:
        """Return the time from the first sample to the end of the last."""
        last = self.stretches[-1]
        return last.start_s + (last.stop - last.first) * record_s


def read_timeline(path: Path, header: Header) -> Timeline:
    """Read the time stamps of all data records and all annotations.

    Returns
    -------
    Timeline
        One stretch for a file without annotations, which is continuous by definition.

    Raises
    ------
    RecordingError
        If a list cannot be read, if records overlap, or if records that are declared continuous are not.
    """
    if not header.annotation_signals:
        return Timeline((), (Stretch(0, header.n_records, Fraction(0)),))
    first, *others = _lists_by_record(path, header)
    starts = [lists.partition(b"\x14")[0] for lists in first]
    offset_s = _first_start(path, starts)
    # Most records hold nothing but their start time, followed by two marks.
    texts = [lists for lists, start in zip(first, starts, strict=True) if len(lists) != len(start) + 2]
    texts += [lists for other in others for lists in other if lists]
    found = [annotation for lists in texts for annotation in _annotations(path, lists, offset_s)]
    return Timeline(
        annotations=tuple(sorted(found, key=lambda item: (item.onset_s, item.duration_s, item.text))),
        stretches=_stretches(path, header, starts, offset_s),
        start_offset_s=offset_s,
        encoding=encoding_of(b"".join(texts)),
    )


def _first_start(path: Path, starts: list[bytes]) -> Fraction:
    record = next((record for record, start in enumerate(starts) if not _START.fullmatch(start)), None)
    if record is not None:
        found = f"data record {record + 1} without its start time"
        raise refusal(path, found, "one in every record", "Export the file anew from the recorder.")
    return Fraction(starts[0].decode())


def _lists_by_record(path: Path, header: Header) -> list[list[bytes]]:
    """Return the annotation bytes of every record, for each annotation signal, without closing zeros."""
    lists: list[list[bytes]] = [[] for _ in header.annotation_signals]
    for block in each_block(path, header):
        for of_signal, signal in zip(lists, header.annotation_signals, strict=True):
            raw = bytes_of(block, signal)
            # numpy drops the zeros behind a fixed-width text, in one go for all records.
            of_signal.extend(raw.view(f"S{raw.shape[1]}")[:, 0].tolist())
    return lists


def _stretches(path: Path, header: Header, starts: list[bytes], offset_s: Fraction) -> tuple[Stretch, ...]:
    """Part the records where their clock jumps."""
    import numpy as np

    if not header.channels:
        return (Stretch(0, len(starts), Fraction(0)),)
    found_s = np.array(starts).astype(np.float64)
    record_s = float(header.record_s)
    # Half a sample of the fastest channel: less is rounding in the text, more is lost or doubled samples.
    slack_s = 0.5 * record_s / max(signal.samples_per_record for signal in header.channels)
    late = np.diff(found_s) > record_s + slack_s
    breaks = np.flatnonzero(late) + 1 if header.discontinuous else np.array([], dtype=np.intp)
    firsts = np.concatenate(([0], breaks))
    # When each record should start, counted from the first one of its stretch.
    begun = np.repeat(firsts, np.diff(np.append(firsts, len(starts))))
    expected_s = found_s[begun] + (np.arange(len(starts)) - begun) * record_s
    off = np.flatnonzero(~(np.abs(found_s - expected_s) <= slack_s))
    if off.size:
        raise _jump(path, header, int(off[0]), float(found_s[off[0]]), float(expected_s[off[0]]))
    _check_duration_against_clock(path, header, starts, n_breaks=len(breaks))
    ends = [*firsts[1:].tolist(), len(starts)]
    return tuple(
        Stretch(first, stop, Fraction(starts[first].decode()) - offset_s)
        for first, stop in zip(firsts.tolist(), ends, strict=True)
    )


def _jump(path: Path, header: Header, record: int, found_s: float, expected_s: float) -> RecordingError:
    found = f"data record {record + 1} starting at {found_s:.9g} s"
    if header.discontinuous:
        allowed = f"{expected_s:.9g} s, where the record before it ends, or later"
        remedy = "Records overlap or their clock drifts: export the file anew from the recorder."
    else:
        allowed = f"{expected_s:.9g} s, for the file says it is continuous"
        remedy = "Export it as a discontinuous file, or each stretch as a file of its own: nothing is glued."
    return refusal(path, found, allowed, remedy)


def _check_duration_against_clock(path: Path, header: Header, starts: list[bytes], n_breaks: int) -> None:
    """Refuse a gap behind every record where another duration of a record would leave none.

    One damaged character in that field would otherwise change the rate and part the file at every record.
    """
    if n_breaks < 3 or n_breaks != len(starts) - 1:
        return
    times_s = [Fraction(start.decode()) for start in starts]
    steps_s = {after - before for before, after in itertools.pairwise(times_s)}
    step_s = steps_s.pop()
    if not steps_s and any(one_character_apart(header.record_s_text, text) for text in _spellings(step_s)):
        found = f"data records of {header.record_s_text} s that all start {float(step_s):g} s after another"
        remedy = "The header is damaged, or the file parted at every record: export it anew."
        raise refusal(path, found, "records that fit their clock", remedy)


def _spellings(seconds: Fraction) -> tuple[str, ...]:
    plain = f"{float(seconds):.7g}"
    return (plain, *(f"{float(seconds):.{digits}f}" for digits in range(1, 7)), f"{plain}.")


def _annotations(path: Path, lists: bytes, offset_s: Fraction) -> list[Annotation]:
    annotations = []
    for one in filter(None, lists.split(b"\0")):
        match = _LIST.fullmatch(one)
        if match is None:
            allowed = "onset, duration and texts as EDF+ lays them out"
            raise refusal(path, f"the annotation {one[:40]!r}", allowed, "Export the file anew.")
        onset, duration, texts = match.groups()
        onset_s = float(Fraction(onset.decode()) - offset_s)
        duration_s = float(duration or 0)
        names = filter(None, (as_text(text) for text in texts.split(b"\x14")))
        annotations += [Annotation(onset_s, duration_s, name) for name in names]
    return annotations
