"""Filters as cascades of second-order sections, or as symmetric taps, run by run.

References
----------
.. [1] Gustafsson F. (1996) Determining the initial states in forward-backward filtering.
   IEEE Trans. Signal Process. 44, 988-992 (forward-backward filtering squares the gain).
.. [2] Orfanidis S.J. (1996) Introduction to Signal Processing, Prentice Hall, section 6.3
   (time constant of the slowest pole: ln eps / ln rho samples).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from itertools import groupby
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.errors import StepError
from bandcairn.signal import Run, Signal
from bandcairn.steps.filter_design import sections, settling_samples, taps
from bandcairn.steps.filter_response import EffectiveCutoff, effective_cutoffs, response
from bandcairn.steps.filter_stage import Design, FilterStage, FilterType, Phase

if TYPE_CHECKING:
    from numpy.typing import NDArray

__all__ = [
    "Design",
    "EffectiveCutoff",
    "FilterStage",
    "FilterType",
    "Phase",
    "ShortRun",
    "apply_stages",
    "effective_cutoffs",
    "response",
    "sections",
    "short_runs",
    "taps",
]


@dataclass(frozen=True, slots=True)
class ShortRun:
    """A run that is too short for a chain of zero phase to settle in.

    Attributes
    ----------
    run : Run
        The run.
    length_s : float
        Its length.
    needed_s : float
        What the chain needs: more than this.
    """

    run: Run
    length_s: float
    needed_s: float


def apply_stages(signal: Signal, stages: tuple[FilterStage, ...]) -> Signal:
    """Filter a signal, every gap-free run by itself.

    Neighbouring stages of the same phase run as one cascade: zero-phase ones share one forward and one
    backward pass, which halves the passes. The response is the same, for filters commute: the order of the
    stages tells only where the phase changes, and there only near the edges of a run. A fir stage runs by itself.

    A zero-phase cascade extends each run at both ends by its mirror image turned about the end sample, as far
    as the slowest pole needs to decay to 1 % [2]_, or as the taps reach. Every pass begins in the state that the
    first sample would have left had it lasted for ever [1]_: neither an offset nor the step to the first sample
    rings.

    Parameters
    ----------
    signal : Signal
        Not modified.
    stages : tuple of FilterStage
        In the order of their use; none gives back the signal itself.

    Returns
    -------
    Signal
        Same rate and channels. Runs too short to settle in are left out where others are long enough; `short_runs`
        lists them.

    Raises
    ------
    StepError
        If samples are not finite, no run is longer than the chain needs to settle, or a stage cannot be designed.
    """
    if not stages:
        return signal
    if not np.isfinite(signal.samples).all():
        raise StepError("filter: found samples that are not finite; one would spread over its whole run.")
    kernels = _kernels(stages, float(signal.rate_hz))
    short = {found.run for found in short_runs(signal, stages)}
    kept = tuple(run for run in signal.runs if run not in short)
    runs = _retiled(kept) if short else signal.runs
    samples = np.empty((len(signal.channels), runs[-1].stop))
    for old, new in zip(kept, runs, strict=True):
        for source, target in zip(signal.samples, samples, strict=True):
            target[new.first : new.stop] = _filtered(source[old.first : old.stop], kernels)
    return Signal(samples=samples, rate_hz=signal.rate_hz, channels=signal.channels, runs=runs)


def short_runs(signal: Signal, stages: tuple[FilterStage, ...]) -> tuple[ShortRun, ...]:
    """Find the runs that are too short for a chain to settle in.

    Parameters
    ----------
    signal : Signal
        The signal.
    stages : tuple of FilterStage
        The chain; causal stages take any length.

    Returns
    -------
    tuple of ShortRun
        In the order of the runs.

    Raises
    ------
    StepError
        If every run is too short, or a stage cannot be designed.
    """
    rate_hz = float(signal.rate_hz)
    settling = max((kernel.settling for kernel in _kernels(stages, rate_hz)), default=0)
    short = tuple(
        ShortRun(run, run.n_samples / rate_hz, settling / rate_hz)
        for run in signal.runs
        if run.n_samples <= settling
    )
    if len(short) == len(signal.runs):
        longest_s = max(found.length_s for found in short)
        runs = "a gap-free run" if len(short) == 1 else f"{len(short)} gap-free runs, the longest"
        raise StepError(
            f"filter: found {runs} of {longest_s:.3f} s; needed: more than {short[0].needed_s:.3f} s, in which "
            "this filter settles. Raise the lowest cut-off, lower the order, widen the transition, or leave the "
            "recording out."
        )
    return short


@dataclass(frozen=True, slots=True)
class _Cascade:
    """Sections that run over the samples together.

    `settling` is the number of samples by which a run is extended: of zero phase, those in which the slowest
    pole decays to 1 %, else none. `rest` is the state, shape (n_sections, 2), that a constant 1 leaves behind.
    """

    sos: NDArray[np.float64]
    rest: NDArray[np.float64]
    phase: Phase
    settling: int

    def run(self, samples: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return one channel of one run behind the sections."""
        extended = _extended(samples, self.settling)
        self._pass(extended)
        if self.phase == "zero":
            self._pass(extended[::-1])
        return extended[self.settling : len(extended) - self.settling]

    def _pass(self, samples: NDArray[np.float64]) -> None:
        """Run once over the samples, in place, from rest at the first one."""
        from scipy.signal import sosfilt

        samples[:], _ = sosfilt(self.sos, samples, zi=self.rest * samples[0])


@dataclass(frozen=True, slots=True)
class _Taps:
    """Symmetric taps that run over the samples once; `settling` as above, half their length for phase zero."""

    taps: NDArray[np.float64]
    phase: Phase
    settling: int

    def run(self, samples: NDArray[np.float64]) -> NDArray[np.float64]:
        """Return one channel of one run behind the taps."""
        from scipy.signal import oaconvolve

        if self.phase == "zero":
            extended = _extended(samples, self.settling)
        else:
            extended = np.concatenate([np.full(len(self.taps) - 1, samples[0]), samples])
        return np.asarray(oaconvolve(extended, self.taps, mode="valid"))


@lru_cache(maxsize=64)
def _kernels(stages: tuple[FilterStage, ...], rate_hz: float) -> tuple[_Cascade | _Taps, ...]:
    """Join neighbouring stages of the same phase; fir stages stay by themselves."""
    kernels: list[_Cascade | _Taps] = []
    for (phase, is_fir), group in groupby(stages, key=lambda stage: (stage.phase, stage.design == "fir")):
        if is_fir:
            kernels += [_taps(stage, rate_hz) for stage in group]
        else:
            kernels.append(_cascade(np.concatenate([sections(stage, rate_hz) for stage in group]), phase))
    return tuple(kernels)


def _cascade(sos: NDArray[np.float64], phase: Phase) -> _Cascade:
    from scipy.signal import sosfilt_zi

    settling = settling_samples(sos) if phase == "zero" else 0
    return _Cascade(sos, np.asarray(sosfilt_zi(sos), np.float64), phase, settling)


def _taps(stage: FilterStage, rate_hz: float) -> _Taps:
    impulse = taps(stage, rate_hz)
    return _Taps(impulse, stage.phase, len(impulse) // 2 if stage.phase == "zero" else 0)


def _filtered(samples: NDArray[np.float64], kernels: tuple[_Cascade | _Taps, ...]) -> NDArray[np.float64]:
    """Return one channel of one run behind all kernels."""
    for kernel in kernels:
        samples = kernel.run(samples)
    return samples


def _extended(samples: NDArray[np.float64], pad: int) -> NDArray[np.float64]:
    """Return a copy that goes on oddly for `pad` samples beyond both ends."""
    before = 2 * samples[0] - samples[pad:0:-1]
    after = 2 * samples[-1] - samples[-2 : -pad - 2 : -1]
    return np.concatenate([before, samples, after])


def _retiled(runs: tuple[Run, ...]) -> tuple[Run, ...]:
    """Return runs that follow one another without the samples between them; they begin at the same times."""
    tiled, first = [], 0
    for run in runs:
        tiled.append(Run(first, first + run.n_samples, run.start_s))
        first += run.n_samples
    return tuple(tiled)
