"""Cut a signal into windows of one length, and mark those that are too large or too flat."""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING, Literal

import numpy as np

from bandcairn.errors import StepError

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from bandcairn.signal import Run, Signal

KEPT, TOO_LARGE, TOO_FLAT = 0, 1, 2


@dataclass(frozen=True, slots=True)
class Segment:
    """A named stretch of a recording, in seconds from the start of the file."""

    name: str
    start_s: float
    stop_s: float


@dataclass(frozen=True, slots=True)
class Reject:
    """Limits beyond which an epoch is not used.

    Attributes
    ----------
    peak_to_peak_uv : float or None
        An epoch whose range exceeds it is too large.
    flat_uv : float or None
        An epoch whose range is below it is too flat.
    scope : {"channel", "epoch"}
        Whether an epoch is dropped for the channel that fails, or then for all channels.
    """

    peak_to_peak_uv: float | None = None
    flat_uv: float | None = None
    scope: Literal["channel", "epoch"] = "channel"


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
        0 kept, 1 range above the limit, 2 range below the limit.
    """

    first: NDArray[np.int64]
    start_s: NDArray[np.float64]
    segment: tuple[str, ...]
    length: int
    peak_to_peak_uv: NDArray[np.float64]
    reason: NDArray[np.int8]

    @property
    def kept(self) -> NDArray[np.bool_]:
        """True where a channel's epoch is used, shape (n_channels, n_epochs)."""
        kept: NDArray[np.bool_] = self.reason == KEPT
        return kept


@dataclass(frozen=True, slots=True)
class _Stretch:
    """Windows that lie evenly spaced within one run and one segment."""

    segment: str
    run: Run
    first: int
    count: int


def cut_epochs(
    signal: Signal,
    length_s: float,
    overlap: float,
    segments: tuple[Segment, ...] = (),
    reject: Reject | None = None,
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
        None keeps every epoch.

    Returns
    -------
    Epochs
        No window at all is a valid result: each segment may be shorter than a window.

    Raises
    ------
    StepError
        If a length, overlap, segment or limit is out of its range.
    """
    length, step = _window_samples(signal.rate_hz, length_s, overlap)
    _check_segments(segments)
    _check_limits(reject)
    stretches = tuple(_stretches(signal, length, step, segments))
    first = np.concatenate(
        [np.empty(0, np.int64)] + [part.first + step * np.arange(part.count) for part in stretches]
    )
    peak_to_peak_uv = np.empty((len(signal.channels), len(first)))
    filled = 0
    for part in stretches:
        here = slice(part.first, part.first + step * (part.count - 1) + length)
        peak_to_peak_uv[:, filled : filled + part.count] = _ranges(signal.samples[:, here], length, step)
        filled += part.count
    return Epochs(
        first=first,
        start_s=_start_times(stretches, signal.rate_hz, step),
        segment=tuple(part.segment for part in stretches for _ in range(part.count)),
        length=length,
        peak_to_peak_uv=peak_to_peak_uv,
        reason=_reasons(peak_to_peak_uv, reject),
    )


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


def _window_samples(rate_hz: Fraction, length_s: float, overlap: float) -> tuple[int, int]:
    """Return length and step of the windows in samples."""
    if not (math.isfinite(length_s) and 0 <= overlap < 1):
        raise StepError(f"epoch: found length_s {length_s} and overlap {overlap}; allowed: 0 <= overlap < 1.")
    length = round(_seconds(length_s) * rate_hz)
    step = round(length * (1 - _seconds(overlap)))
    if length < 1 or step < 1:
        raise StepError(
            f"epoch: windows of {length_s:g} s with an overlap of {overlap:g} are {length} samples long "
            f"and {step} apart at {float(rate_hz):g} Hz; allowed: at least 1 of each. Choose longer "
            "windows or less overlap."
        )
    return length, step


def _seconds(decimal: float) -> Fraction:
    """Return exactly the decimal number that was written: 0.1 is 1/10, not the nearest binary number."""
    return Fraction(repr(float(decimal)))


def _check_segments(segments: tuple[Segment, ...]) -> None:
    for segment in segments:
        if not -math.inf < segment.start_s < segment.stop_s < math.inf:
            raise StepError(
                f"epoch: segment {segment.name!r} runs from {segment.start_s} to {segment.stop_s} s; "
                "allowed: a stop after the start. Correct the table of segments."
            )


def _check_limits(reject: Reject | None) -> None:
    if reject is None or reject.flat_uv is None or reject.peak_to_peak_uv is None:
        return
    if reject.flat_uv >= reject.peak_to_peak_uv:
        raise StepError(
            f"epoch: found flat_uv {reject.flat_uv:g} and peak_to_peak_uv {reject.peak_to_peak_uv:g}; "
            "allowed: flat_uv below peak_to_peak_uv, or no epoch is left. Correct one of them."
        )


def _stretches(signal: Signal, length: int, step: int, segments: tuple[Segment, ...]) -> Iterator[_Stretch]:
    """Yield what each segment holds of each run, where at least one window fits."""
    for segment in segments or (None,):
        for run in signal.runs:
            start, stop = _held(run, signal.rate_hz, segment)
            if stop - start >= length:
                name = segment.name if segment else ""
                yield _Stretch(name, run, start, (stop - start - length) // step + 1)


def _held(run: Run, rate_hz: Fraction, segment: Segment | None) -> tuple[int, int]:
    """Return the half-open range of samples of a run that a segment holds."""
    if segment is None:
        return run.first, run.stop
    # The first sample at or after a time is the first one not strictly before it: one rule for both ends.
    start = run.first + math.ceil((_seconds(segment.start_s) - run.start_s) * rate_hz)
    stop = run.first + math.ceil((_seconds(segment.stop_s) - run.start_s) * rate_hz)
    return max(start, run.first), min(stop, run.stop)


def _start_times(stretches: tuple[_Stretch, ...], rate_hz: Fraction, step: int) -> NDArray[np.float64]:
    """Return the time of every window's first sample."""
    times: list[float] = []
    for part in stretches:
        start = part.run.start_s + (part.first - part.run.first) / rate_hz
        spacing = step / rate_hz
        # Over a common denominator, each time is one division of whole numbers: rounded once, and quickly.
        below = math.lcm(start.denominator, spacing.denominator)
        above, more = int(start * below), int(spacing * below)
        times.extend((above + i * more) / below for i in range(part.count))
    return np.array(times, dtype=np.float64)


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


def _reasons(peak_to_peak_uv: NDArray[np.float64], reject: Reject | None) -> NDArray[np.int8]:
    """Return why each epoch of each channel is dropped, or 0.

    With scope "epoch", a channel that passes by itself takes the reason of those that fail: too large if any
    is.
    """
    reason = np.zeros(peak_to_peak_uv.shape, np.int8)
    if reject is None:
        return reason
    if reject.flat_uv is not None:
        reason[peak_to_peak_uv < reject.flat_uv] = TOO_FLAT
    if reject.peak_to_peak_uv is not None:
        reason[peak_to_peak_uv > reject.peak_to_peak_uv] = TOO_LARGE
    if reject.scope == "epoch":
        spread = np.where((reason == TOO_LARGE).any(axis=0), TOO_LARGE, reason.max(axis=0)).astype(np.int8)
        reason = np.where(reason == KEPT, spread, reason)
    return reason
