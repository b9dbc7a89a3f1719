"""Heart beats of an ECG: R peaks and the intervals between them."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray


@dataclass(frozen=True, slots=True)
class Beats:
    """The R peaks of one gap-free run.

    Attributes
    ----------
    times_s : ndarray, shape (n_beats,), float64
        Seconds from the first sample, increasing, refined below the sampling step.
    amplitude_uv : ndarray, shape (n_beats,)
        Value of the signal at the peak; negative where the lead is inverted.
    inverted : bool
        True if the main deflection of this lead points down.
    """

    times_s: NDArray[np.float64]
    amplitude_uv: NDArray[np.float64]
    inverted: bool


@dataclass(frozen=True, slots=True)
class NN:
    """Intervals between successive beats, and which of them count as normal to normal.

    Attributes
    ----------
    interval_ms : ndarray, shape (n_beats - 1,)
    time_s : ndarray, shape (n_beats - 1,)
        Time of the later beat of each interval.
    valid : ndarray, shape (n_beats - 1,), bool
    valid_pair : ndarray, shape (n_beats - 2,), bool
        True where an interval and the next one are both valid.
    """

    interval_ms: NDArray[np.float64]
    time_s: NDArray[np.float64]
    valid: NDArray[np.bool_]
    valid_pair: NDArray[np.bool_]


SHORTEST_INTERVAL_S = 0.3
LONGEST_INTERVAL_S = 2.0
LARGEST_DEVIATION = 0.3
NEIGHBOURS = 11


def find_r_peaks(samples: NDArray[np.float64], rate_hz: float) -> Beats:
    """Find the R peaks of a filtered ECG."""
    raise NotImplementedError


def valid_intervals(times_s: NDArray[np.float64]) -> NN:
    """Judge the intervals between successive beats.

    An interval counts when it lasts 0.3 to 2.0 s and differs by at most 30 % from the median of the eleven
    intervals round it (its own and five on either side, shifted inwards at the ends). So a missed beat (a
    double interval), an extra one (two short intervals) and most premature beats with their pauses are left
    out; nothing is replaced.

    Parameters
    ----------
    times_s : ndarray, shape (n_beats,)
        Increasing.

    Returns
    -------
    NN

    Notes
    -----
    Limits of this kind are common practice; their values are a choice of this package without a published
    source. In a lasting bigeminy the median itself is not that of normal beats: look at such a recording
    before using it.
    """
    interval_s = np.diff(times_s)
    deviation = np.abs(interval_s - _local_median(interval_s))
    valid = (
        (interval_s >= SHORTEST_INTERVAL_S)
        & (interval_s <= LONGEST_INTERVAL_S)
        & (deviation <= LARGEST_DEVIATION * _local_median(interval_s))
    )
    return NN(1000 * interval_s, times_s[1:], valid, valid[1:] & valid[:-1])


def _local_median(values: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the median of the neighbours of each value, itself included; fewer values share one median."""
    if values.size <= NEIGHBOURS:
        return np.full(values.size, np.median(values) if values.size else np.nan)
    windows = np.lib.stride_tricks.sliding_window_view(values, NEIGHBOURS)
    centre = np.arange(values.size) - NEIGHBOURS // 2
    medians: NDArray[np.float64] = np.median(windows, axis=-1)
    return medians[np.clip(centre, 0, windows.shape[0] - 1)]
