"""Cut a signal into windows of one length, and mark those that are not used."""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.steps.rejection import AT_EDGE, BY_DECISION, KEPT, Reject, check_limits, judge
from bandcairn.steps.windows import Around, Layout, Segment, about_events, evenly, held

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bandcairn.signal import Signal

__all__ = [
    "Around",
    "BadStretch",
    "EdgeZone",
    "Epochs",
    "LeftOut",
    "Reject",
    "Segment",
    "cut_around",
    "cut_epochs",
    "epoch_view",
]


@dataclass(frozen=True, slots=True)
class EdgeZone:
    """What a filter leaves unsettled of every run.

    Attributes
    ----------
    start_samples, stop_samples : int
        Behind the beginning of a run, and before its end.
    at_start, at_stop : bool
        Whether that holds of the beginning of the first run and of the end of the last one too.
    """

    start_samples: int = 0
    stop_samples: int = 0
    at_start: bool = False
    at_stop: bool = False


@dataclass(frozen=True, slots=True)
class BadStretch:
    """A stretch that someone has decided to leave out, in seconds from the start of the file.

    Attributes
    ----------
    start_s, stop_s : float
        Epochs that hold a sample of it are dropped: from the first one at or after its start up to its stop.
    channels : tuple of str
        Of these channels.
    """

    start_s: float
    stop_s: float
    channels: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class LeftOut:
    """What is left out whatever the samples are.

    Attributes
    ----------
    edges : EdgeZone
        Of every run.
    stretches : tuple of BadStretch
        By decision.
    channels : tuple of str
        Channels left out as a whole by decision.
    """

    edges: EdgeZone = EdgeZone()
    stretches: tuple[BadStretch, ...] = ()
    channels: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Epochs:
    """Windows of one length, by where they begin: no sample is copied.

    Attributes
    ----------
    first : ndarray of int64, shape (n_epochs,)
        Index of each window's first sample in the signal.
    start_s : ndarray of float64, shape (n_epochs,)
        Time of that sample in seconds from the start of the file.
    segment : tuple of str, length n_epochs
        Name of the segment that holds the window; empty for the whole recording.
    length : int
        Samples per window.
    peak_to_peak_uv : ndarray of float64, shape (n_channels, n_epochs)
        Largest minus smallest sample.
    reason : ndarray of int8, shape (n_channels, n_epochs)
        0 kept, else one of `rejection.REASONS`.
    step_uv : ndarray of float64, shape (n_channels, n_epochs), or None
        Largest difference of neighbouring samples; None where nothing depends on it.
    no_window : dict of str to int
        By segment, the events whose window crosses a gap or a border, and so does not exist.
    largest_shift_s : float
        Largest distance of an event from its sample; 0 where there are no events.
    """

    first: NDArray[np.int64]
    start_s: NDArray[np.float64]
    segment: tuple[str, ...]
    length: int
    peak_to_peak_uv: NDArray[np.float64]
    reason: NDArray[np.int8]
    step_uv: NDArray[np.float64] | None = None
    no_window: dict[str, int] = field(default_factory=dict)
    largest_shift_s: float = 0.0

    @property
    def kept(self) -> NDArray[np.bool_]:
        """True where a channel's epoch is used, shape (n_channels, n_epochs)."""
        kept: NDArray[np.bool_] = self.reason == KEPT
        return kept


def cut_epochs(
    signal: Signal,
    length_s: float,
    overlap: float,
    segments: tuple[Segment, ...] = (),
    reject: Reject | None = None,
    *,
    left_out: LeftOut = LeftOut(),
) -> Epochs:
    """Cut fixed windows out of every segment, never across the end of a run or of a segment.

    A window holds L = round(length_s * rate) samples, and the next one begins round(L * (1 - overlap))
    samples later (halves go to the even number), so n samples hold floor((n - L) / step) + 1 windows. A
    segment holds the samples from the first one at or after its start to the last one strictly before its
    stop: of two segments that share a border, one alone holds the sample on it. Seconds are read as the
    decimal numbers that were written, and all of this is computed in fractions: a border at 30 s is exactly
    sample 7680 at 256 Hz.

    Parameters
    ----------
    signal : Signal
        Finite samples; not modified.
    length_s : float
        Length of a window in seconds.
    overlap : float
        Share of a window that the next one repeats, 0 up to but below 1.
    segments : tuple of Segment
        In the order of the epochs; they may overlap. None given: each run as a whole, under an empty name.
    reject : Reject or None
        None keeps every epoch but those of `left_out`.
    left_out : LeftOut
        Epochs that are dropped for where they lie. They are laid and counted all the same.

    Returns
    -------
    Epochs
        No window at all is a valid result: each segment may be shorter than a window.

    Raises
    ------
    StepError
        If a length, overlap, segment or limit is out of its range.
    """
    return _cut(signal, evenly(signal, length_s, overlap, segments), reject, left_out)


def cut_around(
    signal: Signal,
    around: Around,
    segments: tuple[Segment, ...] = (),
    reject: Reject | None = None,
    *,
    left_out: LeftOut = LeftOut(),
) -> Epochs:
    """Cut one window about every event, never across the end of a run or of a segment.

    An event belongs to its nearest sample, and every window begins round(start_s * rate) samples after that and holds
    round((stop_s - start_s) * rate) of them (halves go to the even number): the event has the same place in all.

    Parameters
    ----------
    signal : Signal
        Finite samples; not modified.
    around : Around
        Where a window begins and ends, and the events.
    segments, reject, left_out
        As in `cut_epochs`.

    Returns
    -------
    Epochs
        Segment by segment in the order of the events. Events without a whole window are counted.

    Raises
    ------
    StepError
        If the window holds no sample, or a segment or limit is out of its range.
    """
    return _cut(signal, about_events(signal, around, segments), reject, left_out)


def epoch_view(samples: NDArray[np.float64], epochs: Epochs) -> NDArray[np.float64]:
    """Return the samples of every epoch.

    Parameters
    ----------
    samples : ndarray, shape (n_channels, n_samples)
        Those that the epochs were cut from.
    epochs : Epochs
        Where the windows begin.

    Returns
    -------
    ndarray, shape (n_channels, n_epochs, length)
        A read-only view if the windows are evenly spaced, else a copy.
    """
    first = epochs.first
    if len(first) == 0:
        return np.empty((len(samples), 0, epochs.length))
    spacing = np.unique(np.diff(first))
    if len(spacing) > 1 or (len(spacing) == 1 and spacing[0] <= 0):
        return samples[:, first[:, np.newaxis] + np.arange(epochs.length)]
    step = int(spacing[0]) if len(spacing) else 1
    return _windows(samples[:, first[0] : first[-1] + epochs.length], epochs.length, step)


def _cut(signal: Signal, layout: Layout, reject: Reject | None, left_out: LeftOut) -> Epochs:
    check_limits(reject)
    first = layout.first
    shape = (len(signal.channels), len(first))
    peak_to_peak_uv = np.empty(shape)
    step_uv = None if reject is None or reject.step_uv is None else np.empty(shape)
    filled = 0
    for row in layout.rows:
        here = signal.samples[:, row.first : row.first + layout.step * (row.count - 1) + layout.length]
        rows = slice(filled, filled + row.count)
        peak_to_peak_uv[:, rows] = _ranges(here, layout.length, layout.step)
        if step_uv is not None:
            together = (
                len(here) if row.count == 1 else 1
            )  # it takes a copy: of a long row, channel by channel
            for channel in range(0, len(here), together):
                some = slice(channel, channel + together)
                step_uv[some, rows] = _steepest(here[some], layout.length, layout.step)
        filled += row.count
    given = _left_out(signal, first, layout.length, left_out)
    unasked = np.isin(signal.channels, left_out.channels)
    return Epochs(
        first=first,
        start_s=layout.start_times(signal.rate_hz),
        segment=layout.segment,
        length=layout.length,
        peak_to_peak_uv=peak_to_peak_uv,
        reason=judge(peak_to_peak_uv, step_uv, reject, given, unasked),
        step_uv=step_uv,
        no_window=layout.no_window,
        largest_shift_s=layout.largest_shift_s,
    )


def _left_out(signal: Signal, first: NDArray[np.int64], length: int, left_out: LeftOut) -> NDArray[np.int8]:
    """Return why each epoch of each channel is dropped for where it lies, or 0."""
    reason = np.zeros((len(signal.channels), len(first)), np.int8)
    for start, stop in _edges(signal, left_out.edges):
        reason[:, (first < stop) & (first + length > start)] = AT_EDGE
    for stretch in left_out.stretches:
        rows = np.isin(signal.channels, stretch.channels)
        for run in signal.runs:
            start, stop = held(run, signal.rate_hz, Segment("", stretch.start_s, stretch.stop_s))
            if start < stop:
                reason[np.ix_(rows, (first < stop) & (first + length > start))] = BY_DECISION
    reason[np.isin(signal.channels, left_out.channels)] = BY_DECISION
    return reason


def _edges(signal: Signal, edges: EdgeZone) -> list[tuple[int, int]]:
    """Return the half-open ranges of samples in which the filter has not settled."""
    runs = signal.runs
    zones = [(run.first, min(run.first + edges.start_samples, run.stop)) for run in runs]
    ends = [(max(run.stop - edges.stop_samples, run.first), run.stop) for run in runs]
    used = zones[0 if edges.at_start else 1 :] + ends[: len(ends) if edges.at_stop else -1]
    return [(start, stop) for start, stop in used if start < stop]


def _windows(samples: NDArray[np.float64], length: int, step: int) -> NDArray[np.float64]:
    """View the last axis as overlapping windows, read-only, shape (n_channels, n_windows, length)."""
    return np.lib.stride_tricks.sliding_window_view(samples, length, axis=-1)[:, ::step]


def _ranges(samples: NDArray[np.float64], length: int, step: int) -> NDArray[np.float64]:
    """Return largest minus smallest sample of every window.

    Windows that overlap share blocks: a block's extremes are found once, and a window's from its blocks'.
    """
    block = math.gcd(length, step)
    blocks = samples.reshape(len(samples), -1, block)
    largest = _windows(blocks.max(axis=-1), length // block, step // block).max(axis=-1)
    smallest = _windows(blocks.min(axis=-1), length // block, step // block).min(axis=-1)
    return np.asarray(largest - smallest)


def _steepest(samples: NDArray[np.float64], length: int, step: int) -> NDArray[np.float64]:
    """Return the largest difference of neighbouring samples of every window, 0 in a window of one sample.

    Blocks as in `_ranges`. The difference from the last sample of a block to the next block's first belongs to the
    block, but not to a window that ends there.
    """
    block = math.gcd(length, step)
    jumps = np.zeros(samples.shape)
    np.abs(np.diff(samples, axis=-1), out=jumps[:, :-1])
    steps = jumps.reshape(len(samples), -1, block)
    inner = steps[..., :-1].max(axis=-1, initial=0)
    n_blocks, hop = length // block, step // block
    last = _windows(inner, n_blocks, hop)[..., -1]
    if n_blocks == 1:
        return np.asarray(last)
    whole = _windows(steps.max(axis=-1), n_blocks, hop)[..., :-1].max(axis=-1)
    return np.asarray(np.maximum(whole, last))
