"""One stage of a filter chain: what is declared of it, and whether that can be designed."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from bandcairn.errors import StepError

FilterType = Literal["lowpass", "highpass", "bandpass", "bandstop", "notch"]
Phase = Literal["zero", "causal"]
Design = Literal["butterworth", "chebyshev1", "chebyshev2", "elliptic", "bessel", "fir"]
TapWindow = Literal["hann", "hamming", "blackman"]

# Nearer to Nyquist than this the bilinear transform has squeezed the transition into nothing.
LARGEST_SHARE_OF_NYQUIST = 0.98
# A harmonic of the mains above this share of Nyquist is left alone: its band-stop would not fit below Nyquist.
HARMONICS_SHARE_OF_NYQUIST = 0.95
# Ripple beyond this many decibels, all passes counted, would put several -3.01 dB points into the pass-band.
LARGEST_RIPPLE_DB = 3.0

_OPTIONS = {
    "butterworth": (),
    "bessel": (),
    "chebyshev1": ("ripple_db",),
    "chebyshev2": ("attenuation_db",),
    "elliptic": ("ripple_db", "attenuation_db"),
    "fir": ("transition_hz",),
}
# Their gain falls all the way through the cut-off, so that a shifted cut-off shifts the -3.01 dB point alone.
_MONOTONE = ("butterworth", "bessel")


@dataclass(frozen=True, slots=True, kw_only=True)
class FilterStage:
    """One filter of a chain.

    Attributes
    ----------
    type : {"lowpass", "highpass", "bandpass", "bandstop", "notch"}
        What it does; a notch stops the mains and its harmonics.
    cutoff_hz : tuple of float
        One cut-off for lowpass and highpass, two increasing ones for bandpass and bandstop, none for a notch.
        For a single pass it is the -3.01 dB point of butterworth and bessel, the end of the pass-band (at
        -`ripple_db`) of chebyshev1 and elliptic, the start of the stop-band (at -`attenuation_db`) of
        chebyshev2, and the -6 dB point, in the middle of the transition, of fir.
    order : int or None
        Order of the low-pass prototype: a band-pass or band-stop has twice as many poles. None for fir.
    phase : {"zero", "causal"}
        Forward and backward (the gain is squared, the phase zero), or forward only. fir is symmetric and runs
        once: zero takes its delay off, causal leaves it.
    design : {"butterworth", "chebyshev1", "chebyshev2", "elliptic", "bessel", "fir"}
        Family of the prototype.
    ripple_db, attenuation_db : float or None
        Of a single pass: largest loss in the pass-band of chebyshev1 and elliptic; least loss in the stop-band of
        chebyshev2, elliptic and of a fir with a Kaiser window.
    transition_hz : float or None
        Width of the transition of fir: it decides the number of taps.
    window : {"hann", "hamming", "blackman"} or None
        Window of fir; None: Kaiser's, by `attenuation_db`.
    corrected : bool
        Whether the design's cut-offs are moved so that the applied -3.01 dB points lie at `cutoff_hz`.
    width_hz : float or None
        Distance of the applied -3.01 dB points of a notch.
    harmonics : bool
        Whether a notch stops the harmonics of the mains too, below 0.95 of Nyquist.
    mains_hz : float or None
        Frequency of the mains, for a notch.
    """

    type: FilterType
    cutoff_hz: tuple[float, ...] = ()
    order: int | None = None
    phase: Phase = "zero"
    design: Design = "butterworth"
    ripple_db: float | None = None
    attenuation_db: float | None = None
    transition_hz: float | None = None
    window: TapWindow | None = None
    corrected: bool = False
    width_hz: float | None = None
    harmonics: bool = True
    mains_hz: float | None = None

    @property
    def passes(self) -> int:
        """How often the stage runs over the samples."""
        return 2 if self.phase == "zero" and self.design != "fir" else 1

    def __str__(self) -> str:
        if self.type == "notch":
            return f"notch at {self.mains_hz or 0:g} Hz of width {self.width_hz or 0:g} Hz"
        cutoffs = " and ".join(f"{cutoff_hz:g}" for cutoff_hz in self.cutoff_hz)
        order = "" if self.order is None else f" of order {self.order}"
        return f"{self.type} at {cutoffs} Hz{order}"


def check_stage(stage: FilterStage, rate_hz: float) -> None:
    """Refuse a stage that cannot be designed as it is declared.

    Parameters
    ----------
    stage : FilterStage
        The stage.
    rate_hz : float
        Sampling rate.

    Raises
    ------
    StepError
        If cut-offs, order or an option of the design are missing or out of their range.
    """
    _check_design(stage)
    if stage.type == "notch":
        _check_notch(stage, rate_hz)
        return
    _check_shape(stage)
    limit_hz = LARGEST_SHARE_OF_NYQUIST * rate_hz / 2
    if not all(0 < cutoff_hz < limit_hz for cutoff_hz in stage.cutoff_hz):
        raise StepError(
            f"filter: found {stage} for a signal at {rate_hz:g} Hz; allowed: cut-offs above 0 and "
            f"below {limit_hz:g} Hz (0.98 of Nyquist). Lower the cut-off or keep a higher rate."
        )
    if stage.design == "fir":
        _check_transition(stage, rate_hz)


def _check_design(stage: FilterStage) -> None:
    """Refuse an unknown design, or one without the options that it needs."""
    if stage.design not in _OPTIONS:
        raise StepError(f"filter: found design {stage.design!r}; allowed: {', '.join(_OPTIONS)}.")
    absent = [name for name in _OPTIONS[stage.design] if not (getattr(stage, name) or 0) > 0]
    if stage.design == "fir" and (stage.window is None) == (stage.attenuation_db is None):
        absent.append("either window or attenuation_db")
    if absent:
        raise StepError(
            f"filter: {stage.design} needs {' and '.join(absent)}, above 0. Add what is missing to the stage."
        )
    if stage.ripple_db is not None and stage.ripple_db * stage.passes > LARGEST_RIPPLE_DB:
        raise StepError(
            f"filter: found ripple_db {stage.ripple_db:g} in {stage.passes} pass(es); allowed: at most "
            f"{LARGEST_RIPPLE_DB / stage.passes:g}, or the pass-band would fall to half power. Lower ripple_db."
        )
    if stage.corrected and (stage.design not in _MONOTONE or stage.passes == 1 or stage.type == "notch"):
        raise StepError(
            f"filter: found corrected with {stage.design} {stage.type}, phase {stage.phase}; allowed: "
            "butterworth and bessel of phase zero, which run twice and fall steadily. Delete corrected."
        )


def _check_shape(stage: FilterStage) -> None:
    """Refuse a wrong number of cut-offs, or a missing order."""
    wanted = 2 if stage.type in {"bandpass", "bandstop"} else 1
    increasing = all(low < high for low, high in zip(stage.cutoff_hz, stage.cutoff_hz[1:], strict=False))
    order_fits = stage.order is None if stage.design == "fir" else (stage.order or 0) >= 1
    if len(stage.cutoff_hz) != wanted or not increasing or not order_fits:
        cutoffs = "one cut-off" if wanted == 1 else "two increasing cut-offs"
        order = "no order" if stage.design == "fir" else "an order of at least 1"
        raise StepError(f"filter: found {stage}; allowed: {cutoffs} and {order}.")


def _check_notch(stage: FilterStage, rate_hz: float) -> None:
    """Refuse a notch that is incomplete, too wide, or above what the rate holds."""
    mains_hz, width_hz = stage.mains_hz or 0.0, stage.width_hz or 0.0
    complete = stage.design == "butterworth" and not stage.cutoff_hz and (stage.order or 0) >= 1
    if not complete or not 0 < width_hz <= mains_hz / 2:
        raise StepError(
            f"filter: found a notch with mains_hz {stage.mains_hz}, width_hz {stage.width_hz}, order "
            f"{stage.order}, design {stage.design} and cut-offs {stage.cutoff_hz}; allowed: butterworth of order "
            "1 or more, no cut-off, and a width above 0, up to half of mains_hz."
        )
    limit_hz = HARMONICS_SHARE_OF_NYQUIST * rate_hz / 2
    if mains_hz >= limit_hz:
        raise StepError(
            f"filter: found {stage} for a signal at {rate_hz:g} Hz; allowed: mains below {limit_hz:g} Hz (0.95 of "
            "Nyquist). Delete the notch: the signal holds no mains, or keep a higher rate."
        )


def _check_transition(stage: FilterStage, rate_hz: float) -> None:
    """Refuse a transition that reaches 0 Hz, Nyquist or the other edge."""
    half_hz = (stage.transition_hz or 0.0) / 2
    low_hz, high_hz = min(stage.cutoff_hz), max(stage.cutoff_hz)
    room_hz = min(low_hz, rate_hz / 2 - high_hz, *(((high_hz - low_hz) / 2,) if low_hz < high_hz else ()))
    if half_hz > room_hz:
        raise StepError(
            f"filter: found transition_hz {stage.transition_hz:g} for {stage} at {rate_hz:g} Hz; allowed: at most "
            f"{2 * room_hz:g} Hz, so that no transition reaches 0 Hz, Nyquist or the other one. Lower it."
        )
