"""Butterworth filters as cascades of second-order sections, run by run.

References
----------
.. [1] Butterworth S. (1930) On the theory of filter amplifiers. Wireless Engineer 7, 536-541.
.. [2] Gustafsson F. (1996) Determining the initial states in forward-backward filtering.
   IEEE Trans. Signal Process. 44, 988-992 (forward-backward filtering squares the gain).
.. [3] Orfanidis S.J. (1996) Introduction to Signal Processing, Prentice Hall, section 6.3
   (time constant of the slowest pole: ln eps / ln rho samples).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from itertools import groupby
from typing import TYPE_CHECKING, Literal

import numpy as np

from bandcairn.errors import StepError
from bandcairn.signal import Signal

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

FilterType = Literal["lowpass", "highpass", "bandpass", "bandstop"]
Phase = Literal["zero", "causal"]

# Nearer to Nyquist than this the bilinear transform has squeezed the transition into nothing.
LARGEST_SHARE_OF_NYQUIST = 0.98
_HALF_POWER = math.sqrt(0.5)


@dataclass(frozen=True, slots=True, kw_only=True)
class FilterStage:
    """One filter of a chain.

    Attributes
    ----------
    type : {"lowpass", "highpass", "bandpass", "bandstop"}
        What it does.
    cutoff_hz : tuple of float
        One -3.01 dB point of a single pass for lowpass and highpass, two increasing ones for the others.
    order : int
        Order of the low-pass prototype: a band-pass or band-stop has twice as many poles.
    phase : {"zero", "causal"}
        Forward and backward (the gain is squared, the phase zero), or forward only.
    design : {"butterworth"}
        Family of the prototype.
    """

    type: FilterType
    cutoff_hz: tuple[float, ...]
    order: int
    phase: Phase = "zero"
    design: Literal["butterworth"] = "butterworth"

    @property
    def passes(self) -> int:
        """How often the stage runs over the samples."""
        return 2 if self.phase == "zero" else 1


@dataclass(frozen=True, slots=True)
class EffectiveCutoff:
    """Where one edge of a stage, as applied, falls to half power.

    Attributes
    ----------
    stage : int
        Index of the stage.
    requested_hz : float
        The cut-off as declared: half power of a single pass.
    effective_hz : float
        Half power (-3.01 dB) of the applied response, both passes of a zero-phase stage counted.
    """

    stage: int
    requested_hz: float
    effective_hz: float


def sections(stage: FilterStage, rate_hz: float) -> NDArray[np.float64]:
    """Design a stage at a sampling rate: Butterworth's prototype [1]_ by the pre-warped bilinear transform.

    Parameters
    ----------
    stage : FilterStage
        What to design.
    rate_hz : float
        Sampling rate.

    Returns
    -------
    ndarray, shape (n_sections, 6)
        Second-order sections b0 b1 b2 a0 a1 a2 with a0 = 1. A single polynomial of this order would lose its
        poles to rounding: 0.5-4 Hz of order 4 at 2048 Hz has one at radius 1.017 that way.

    Raises
    ------
    StepError
        If a cut-off is not above 0 and below 0.98 of Nyquist, their number or order is wrong, the design is
        not available, or a pole does not lie inside the unit circle.
    """
    from scipy.signal import butter

    _check_stage(stage, rate_hz)
    cutoff_hz = stage.cutoff_hz if len(stage.cutoff_hz) == 2 else stage.cutoff_hz[0]
    sos = np.asarray(butter(stage.order, cutoff_hz, btype=stage.type, fs=rate_hz, output="sos"), np.float64)
    radius = _slowest_radius(sos)
    if not radius < 1:
        raise StepError(
            f"filter: {_named(stage)} has a pole at radius {radius:.12g} at {rate_hz:g} Hz and is unstable; "
            "allowed: below 1. Choose a lower order, a higher cut-off, or resample to a lower rate first."
        )
    return sos


def apply_stages(signal: Signal, stages: tuple[FilterStage, ...]) -> Signal:
    """Filter a signal, every gap-free run by itself.

    Neighbouring stages of the same phase run as one cascade: zero-phase ones share one forward and one
    backward pass, which halves the passes. The response is the same, for filters commute: the order of the
    stages tells only where the phase changes, and there only near the edges of a run.

    A zero-phase cascade extends each run at both ends by its mirror image turned about the end sample, as far
    as the slowest pole needs to decay to 1 % [3]_. Every pass begins in the state that the first sample would
    have left had it lasted for ever: neither an offset nor the step to the first sample rings.

    Parameters
    ----------
    signal : Signal
        Not modified.
    stages : tuple of FilterStage
        In the order of their use; none gives back the signal itself.

    Returns
    -------
    Signal
        Same rate, channels and runs.

    Raises
    ------
    StepError
        If samples are not finite, a run is not longer than a zero-phase cascade needs to settle, or a stage
        cannot be designed.
    """
    if not stages:
        return signal
    if not np.isfinite(signal.samples).all():
        raise StepError("filter: found samples that are not finite; one would spread over its whole run.")
    rate_hz = float(signal.rate_hz)
    cascades = _cascades(stages, rate_hz)
    samples = np.empty_like(signal.samples)
    for run in signal.runs:
        for cascade in cascades:
            _check_length(run.n_samples, cascade, rate_hz)
        for source, target in zip(signal.samples, samples, strict=True):
            target[run.first : run.stop] = _filtered(source[run.first : run.stop], cascades)
    return Signal(samples=samples, rate_hz=signal.rate_hz, channels=signal.channels, runs=signal.runs)


def response(
    stages: tuple[FilterStage, ...], rate_hz: float, frequencies_hz: ArrayLike
) -> NDArray[np.float64]:
    """Return the amplitude gain of a chain as applied: |H|^2 of zero-phase stages, |H| of causal ones.

    Parameters
    ----------
    stages : tuple of FilterStage
        The chain; none has gain 1.
    rate_hz : float
        Sampling rate.
    frequencies_hz : array_like
        Where to evaluate it, 0 up to Nyquist.

    Returns
    -------
    ndarray, same shape as frequencies_hz
        Amplitude out over amplitude in.
    """
    frequencies = np.asarray(frequencies_hz, np.float64)
    gain = np.ones(frequencies.shape)
    for stage in stages:
        gain *= _gain(sections(stage, rate_hz), rate_hz, frequencies) ** stage.passes
    return gain


@lru_cache(maxsize=64)
def effective_cutoffs(stages: tuple[FilterStage, ...], rate_hz: float) -> tuple[EffectiveCutoff, ...]:
    """Find the -3.01 dB points of each stage as applied.

    A second pass squares the gain [2]_, so half power moves into the pass-band: 40 Hz of an order 2 low-pass
    becomes about 32 Hz. Each stage is judged by itself; `response` gives the whole chain.

    Parameters
    ----------
    stages : tuple of FilterStage
        The chain.
    rate_hz : float
        Sampling rate.

    Returns
    -------
    tuple of EffectiveCutoff
        In the order of the stages and of their cut-offs.
    """
    return tuple(
        EffectiveCutoff(index, cutoff_hz, _half_power_hz(stage, rate_hz, passed_hz, stopped_hz))
        for index, stage in enumerate(stages)
        for cutoff_hz, (passed_hz, stopped_hz) in zip(stage.cutoff_hz, _brackets(stage, rate_hz), strict=True)
    )


@dataclass(frozen=True, slots=True)
class _Cascade:
    """Sections that run over the samples together.

    `settling` is the number of samples in which the slowest pole decays to 1 %; `rest` the state, shape
    (n_sections, 2), that a constant 1 leaves behind.
    """

    sos: NDArray[np.float64]
    rest: NDArray[np.float64]
    phase: Phase
    settling: int


@lru_cache(maxsize=64)
def _cascades(stages: tuple[FilterStage, ...], rate_hz: float) -> tuple[_Cascade, ...]:
    """Join neighbouring stages of the same phase."""
    groups = groupby(stages, key=lambda stage: stage.phase)
    return tuple(
        _cascade(np.concatenate([sections(stage, rate_hz) for stage in group]), phase)
        for phase, group in groups
    )


def _cascade(sos: NDArray[np.float64], phase: Phase) -> _Cascade:
    from scipy.signal import sosfilt_zi

    # A pole may lie at 0 itself (order 1 at a quarter of the rate): it has settled after one sample.
    settling = math.ceil(math.log(0.01) / math.log(max(_slowest_radius(sos), 1e-9)))
    return _Cascade(sos, np.asarray(sosfilt_zi(sos), np.float64), phase, settling)


def _filtered(samples: NDArray[np.float64], cascades: tuple[_Cascade, ...]) -> NDArray[np.float64]:
    """Return one channel of one run behind all cascades."""
    for cascade in cascades:
        pad = cascade.settling if cascade.phase == "zero" else 0
        extended = _extended(samples, pad)
        _pass(extended, cascade)
        if cascade.phase == "zero":
            _pass(extended[::-1], cascade)
        samples = extended[pad : len(extended) - pad]
    return samples


def _pass(samples: NDArray[np.float64], cascade: _Cascade) -> None:
    """Run once over the samples, in place, from rest at the first one."""
    from scipy.signal import sosfilt

    samples[:], _ = sosfilt(cascade.sos, samples, zi=cascade.rest * samples[0])


def _extended(samples: NDArray[np.float64], pad: int) -> NDArray[np.float64]:
    """Return a copy that goes on oddly for `pad` samples beyond both ends."""
    before = 2 * samples[0] - samples[pad:0:-1]
    after = 2 * samples[-1] - samples[-2 : -pad - 2 : -1]
    return np.concatenate([before, samples, after])


def _check_length(n_samples: int, cascade: _Cascade, rate_hz: float) -> None:
    if cascade.phase == "zero" and n_samples <= cascade.settling:
        raise StepError(
            f"filter: found a gap-free run of {n_samples / rate_hz:.3f} s; needed: more than "
            f"{cascade.settling / rate_hz:.3f} s, in which this filter settles. Raise the lowest cut-off, "
            "lower the order, or leave the run out."
        )


def _check_stage(stage: FilterStage, rate_hz: float) -> None:
    """Refuse a stage that cannot be designed as it is declared."""
    wanted = 2 if stage.type in {"bandpass", "bandstop"} else 1
    increasing = all(low < high for low, high in zip(stage.cutoff_hz, stage.cutoff_hz[1:], strict=False))
    if len(stage.cutoff_hz) != wanted or not increasing or stage.order < 1:
        cutoffs = "one cut-off" if wanted == 1 else "two increasing cut-offs"
        raise StepError(f"filter: found {_named(stage)}; allowed: {cutoffs} and an order of at least 1.")
    if stage.design != "butterworth":
        raise StepError(
            f"filter: found design {stage.design!r}, which is not available yet; allowed: butterworth."
        )
    limit_hz = LARGEST_SHARE_OF_NYQUIST * rate_hz / 2
    if not all(0 < cutoff_hz < limit_hz for cutoff_hz in stage.cutoff_hz):
        raise StepError(
            f"filter: found {_named(stage)} for a signal at {rate_hz:g} Hz; allowed: cut-offs above 0 and "
            f"below {limit_hz:g} Hz (0.98 of Nyquist). Lower the cut-off or keep a higher rate."
        )


def _named(stage: FilterStage) -> str:
    cutoffs = " and ".join(f"{cutoff_hz:g}" for cutoff_hz in stage.cutoff_hz)
    return f"{stage.type} at {cutoffs} Hz of order {stage.order}"


def _slowest_radius(sos: NDArray[np.float64]) -> float:
    """Return the largest distance of a pole from 0."""
    return max(float(np.abs(np.roots(section[3:])).max()) for section in sos)


def _gain(
    sos: NDArray[np.float64], rate_hz: float, frequencies_hz: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return |H| of one pass."""
    angle = 2 * np.pi * frequencies_hz / rate_hz
    gain = np.ones(angle.shape)
    for section in sos:
        gain *= np.sqrt(_squared(section[:3], angle) / _squared(section[3:], angle))
    return gain


def _squared(polynomial: NDArray[np.float64], angle: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return |c0 + c1 z + c2 z^2|^2 on the unit circle.

    Written about z = 1, where the zeros of a high-pass lie: near 0 Hz plain powers of z cancel to nothing.
    """
    c0, c1, c2 = polynomial
    in_phase = (c0 + c1 + c2) - 2 * (c0 + c2) * np.sin(angle / 2) ** 2
    return np.asarray(in_phase**2 + ((c0 - c2) * np.sin(angle)) ** 2)


def _brackets(stage: FilterStage, rate_hz: float) -> tuple[tuple[float, float], ...]:
    """Return a frequency that passes and one that is stopped for each cut-off; the gain falls between."""
    nyquist_hz = rate_hz / 2
    if stage.type == "lowpass":
        return ((0.0, nyquist_hz),)
    if stage.type == "highpass":
        return ((nyquist_hz, 0.0),)
    # The centre of a band lies midway on the pre-warped, logarithmic axis.
    low, high = (math.tan(math.pi * cutoff_hz / rate_hz) for cutoff_hz in stage.cutoff_hz)
    centre_hz = math.atan(math.sqrt(low * high)) * rate_hz / math.pi
    if stage.type == "bandpass":
        return ((centre_hz, 0.0), (centre_hz, nyquist_hz))
    return ((0.0, centre_hz), (nyquist_hz, centre_hz))


def _half_power_hz(stage: FilterStage, rate_hz: float, passed_hz: float, stopped_hz: float) -> float:
    """Halve the bracket until its ends are neighbours."""
    sos = sections(stage, rate_hz)
    while True:
        middle_hz = (passed_hz + stopped_hz) / 2
        if middle_hz in (passed_hz, stopped_hz):
            return middle_hz
        if _gain(sos, rate_hz, np.array(middle_hz)) ** stage.passes >= _HALF_POWER:
            passed_hz = middle_hz
        else:
            stopped_hz = middle_hz
