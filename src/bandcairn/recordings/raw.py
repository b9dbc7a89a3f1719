"""A signal as the file holds it: integers or decimals with the scaling to microvolt beside them."""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING, TypeAlias

from bandcairn.recordings.refusal import refusal
from bandcairn.signal import Run, Signal

if TYPE_CHECKING:
    from pathlib import Path

    import numpy as np
    from numpy.typing import NDArray

    Samples: TypeAlias = NDArray[np.int16] | NDArray[np.int32] | NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class RawSignal:
    """Channels sampled alike, not yet scaled.

    Attributes
    ----------
    labels : tuple of str
        Names of the channels, in the order asked for.
    rate_hz : Fraction
        Sampling rate, exact.
    samples : tuple of ndarray, shape (n_samples,)
        int16 from EDF, int32 from BDF, float64 from delimited text; read-only.
    gain_uv, offset_uv : tuple of float
        Microvolt = samples * gain + offset, for each channel.
    runs : tuple of Run
        Gap-free stretches that tile the samples.
    """

    labels: tuple[str, ...]
    rate_hz: Fraction
    samples: tuple[Samples, ...]
    gain_uv: tuple[float, ...]
    offset_uv: tuple[float, ...]
    runs: tuple[Run, ...]

    def __post_init__(self) -> None:
        for samples in self.samples:
            samples.flags.writeable = False

    def to_signal(self) -> Signal:
        """Return the channels in microvolt."""
        import numpy as np

        scaled = np.empty((len(self.labels), self.runs[-1].stop))
        channels = zip(scaled, self.samples, self.gain_uv, self.offset_uv, strict=True)
        for row, samples, gain_uv, offset_uv in channels:
            np.multiply(samples, gain_uv, out=row)
            np.add(row, offset_uv, out=row)
        return Signal(samples=scaled, rate_hz=self.rate_hz, channels=self.labels, runs=self.runs)


def cut(
    path: Path, runs: tuple[Run, ...], rate_hz: Fraction, start_s: float | None, stop_s: float | None
) -> tuple[Run, ...]:
    """Return what the stretch from `start_s` up to `stop_s` holds of every run.

    Parameters
    ----------
    path : Path
        Named in the refusal.
    runs : tuple of Run
        Gap-free runs that tile the samples of the file.
    rate_hz : Fraction
        Sampling rate.
    start_s, stop_s : float or None
        Seconds from the first sample of the file; None for its start and its end. Sample k of a run lies at its
        start + k / rate: the stretch holds those with start <= time < stop. The decimals as written count, not
        their nearest binary numbers: 0.1 s at 10 Hz is sample 1.

    Returns
    -------
    tuple of Run
        Indices into the samples of the file, one range without a hole.

    Raises
    ------
    RecordingError
        If the stretch reaches beyond the file or holds no sample.
    """
    length_s = runs[-1].start_s + runs[-1].n_samples / rate_hz
    start = Fraction(0) if start_s is None else _as_written(start_s)
    stop = length_s if stop_s is None else _as_written(stop_s)
    found = f"a cut from {start_s or 0} s to {'the end' if stop_s is None else f'{stop_s} s'}"
    remedy = "Correct start_s and stop_s in the recordings table."
    if start is None or stop is None or not 0 <= start < stop <= length_s:
        allowed = f"0 <= start < stop <= {float(length_s):.9g} s, the length of the file"
        raise refusal(path, found, allowed, remedy)
    held = tuple(piece for run in runs if (piece := _held(run, rate_hz, start, stop)).n_samples > 0)
    if not held:
        found += f", without a sample at {float(rate_hz):g} Hz"
        raise refusal(path, found, "one sample or more", remedy)
    return held


def counted_from_zero(runs: tuple[Run, ...]) -> tuple[Run, ...]:
    """Return neighbouring runs with their indices counted from the first of them."""
    first = runs[0].first
    return tuple(Run(run.first - first, run.stop - first, run.start_s) for run in runs)


def _held(run: Run, rate_hz: Fraction, start: Fraction, stop: Fraction) -> Run:
    before = max(0, math.ceil((start - run.start_s) * rate_hz))
    first = run.first + before
    end = min(run.stop, run.first + math.ceil((stop - run.start_s) * rate_hz))
    return Run(first, end, run.start_s + before / rate_hz)


def _as_written(seconds: float) -> Fraction | None:
    return Fraction(str(float(seconds))) if math.isfinite(seconds) else None
