"""Where windows lie: evenly spaced in a stretch, or about events; by true times and one rounding rule.

A length of time is the nearest number of samples, halves to the even one. A border belongs to the first sample at or
after it. An event belongs to the sample nearest to it, halves to the even one. Seconds are read as the decimal numbers
that were written, and all of it is computed in fractions.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.errors import StepError

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from bandcairn.signal import Run, Signal


@dataclass(frozen=True, slots=True)
class Segment:
    """A named stretch of a recording, in seconds from the start of the file."""

    name: str
    start_s: float
    stop_s: float


@dataclass(frozen=True, slots=True)
class Around:
    """Windows about events.

    Attributes
    ----------
    start_s, stop_s : float
        Where a window begins and ends, in seconds after its event; negative before it.
    onsets_s : tuple of float
        Times of the events in seconds from the start of the file, in order.
    """

    start_s: float
    stop_s: float
    onsets_s: tuple[float, ...]


@dataclass(frozen=True, slots=True)
class Row:
    """Windows that lie evenly spaced within one run and one segment."""

    segment: str
    run: Run
    first: int
    count: int


@dataclass(frozen=True, slots=True)
class Layout:
    """All windows of a signal.

    Attributes
    ----------
    length, step : int
        Samples of a window, and from one window of a row to the next.
    rows : tuple of Row
        In the order of the windows.
    no_window : dict of str to int
        By segment, the events in it whose window crosses a gap or a border, and so does not exist.
    largest_shift_s : float
        Largest distance of an event from its sample.
    """

    length: int
    step: int
    rows: tuple[Row, ...]
    no_window: dict[str, int]
    largest_shift_s: float = 0.0

    @property
    def first(self) -> NDArray[np.int64]:
        """Index of each window's first sample."""
        parts = [row.first + self.step * np.arange(row.count) for row in self.rows]
        return np.concatenate([np.empty(0, np.int64), *parts])

    @property
    def segment(self) -> tuple[str, ...]:
        """Name of the segment of each window."""
        return tuple(row.segment for row in self.rows for _ in range(row.count))

    def start_times(self, rate_hz: Fraction) -> NDArray[np.float64]:
        """Return the time of every window's first sample, in seconds from the start of the file."""
        times: list[float] = []
        spacing = self.step / rate_hz
        for row in self.rows:
            start = row.run.start_s + (row.first - row.run.first) / rate_hz
            # Over a common denominator, each time is one division of whole numbers: rounded once, and quickly.
            below = math.lcm(start.denominator, spacing.denominator)
            above, more = int(start * below), int(spacing * below)
            times.extend((above + i * more) / below for i in range(row.count))
        return np.array(times, dtype=np.float64)


def evenly(signal: Signal, length_s: float, overlap: float, segments: tuple[Segment, ...]) -> Layout:
    """Lay windows one after the other through every run of every segment.

    Parameters
    ----------
    signal : Signal
        The signal.
    length_s : float
        Length of a window.
    overlap : float
        Share of a window that the next one repeats, 0 up to but below 1.
    segments : tuple of Segment
        None given: each run as a whole.

    Returns
    -------
    Layout

    Raises
    ------
    StepError
        If a length, overlap or segment is out of its range.
    """
    length, step = _window_samples(signal.rate_hz, length_s, overlap)
    _check_segments(segments)
    rows = []
    for segment in segments or (None,):
        for run in signal.runs:
            start, stop = held(run, signal.rate_hz, segment)
            if stop - start >= length:
                name = segment.name if segment else ""
                rows.append(Row(name, run, start, (stop - start - length) // step + 1))
    return Layout(length, step, tuple(rows), {})


def about_events(signal: Signal, around: Around, segments: tuple[Segment, ...]) -> Layout:
    """Lay one window about every event that has its whole window in one run and in its segment.

    Parameters
    ----------
    signal : Signal
        The signal.
    around : Around
        Where a window begins and ends, and the events.
    segments : tuple of Segment
        An event belongs to every segment whose start is at or before it and whose stop is after it. None given: the
        whole recording.

    Returns
    -------
    Layout

    Raises
    ------
    StepError
        If the window holds no sample, or a segment is out of its range.
    """
    length, offset = _event_samples(signal.rate_hz, around)
    _check_segments(segments)
    rows: list[Row] = []
    no_window: dict[str, int] = {}
    largest_shift = Fraction(0)
    for segment in segments or (None,):
        name = segment.name if segment else ""
        for onset in _inside(around.onsets_s, signal, segment):
            row, shift = _window_of(onset, signal, segment, offset, length)
            largest_shift = max(largest_shift, shift)
            if row is None:
                no_window[name] = no_window.get(name, 0) + 1
            else:
                rows.append(row)
    return Layout(length, length, tuple(rows), no_window, float(largest_shift))


def held(run: Run, rate_hz: Fraction, segment: Segment | None) -> tuple[int, int]:
    """Return the half-open range of samples of a run that a segment holds; empty or turned about if it holds none."""
    if segment is None:
        return run.first, run.stop
    # The first sample at or after a time is the first one not strictly before it: one rule for both ends.
    start = run.first + math.ceil((exact_seconds(segment.start_s) - run.start_s) * rate_hz)
    stop = run.first + math.ceil((exact_seconds(segment.stop_s) - run.start_s) * rate_hz)
    return max(start, run.first), min(stop, run.stop)


def exact_seconds(decimal: float) -> Fraction:
    """Return exactly the decimal number that was written: 0.1 is 1/10, not the nearest binary number."""
    return Fraction(repr(float(decimal)))


def _window_samples(rate_hz: Fraction, length_s: float, overlap: float) -> tuple[int, int]:
    """Return length and step of the windows in samples."""
    if not (math.isfinite(length_s) and 0 <= overlap < 1):
        raise StepError(f"epoch: found length_s {length_s} and overlap {overlap}; allowed: 0 <= overlap < 1.")
    length = round(exact_seconds(length_s) * rate_hz)
    step = round(length * (1 - exact_seconds(overlap)))
    if length < 1 or step < 1:
        raise StepError(
            f"epoch: windows of {length_s:g} s with an overlap of {overlap:g} are {length} samples long "
            f"and {step} apart at {float(rate_hz):g} Hz; allowed: at least 1 of each. Choose longer "
            "windows or less overlap."
        )
    return length, step


def _event_samples(rate_hz: Fraction, around: Around) -> tuple[int, int]:
    """Return the length of a window about an event, and where it begins after the event's sample."""
    length = round((exact_seconds(around.stop_s) - exact_seconds(around.start_s)) * rate_hz)
    if length < 1:
        raise StepError(
            f"epoch: a window from {around.start_s:g} to {around.stop_s:g} s about an event holds {max(0, length)} "
            f"samples at {float(rate_hz):g} Hz; allowed: at least 1. Choose a later stop_s."
        )
    return length, round(exact_seconds(around.start_s) * rate_hz)


def _check_segments(segments: tuple[Segment, ...]) -> None:
    for segment in segments:
        if not -math.inf < segment.start_s < segment.stop_s < math.inf:
            raise StepError(
                f"epoch: segment {segment.name!r} runs from {segment.start_s} to {segment.stop_s} s; "
                "allowed: a stop after the start. Correct the table of segments."
            )


def _inside(onsets_s: tuple[float, ...], signal: Signal, segment: Segment | None) -> Iterator[Fraction]:
    """Yield the events in a segment, and in what is used of the file."""
    last = signal.runs[-1]
    start, stop = signal.runs[0].start_s, last.start_s + last.n_samples / signal.rate_hz
    if segment is not None:
        start, stop = max(start, exact_seconds(segment.start_s)), min(stop, exact_seconds(segment.stop_s))
    for onset_s in onsets_s:
        onset = exact_seconds(onset_s)
        if start <= onset < stop:
            yield onset


def _window_of(
    onset: Fraction, signal: Signal, segment: Segment | None, offset: int, length: int
) -> tuple[Row | None, Fraction]:
    """Return the window of an event, and how far the event lies from its sample; None where no run holds it whole."""
    name = segment.name if segment else ""
    for run in signal.runs:
        place = (onset - run.start_s) * signal.rate_hz
        first = run.first + round(place) + offset
        start, stop = held(run, signal.rate_hz, segment)
        if start <= first and first + length <= stop:
            return Row(name, run, first, 1), abs(place - round(place)) / signal.rate_hz
    return None, Fraction(0)
