"""The annotations of EDF+ and BDF+ files, and the clock that they keep.

Each data record opens with a time-keeping list that says when it starts; the first of them may lie up to a
second after the start time of the header. Here time counts from the first sample, so that offset is taken
off every onset.
"""

from __future__ import annotations

import re
from fractions import Fraction
from typing import TYPE_CHECKING

from bandcairn.recordings.header import as_text
from bandcairn.recordings.records import bytes_of, each_block
from bandcairn.recordings.refusal import refusal
from bandcairn.signal import Annotation

if TYPE_CHECKING:
    from pathlib import Path

    import numpy as np
    from numpy.typing import NDArray

    from bandcairn.recordings.header import Header

# +onset [0x15 duration] 0x14 text 0x14 text 0x14; lists are parted by zero bytes.
_LIST = re.compile(
    rb"([+-][0-9]{1,15}(?:\.[0-9]{0,24})?)(?:\x15([0-9]{1,15}(?:\.[0-9]{0,24})?))?\x14((?:[^\x14]*\x14)*)",
    re.DOTALL,
)
_START = re.compile(rb"[+-]?[0-9]{1,15}(\.[0-9]{0,24})?")


def read_annotations(path: Path, header: Header) -> tuple[Annotation, ...]:
    """Read all annotations and check that the data records follow each other without a gap.

    Returns
    -------
    tuple of Annotation
        Sorted by onset, duration and text, so that the record that carries an annotation makes no
        difference. Texts that are empty are left out: nothing can refer to them.

    Raises
    ------
    RecordingError
        If a list cannot be read, or if records that are declared continuous are not.
    """
    if not header.annotation_signals:
        return ()
    first, *others = _lists_by_record(path, header)
    starts = [lists.partition(b"\x14")[0] for lists in first]
    _check_continuity(path, header, starts)
    offset_s = Fraction(starts[0].decode())
    # Most records hold nothing but their start time, followed by two marks.
    texts = [lists for lists, start in zip(first, starts, strict=True) if len(lists) != len(start) + 2]
    texts += [lists for other in others for lists in other if lists]
    found = [annotation for lists in texts for annotation in _annotations(path, lists, offset_s)]
    return tuple(sorted(found, key=lambda item: (item.onset_s, item.duration_s, item.text)))


def _lists_by_record(path: Path, header: Header) -> list[list[bytes]]:
    """Return the annotation bytes of every record, for each annotation signal, without closing zeros."""
    lists: list[list[bytes]] = [[] for _ in header.annotation_signals]
    for block in each_block(path, header):
        for of_signal, signal in zip(lists, header.annotation_signals, strict=True):
            raw = bytes_of(block, signal)
            # numpy drops the zeros behind a fixed-width text, in one go for all records.
            of_signal.extend(raw.view(f"S{raw.shape[1]}")[:, 0].tolist())
    return lists


def _check_continuity(path: Path, header: Header, starts: list[bytes]) -> None:
    import numpy as np

    found_s = _seconds(path, starts)
    if not header.channels:
        return
    expected_s = found_s[0] + np.arange(len(starts)) * float(header.record_s)
    # Half a sample of the fastest channel: less is rounding in the text, more is lost or doubled samples.
    most_samples = max(signal.samples_per_record for signal in header.channels)
    off = np.flatnonzero(~(np.abs(found_s - expected_s) <= 0.5 * float(header.record_s) / most_samples))
    if off.size:
        record = int(off[0])
        found = f"data record {record + 1} starting at {found_s[record]:.9g} s"
        allowed = f"{expected_s[record]:.9g} s, for the file says it is continuous"
        remedy = "Export each stretch as a file of its own: stretches are never glued together."
        raise refusal(path, found, allowed, remedy)


def _seconds(path: Path, starts: list[bytes]) -> NDArray[np.float64]:
    import numpy as np

    record = next((record for record, start in enumerate(starts) if not _START.fullmatch(start)), None)
    if record is not None:
        found = f"data record {record + 1} without its start time"
        raise refusal(path, found, "one in every record", "Export the file anew from the recorder.")
    return np.array(starts).astype(np.float64)


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
