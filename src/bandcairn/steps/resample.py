"""Bring a signal to a lower rate by an exact ratio, behind a stated anti-alias filter.

References
----------
.. [1] Kaiser J.F. (1974) Nonrecursive digital filter design using the I0-sinh window function.
   Proc. IEEE Int. Symp. Circuits and Systems, 20-23.
.. [2] Oppenheim A.V., Schafer R.W. (1999) Discrete-Time Signal Processing, 2nd ed., Prentice Hall,
   section 4.6 (changing the rate by a rational factor) and section 7.3 (Kaiser's formulas).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.errors import StepError
from bandcairn.signal import Run, Signal

if TYPE_CHECKING:
    from numpy.typing import NDArray

LARGEST_FACTOR = 1000
RIPPLE_LIMIT_DB = 0.01
ATTENUATION_LIMIT_DB = 80.0

# Edges of the transition band as shares of the new Nyquist frequency. What lies between 1 and 1.1 folds to
# 0.9 .. 1, above the pass-band: so the stop-band need not begin at Nyquist, and the filter is half as long.
_PASS_SHARE = 0.9
_STOP_SHARE = 1.1
# Kaiser's formulas miss by some tenths of a decibel; so does setting the gain of every phase to exactly 1.
_DESIGN_ATTENUATION_DB = 85.0

# One product of matrices gives this many outputs a row; measured: smaller blocks leave the processor's vector
# units idle, larger ones multiply more zeros.
_OUTPUTS_PER_BLOCK = 32
# Rows of one product hold about this many input samples (256 kB), so that they stay in a core's own cache.
_SAMPLES_PER_CHUNK = 32_768


@dataclass(frozen=True, slots=True)
class AntiAlias:
    """The low-pass filter of one change of rate, with what was measured on its taps.

    Attributes
    ----------
    up, down : int
        The new rate is the old one times up / down.
    taps : ndarray, shape (2 * half + 1,)
        Impulse response at `up` times the old rate, symmetric about its middle: no delay. Every `up`-th tap,
        from any first one, adds up to 1: a constant stays exactly what it is.
    pass_hz, stop_hz : float
        End of the pass-band and start of the stop-band: 0.9 and 1.1 of the new Nyquist frequency.
    ripple_db : float
        Largest deviation from a gain of 1 in the pass-band.
    attenuation_db : float
        Smallest attenuation in the stop-band.
    """

    up: int
    down: int
    taps: NDArray[np.float64]
    pass_hz: float
    stop_hz: float
    ripple_db: float
    attenuation_db: float


@dataclass(frozen=True, slots=True)
class _BlockFilter:
    """The anti-alias filter as a matrix: a row of samples times `matrix` is a row of outputs.

    Row b of the samples begins at sample b * hop - lead of a run, and gives outputs b * n_outputs onward.
    """

    matrix: NDArray[np.float64]
    hop: int
    lead: int
    rows: int

    @property
    def n_outputs(self) -> int:
        """Outputs per row."""
        n_outputs: int = self.matrix.shape[1]
        return n_outputs

    @property
    def chunk_samples(self) -> int:
        """Samples that `rows` rows reach over, rounded up to whole hops."""
        return (self.rows - 1 + math.ceil(len(self.matrix) / self.hop)) * self.hop


def resample(signal: Signal, rate_hz: Fraction) -> Signal:
    """Bring a signal to a lower sampling rate, run by run, without delay.

    Each run is extended beyond both ends by its own mirror image, turned about the end sample (odd
    extension): an offset or a slow drift then goes on across the edge, where zeros would drag the first
    samples down. A straight line taken off and added back would do the same for an offset, but rest the
    whole run on two noisy samples. Within half a filter (about 27 new samples) of an edge the output rests
    partly on extended samples.

    Parameters
    ----------
    signal : Signal
        Finite samples.
    rate_hz : Fraction
        New rate, at most the old one.

    Returns
    -------
    Signal
        The same object if the rate is unchanged. Otherwise output sample k of a run lies exactly k / rate_hz
        after the run's first sample, and a run of n samples gives ceil(n * up / down): all that begin before
        the run ends.

    Raises
    ------
    StepError
        If the new rate is higher, or up or down exceeds 1000.
    """
    if rate_hz == signal.rate_hz:
        return signal
    block = _block_filter(signal.rate_hz, rate_hz)
    ratio = rate_hz / signal.rate_hz
    runs = _resampled_runs(signal.runs, ratio)
    samples = np.empty((len(signal.channels), runs[-1].stop))
    for old, new in zip(signal.runs, runs, strict=True):
        for source, target in zip(signal.samples, samples, strict=True):
            _filter_run(source[old.first : old.stop], block, target[new.first : new.stop])
    return Signal(samples=samples, rate_hz=rate_hz, channels=signal.channels, runs=runs)


@lru_cache(maxsize=32)
def anti_alias(rate_hz: Fraction, target_hz: Fraction) -> AntiAlias:
    """Design the anti-alias filter from one rate to a lower one, and measure what it does.

    A sinc with its half-gain point at the new Nyquist frequency under a Kaiser window [1]_.

    Parameters
    ----------
    rate_hz, target_hz : Fraction
        Old and new sampling rate.

    Returns
    -------
    AntiAlias
        Its ripple is below 0.01 dB and its attenuation above 80 dB, as measured.

    Raises
    ------
    StepError
        If the new rate is not lower, if up or down exceeds 1000, or if the taps miss what is promised.
    """
    ratio = _checked_ratio(rate_hz, target_hz)
    up, down = ratio.numerator, ratio.denominator
    taps = _taps(up, down)
    ripple_db, attenuation_db = _measured_response(taps, up, down)
    if ripple_db >= RIPPLE_LIMIT_DB or attenuation_db <= ATTENUATION_LIMIT_DB:
        raise StepError(
            f"resample: the anti-alias filter from {rate_hz} to {target_hz} Hz has {ripple_db:.4f} dB of "
            f"ripple and {attenuation_db:.1f} dB of attenuation; allowed: below {RIPPLE_LIMIT_DB} and above "
            f"{ATTENUATION_LIMIT_DB}. Choose a simpler ratio of the two rates."
        )
    nyquist_hz = float(target_hz) / 2
    return AntiAlias(
        up, down, taps, _PASS_SHARE * nyquist_hz, _STOP_SHARE * nyquist_hz, ripple_db, attenuation_db
    )


def _checked_ratio(rate_hz: Fraction, target_hz: Fraction) -> Fraction:
    """Return target / rate, or refuse it with the nearest rates that are allowed."""
    if not 0 < target_hz < rate_hz:
        raise StepError(
            f"resample: found a new rate of {_hz(target_hz)} for a signal at {_hz(rate_hz)}; allowed: above "
            "0, up to the rate of the signal. Upsampling adds no information: leave the rate as it is."
        )
    ratio = target_hz / rate_hz
    if max(ratio.numerator, ratio.denominator) > LARGEST_FACTOR:
        near = {ratio.limit_denominator(limit) for limit in (100, LARGEST_FACTOR)} - {Fraction(0)}
        choices = " or ".join(f"{_hz(rate_hz * simple)} ({simple} of the rate)" for simple in sorted(near))
        raise StepError(
            f"resample: {_hz(target_hz)} is {ratio} of the signal's {_hz(rate_hz)}; allowed: a ratio of "
            f"whole numbers up to {LARGEST_FACTOR}. Nearest simple rates: {choices or 'none'}."
        )
    return ratio


def _hz(rate_hz: Fraction) -> str:
    """Write a rate so that it can be copied into a study: as a decimal, and exactly if that is not exact."""
    decimal = f"{float(rate_hz):.10g}"
    return f"{decimal} Hz" if Fraction(decimal) == rate_hz else f"{decimal} Hz ({rate_hz})"


def _taps(up: int, down: int) -> NDArray[np.float64]:
    """Kaiser-windowed sinc at `up` times the old rate; the sum of each of its `up` phases is exactly 1."""
    # The new Nyquist frequency is 1 / (2 down) cycles per up-sampled sample.
    transition = 2 * np.pi * (_STOP_SHARE - _PASS_SHARE) / (2 * down)
    half = math.ceil(
        (_DESIGN_ATTENUATION_DB - 7.95) / (2.285 * transition) / 2
    )  # Kaiser's length, [2]_ eq. 7.76
    beta = 0.1102 * (_DESIGN_ATTENUATION_DB - 8.7)  # [2]_ eq. 7.75, above 50 dB
    taps = np.sinc(np.arange(-half, half + 1) / down) * np.kaiser(2 * half + 1, beta)
    for phase in range(up):
        taps[phase::up] /= taps[phase::up].sum()
    taps.flags.writeable = False
    return taps


def _measured_response(taps: NDArray[np.float64], up: int, down: int) -> tuple[float, float]:
    """Return pass-band ripple and stop-band attenuation in dB, on a grid that holds both edges."""
    per_nyquist = 480  # points up to the new Nyquist frequency: some 18 times finer than the filter resolves
    gain = np.abs(np.fft.rfft(taps, 2 * down * per_nyquist)) / up
    passed = gain[: round(_PASS_SHARE * per_nyquist) + 1]
    stopped = gain[round(_STOP_SHARE * per_nyquist) :]
    return float(np.abs(20 * np.log10(passed)).max()), float(-20 * np.log10(stopped.max()))


@lru_cache(maxsize=8)
def _block_filter(rate_hz: Fraction, target_hz: Fraction) -> _BlockFilter:
    """Lay the taps out as a Toeplitz matrix: output k sums sample n times tap k * down - n * up [2]_."""
    design = anti_alias(rate_hz, target_hz)
    up, down, half = design.up, design.down, len(design.taps) // 2
    n_outputs = up * math.ceil(_OUTPUTS_PER_BLOCK / up)
    hop = n_outputs * down // up
    lead = half // up
    width = lead + ((n_outputs - 1) * down + half) // up + 1
    position = down * np.arange(n_outputs) - up * (np.arange(width)[:, np.newaxis] - lead) + half
    inside = (position >= 0) & (position < len(design.taps))
    matrix = np.where(inside, design.taps[np.where(inside, position, 0)], 0.0)
    return _BlockFilter(matrix, hop, lead, rows=math.ceil(_SAMPLES_PER_CHUNK / hop))


def _resampled_runs(runs: tuple[Run, ...], ratio: Fraction) -> tuple[Run, ...]:
    """Return the runs after the change of rate; they begin at the same times."""
    resampled, first = [], 0
    for run in runs:
        stop = first + math.ceil(run.n_samples * ratio)
        resampled.append(Run(first, stop, run.start_s))
        first = stop
    return tuple(resampled)


def _filter_run(samples: NDArray[np.float64], block: _BlockFilter, target: NDArray[np.float64]) -> None:
    """Fill `target` with the resampled run, chunk by chunk.

    Every product has the same shape, whatever the length of the run, so that a sample's last bit does not
    depend on where the recording ends.
    """
    last, spare = np.empty((2, block.rows, block.n_outputs))
    for first in range(0, len(target), last.size):
        start = first // block.n_outputs * block.hop - block.lead
        rows = _stretch(samples, start, start + block.chunk_samples).reshape(-1, block.hop)
        outputs = target[first : first + last.size]
        if len(outputs) == last.size:
            _multiply(rows, block, outputs.reshape(last.shape), spare)
        else:
            _multiply(rows, block, last, spare)
            outputs[:] = last.reshape(-1)[: len(outputs)]


def _multiply(
    rows: NDArray[np.float64],
    block: _BlockFilter,
    outputs: NDArray[np.float64],
    spare: NDArray[np.float64],
) -> None:
    """Fill `outputs` with overlapping rows times the matrix, one hop of its height at a time.

    Rows that overlap in memory are no matrix to BLAS; neighbouring whole hops are.
    """
    np.matmul(rows[: block.rows], block.matrix[: block.hop], out=outputs)
    for ahead, top in enumerate(range(block.hop, block.matrix.shape[0], block.hop), start=1):
        part = block.matrix[top : top + block.hop]
        np.matmul(rows[ahead : ahead + block.rows, : part.shape[0]], part, out=spare)
        outputs += spare


def _stretch(samples: NDArray[np.float64], start: int, stop: int) -> NDArray[np.float64]:
    """Return samples start .. stop of a run, extended where they lie beyond its ends."""
    n = len(samples)
    if start >= 0 and stop <= n:
        return samples[start:stop]
    before = _beyond(samples[::-1], max(0, -start))[::-1]
    after = _beyond(samples, stop - max(n, start))
    return np.concatenate([before, samples[max(0, start) : stop], after])


def _beyond(samples: NDArray[np.float64], count: int) -> NDArray[np.float64]:
    """Return `count` samples after the last one, by odd extension, turned at both ends as often as needed."""
    n = len(samples)
    if n == 1:
        return np.full(max(0, count), samples[0])
    turn, place = np.divmod(np.arange(n, n + count), 2 * (n - 1))
    mirrored = 2 * samples[-1] - samples[np.minimum(2 * (n - 1) - place, n - 1)]
    once = np.where(place < n, samples[np.minimum(place, n - 1)], mirrored)
    return np.asarray(once + turn * (2 * (samples[-1] - samples[0])))
