"""The text files of a BrainVision recording: what the library that reads its samples does not hand on.

The header names the file of samples and the file of markers, and states the sampling interval as a decimal
number of microseconds. A marker of the type New Segment stands where the recorder was started, with its date.
The layout is that of the vendor's core data format 1.0 (from memory).
"""

from __future__ import annotations

import datetime as dt
import re
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING

from bandcairn.recordings.header import as_text, encoding_of
from bandcairn.recordings.refusal import refusal, unreadable

if TYPE_CHECKING:
    from pathlib import Path

_INTERVAL = re.compile(r"[0-9]{1,12}(\.[0-9]{1,12})?")
_NEW_SEGMENT = re.compile(
    r"^Mk[0-9]+=New Segment,[^,]*,([0-9]+),[0-9]+,[0-9]+(?:,([0-9]{20}))?", re.MULTILINE
)


@dataclass(frozen=True, slots=True)
class BrainVision:
    """What the header and the markers say.

    Attributes
    ----------
    rate_hz : Fraction
        Exact: a million over the sampling interval.
    companions : tuple of Path
        The files of samples and markers.
    starts : tuple of (int, Fraction)
        First sample and time in seconds of every segment, from the first.
    start : str
        Date of the first segment as written.
    encoding : str
        What reads the texts.
    """

    rate_hz: Fraction
    companions: tuple[Path, ...]
    starts: tuple[tuple[int, Fraction], ...]
    start: str
    encoding: str


def companions_of(path: Path) -> tuple[Path, ...]:
    """Return the files that a header names; those that are not there are left out."""
    text = as_text(_content(path))
    named = [_value(text, key) for key in ("DataFile", "MarkerFile")]
    stem = path.name.removesuffix(path.suffix)
    names = [name.replace("$b", stem) for name in named if name]
    return tuple(path.with_name(name) for name in names if path.with_name(name).is_file())


def read_brainvision(path: Path) -> BrainVision:
    """Read the header and the markers.

    Raises
    ------
    RecordingError
        If the interval is no number, or if a later segment has no date, so that its gap cannot be told.
    """
    content = _content(path)
    interval = _value(as_text(content), "SamplingInterval")
    if not _INTERVAL.fullmatch(interval) or not Fraction(interval):
        allowed = "a number of microseconds"
        raise refusal(path, f"{interval!r} as SamplingInterval", allowed, "Export the recording again.")
    marker_file = _value(as_text(content), "MarkerFile").replace("$b", path.name.removesuffix(path.suffix))
    markers = _content(path.with_name(marker_file)) if marker_file else b""
    segments = _NEW_SEGMENT.findall(as_text(markers)) or [("1", "")]
    return BrainVision(
        rate_hz=1_000_000 / Fraction(interval),
        companions=companions_of(path),
        starts=_starts(path, segments),
        start=segments[0][1],
        encoding=encoding_of(content + markers),
    )


def _starts(path: Path, segments: list[tuple[str, str]]) -> tuple[tuple[int, Fraction], ...]:
    first_date = _date_s(segments[0][1])
    starts = [(0, Fraction(0))]
    for position, written in segments[1:]:
        date_s = _date_s(written)
        if first_date is None or date_s is None:
            found = f"a new segment at sample {position} without its date"
            remedy = "Export each segment as a file of its own: how long the gap is cannot be told."
            raise refusal(path, found, "segments with their dates", remedy)
        starts.append((int(position) - 1, date_s - first_date))
    return tuple(starts)


def _date_s(written: str) -> Fraction | None:
    """Return a date of the form YYYYMMDDhhmmss and microseconds as seconds; None where there is none."""
    try:
        date = dt.datetime.strptime(written[:14], "%Y%m%d%H%M%S").replace(tzinfo=dt.UTC)
    except ValueError:
        return None
    return int(date.timestamp()) + Fraction(int(written[14:]), 1_000_000)


def _value(text: str, key: str) -> str:
    match = re.search(rf"^{key}[ \t]*=[ \t]*(.*?)[ \t\r]*$", text, re.MULTILINE)
    return match.group(1) if match else ""


def _content(path: Path) -> bytes:
    try:
        return path.read_bytes()
    except OSError as error:
        raise unreadable(path, error) from error
