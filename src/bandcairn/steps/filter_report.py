"""What is kept of a filter beside the filtered samples: its design in words and numbers, and its response."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.steps.filter_design import (
    largest_radius,
    n_taps,
    notch_centres_hz,
    sections,
    settling_samples,
    taps,
)
from bandcairn.steps.filter_response import effective_cutoffs, group_delay_s, response

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bandcairn.steps.filter_response import EffectiveCutoff
    from bandcairn.steps.filter_stage import FilterStage

CURVE_POINTS = 512
CURVE_FROM_HZ = 0.1
# A zero of the response has no decibels, and what rounding leaves of it means nothing.
LOWEST_GAIN_DB = -200.0
# Both, wherever the study was recorded: what is kept of a filter is the same for the same filter.
MAINS_HZ = (50.0, 60.0)

_FAMILIES = {
    "butterworth": "Butterworth",
    "chebyshev1": "Chebyshev type I",
    "chebyshev2": "Chebyshev type II",
    "elliptic": "elliptic",
    "bessel": "Bessel",
    "fir": "linear-phase FIR",
}
_TYPES = {"lowpass": "low-pass", "highpass": "high-pass", "bandpass": "band-pass", "bandstop": "band-stop"}


@dataclass(frozen=True, slots=True)
class Gain:
    """The applied gain of a stage at one frequency."""

    frequency_hz: float
    gain_db: float


@dataclass(frozen=True, slots=True)
class StageReport:
    """One stage, as designed and as applied.

    Attributes
    ----------
    words : str
        The design as a phrase.
    sections : ndarray, shape (n_sections, 6)
        Second-order sections b0 b1 b2 a0 a1 a2; without rows for fir.
    taps : ndarray, shape (n_taps,)
        Impulse response of fir; empty for the others.
    cutoffs : tuple of EffectiveCutoff
        Requested cut-offs, and the -3.01 dB points of one pass and as applied.
    at_cutoffs, at_mains : tuple of Gain
        Applied gain at the requested cut-offs, and at 50 and 60 Hz as far as the rate holds them.
    largest_pole_radius : float
        0 for fir.
    settling_s : float
        Time in which the slowest pole decays to 1 %; for fir, the reach of its taps to either side of zero
        delay (phase zero) or backward (causal).
    delay : Delay or None
        None for phase zero, which has none.
    """

    words: str
    sections: NDArray[np.float64]
    taps: NDArray[np.float64]
    cutoffs: tuple[EffectiveCutoff, ...]
    at_cutoffs: tuple[Gain, ...]
    at_mains: tuple[Gain, ...]
    largest_pole_radius: float
    settling_s: float
    delay: Delay | None


@dataclass(frozen=True, slots=True)
class Delay:
    """The group delay of a causal stage in the middle of its pass-band."""

    frequency_hz: float
    delay_s: float


@dataclass(frozen=True, slots=True)
class Curve:
    """The applied gain of a whole chain on a logarithmic grid, both of shape (512,)."""

    frequency_hz: NDArray[np.float64]
    gain_db: NDArray[np.float64]


@lru_cache(maxsize=64)
def report(stages: tuple[FilterStage, ...], rate_hz: float) -> tuple[StageReport, ...]:
    """Report every stage of a chain.

    Parameters
    ----------
    stages : tuple of FilterStage
        The chain.
    rate_hz : float
        Sampling rate.

    Returns
    -------
    tuple of StageReport
        In the order of the stages.

    Raises
    ------
    StepError
        If a stage cannot be designed at this rate.
    """
    cutoffs = effective_cutoffs(stages, rate_hz)
    return tuple(
        _report(stage, tuple(cutoff for cutoff in cutoffs if cutoff.stage == index), rate_hz)
        for index, stage in enumerate(stages)
    )


@lru_cache(maxsize=64)
def curve(stages: tuple[FilterStage, ...], rate_hz: float) -> Curve:
    """Return the response of a chain as a curve to be drawn.

    The grid has 512 points, evenly spaced on a logarithmic axis from 0.1 Hz, or a tenth of the lowest cut-off if
    that is lower, up to Nyquist. Frequencies are rounded to six digits before the gain is taken, gains to
    0.0001 dB.

    Parameters
    ----------
    stages : tuple of FilterStage
        The chain.
    rate_hz : float
        Sampling rate.

    Returns
    -------
    Curve
        Gains no lower than -200 dB.
    """
    lowest_hz = min(
        [cutoff.requested_hz / 10 for cutoff in effective_cutoffs(stages, rate_hz)], default=math.inf
    )
    grid = np.geomspace(min(CURVE_FROM_HZ, lowest_hz), rate_hz / 2, CURVE_POINTS)
    frequency_hz = np.array([float(f"{value:.6g}") for value in grid])
    return Curve(frequency_hz, _decibel(response(stages, rate_hz, frequency_hz)))


def stop_bands(stages: tuple[FilterStage, ...], rate_hz: float) -> tuple[tuple[float, float], ...]:
    """Return what the band-stops and notches of a chain stop: between their applied -3.01 dB points, in Hz."""
    edges = [
        cutoff.effective_hz
        for cutoff in effective_cutoffs(stages, rate_hz)
        if stages[cutoff.stage].type in ("bandstop", "notch")
    ]
    return tuple(sorted(zip(edges[::2], edges[1::2], strict=True)))


def describe(stage: FilterStage, rate_hz: float) -> str:
    """Return the design of a stage as a phrase."""
    if stage.type == "notch":
        centres = ", ".join(f"{centre_hz:g}" for centre_hz in notch_centres_hz(stage, rate_hz))
        what = f"Butterworth notch of order {stage.order}, {stage.width_hz:g} Hz wide as applied, at {centres} Hz"
        return f"{what}, {_direction(stage, rate_hz)}"
    if stage.design == "fir":
        window = stage.window or f"Kaiser ({stage.attenuation_db:g} dB)"
        size = f" of {n_taps(stage, rate_hz)} taps, {window} window, transition {stage.transition_hz:g} Hz,"
    else:
        size = f" of order {stage.order}"
        size += "" if stage.ripple_db is None else f", ripple {stage.ripple_db:g} dB"
        size += "" if stage.attenuation_db is None else f", stop-band {stage.attenuation_db:g} dB"
    edges = " and ".join(f"{edge_hz:g}" for edge_hz in stage.cutoff_hz)
    moved = ", moved so that the applied half power lies there" if stage.corrected else ""
    what = f"{_FAMILIES[stage.design]} {_TYPES[stage.type]}{size} at {edges} Hz{moved}"
    return f"{what}, {_direction(stage, rate_hz)}"


def _direction(stage: FilterStage, rate_hz: float) -> str:
    if stage.design != "fir":
        return "forward and backward" if stage.phase == "zero" else "forward only"
    delay_s = (n_taps(stage, rate_hz) - 1) / 2 / rate_hz
    told = "taken off" if stage.phase == "zero" else "left"
    return f"one pass, its delay of {delay_s:g} s {told}"


def _report(stage: FilterStage, cutoffs: tuple[EffectiveCutoff, ...], rate_hz: float) -> StageReport:
    is_fir = stage.design == "fir"
    sos = np.empty((0, 6)) if is_fir else sections(stage, rate_hz)
    impulse = taps(stage, rate_hz) if is_fir else np.empty(0)
    reach = len(impulse) // 2 if stage.phase == "zero" else len(impulse) - 1
    middle_hz = _mid_band_hz(stage, rate_hz)
    delay = None if stage.phase == "zero" else Delay(middle_hz, group_delay_s(stage, rate_hz, middle_hz))
    return StageReport(
        words=describe(stage, rate_hz),
        sections=sos,
        taps=impulse,
        cutoffs=cutoffs,
        at_cutoffs=_gains(stage, rate_hz, [cutoff.requested_hz for cutoff in cutoffs]),
        at_mains=_gains(stage, rate_hz, [mains_hz for mains_hz in MAINS_HZ if mains_hz < rate_hz / 2]),
        largest_pole_radius=0.0 if is_fir else largest_radius(sos),
        settling_s=(reach if is_fir else settling_samples(sos)) / rate_hz,
        delay=delay,
    )


def _mid_band_hz(stage: FilterStage, rate_hz: float) -> float:
    """Return a frequency in the middle of what passes; below the stopped band where two parts pass."""
    if stage.type == "bandpass":
        return math.sqrt(stage.cutoff_hz[0] * stage.cutoff_hz[1])
    if stage.type == "highpass":
        return math.sqrt(stage.cutoff_hz[0] * rate_hz / 2)
    return (stage.mains_hz or 0.0) / 2 if stage.type == "notch" else stage.cutoff_hz[0] / 2


def _gains(stage: FilterStage, rate_hz: float, frequencies_hz: list[float]) -> tuple[Gain, ...]:
    gains_db = _decibel(response((stage,), rate_hz, frequencies_hz))
    return tuple(Gain(f, g) for f, g in zip(frequencies_hz, gains_db.tolist(), strict=True))


def _decibel(gain: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return a gain in dB, to 0.0001 dB: further digits would tell processors apart, not filters."""
    return np.round(20 * np.log10(np.maximum(gain, 10 ** (LOWEST_GAIN_DB / 20))), 4) + 0.0
