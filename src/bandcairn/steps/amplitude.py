"""The amplitude of a channel as it was recorded: over all of it, and what is typical of two seconds."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from numpy.typing import NDArray

    from bandcairn.signal import Run

WINDOW_S = 2.0
# Samples looked at together: they stay in a core's cache.
_BLOCK = 1 << 15


@dataclass(frozen=True, slots=True)
class Amplitude:
    """Amplitude of one channel in microvolt.

    Attributes
    ----------
    low_uv, high_uv : float
        Smallest and largest sample.
    rms_uv : float
        Root mean square of all samples about their mean.
    typical_rms_uv, typical_peak_to_peak_uv : float or None
        Median, over the windows of two seconds in which the channel moves, of the root mean square about the
        window's mean and of largest minus smallest sample: slow drift and rare artefacts leave them alone. None
        where no window moves.
    """

    low_uv: float
    high_uv: float
    rms_uv: float
    typical_rms_uv: float | None
    typical_peak_to_peak_uv: float | None


def amplitude(samples: NDArray[np.float64], runs: Sequence[Run], rate_hz: float) -> Amplitude:
    """Measure the amplitude of one channel, shape (n_samples,), in microvolt; windows lie within the runs."""
    length = max(1, round(WINDOW_S * rate_hz))
    parts = [_window_statistics(block) for run in runs for block in _blocks(samples, run, length)]
    count, mean, squares, low, high = (np.concatenate(column) for column in zip(*parts, strict=True))
    overall = float(np.sum(count * mean) / np.sum(count))
    total = float(np.sum(squares) + np.sum(count * (mean - overall) ** 2))
    moves = (high > low) & (count == length)
    return Amplitude(
        low_uv=float(low.min()),
        high_uv=float(high.max()),
        rms_uv=float(np.sqrt(total / samples.size)),
        typical_rms_uv=float(np.median(np.sqrt(squares[moves] / length))) if moves.any() else None,
        typical_peak_to_peak_uv=float(np.median((high - low)[moves])) if moves.any() else None,
    )


def _blocks(samples: NDArray[np.float64], run: Run, length: int) -> Iterator[NDArray[np.float64]]:
    """Yield a run as sheets of shape (n_windows, length), and what is left of it as a shorter window."""
    n_windows = run.n_samples // length
    rest = run.first + n_windows * length
    windows = samples[run.first : rest].reshape(n_windows, length)
    at_once = max(1, _BLOCK // length)
    for start in range(0, n_windows, at_once):
        yield windows[start : start + at_once]
    if rest < run.stop:
        yield samples[np.newaxis, rest : run.stop]


def _window_statistics(windows: NDArray[np.float64]) -> tuple[NDArray[np.float64], ...]:
    """Return number of samples, mean, sum of squares about it, smallest and largest sample of each window."""
    mean = windows.mean(axis=1)
    centred = windows - mean[:, np.newaxis]
    count = np.full(len(windows), windows.shape[1], dtype=np.float64)
    return count, mean, np.einsum("ws,ws->w", centred, centred), windows.min(axis=1), windows.max(axis=1)
