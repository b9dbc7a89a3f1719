"""One stage of a signal's filter: which keys belong to which design, and what they may hold."""

from __future__ import annotations

from typing import TYPE_CHECKING, Annotated, Any, Literal

from pydantic import AfterValidator, Field, model_validator

from bandcairn.study.blocks import Block, Positive, refusal, told

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable

Truth = Annotated[bool, Field(strict=True)]

# A stage of zero phase runs twice: its ripple counts twice, and beyond 3 dB the pass-band falls to half power.
LARGEST_RIPPLE_DB = 3.0
# Kaiser's formulas hold from here on; below, a plain rectangular window does as well.
LEAST_KAISER_DB = 21.0
# What a notch is when nothing else is said.
NOTCH = {"design": "butterworth", "order": 2, "width_hz": 2.0, "harmonics": True}

_DESIGNS = "butterworth, chebyshev1, chebyshev2, elliptic, bessel or fir"
_NEEDED = {
    "butterworth": ("order",),
    "bessel": ("order",),
    "chebyshev1": ("order", "ripple_db"),
    "chebyshev2": ("order", "attenuation_db"),
    "elliptic": ("order", "ripple_db", "attenuation_db"),
    "fir": ("transition_hz",),
    "notch": ("order", "width_hz", "harmonics"),
}
_POSSIBLE = {"butterworth": ("corrected",), "bessel": ("corrected",), "fir": ("window", "attenuation_db")}
_OPTIONS = (
    "order",
    "ripple_db",
    "attenuation_db",
    "transition_hz",
    "window",
    "corrected",
    "width_hz",
    "harmonics",
)


class FilterStage(Block):
    """One filter; the stages of a signal are applied in the order in which they stand."""

    type: Literal["lowpass", "highpass", "bandpass", "bandstop", "notch"] = Field(
        description="What passes: below, above, between or outside the cut-offs; "
        "notch: all but the mains and its harmonics.",
        json_schema_extra=told("", "lowpass, highpass, bandpass, bandstop or notch"),
    )
    cutoff_hz: Positive | tuple[Positive, Positive] | None = Field(
        default=None,
        description="Cut-off of a lowpass or highpass; lower and upper cut-off of a bandpass or bandstop; "
        "required for them, absent for a notch.",
        json_schema_extra=told("Hz", "one value, or two increasing values, above 0 and below half the rate"),
    )
    design: Literal["butterworth", "chebyshev1", "chebyshev2", "elliptic", "bessel", "fir"] | None = Field(
        default=None,
        description="Family of the filter; required but for a notch, which is butterworth.",
        json_schema_extra=told("", _DESIGNS),
    )
    order: Annotated[int, Field(strict=True, ge=1, le=12)] | None = Field(
        default=None,
        description="Order of the design, before a zero-phase filter runs it a second time, backward; "
        "required but for fir, which has none, and for a notch, where absent means 2.",
        json_schema_extra=told("", "whole number 1 to 12"),
    )
    phase: Literal["zero", "causal"] = Field(
        default="zero",
        description="zero: forward and backward, no delay; causal: forward only. "
        "fir runs once: zero takes its delay off, causal leaves it.",
        json_schema_extra=told("", "zero or causal"),
    )
    ripple_db: Annotated[Positive, Field(le=LARGEST_RIPPLE_DB)] | None = Field(
        default=None,
        description="Largest loss of one pass within the pass-band; chebyshev1 and elliptic only, which require it.",
        json_schema_extra=told("dB", "above 0, at most 3; at most 1.5 with phase zero"),
    )
    attenuation_db: Annotated[Positive, Field(ge=10, le=200)] | None = Field(
        default=None,
        description="Least loss of one pass within the stop-band; chebyshev2 and elliptic require it, "
        "fir takes it in place of window and then has a Kaiser window.",
        json_schema_extra=told("dB", "10 to 200; at least 21 with fir"),
    )
    transition_hz: Positive | None = Field(
        default=None,
        description="Width of the step from pass-band to stop-band, centred at the cut-off; "
        "fir only, which requires it: its length follows.",
        json_schema_extra=told("Hz", "above 0, at most twice the cut-off and the width of the band"),
    )
    window: Literal["hann", "hamming", "blackman"] | None = Field(
        default=None,
        description="Window of a fir; either window or attenuation_db.",
        json_schema_extra=told("", "hann, hamming or blackman; fir only"),
    )
    corrected: Annotated[Truth, AfterValidator(lambda value: value or None)] | None = Field(
        default=None,
        description="true: the design is moved so that the applied -3 dB points lie at cutoff_hz, both passes counted; "
        "absent or false: each pass has its -3 dB points there.",
        json_schema_extra=told("", "true or false; butterworth and bessel with phase zero only"),
    )
    width_hz: Annotated[Positive, Field(le=20)] | None = Field(
        default=None,
        description="Distance between the applied -3 dB points of a notch; absent: 2.",
        json_schema_extra=told("Hz", "above 0, at most 20; notch only"),
    )
    harmonics: Truth | None = Field(
        default=None,
        description="Whether a notch stops the harmonics too, those below 0.95 of half the rate; absent: true.",
        json_schema_extra=told("", "true or false; notch only"),
    )

    @property
    def edges_hz(self) -> tuple[float, ...]:
        """The cut-offs, one or two; none for a notch."""
        if self.cutoff_hz is None:
            return ()
        return self.cutoff_hz if isinstance(self.cutoff_hz, tuple) else (self.cutoff_hz,)

    @model_validator(mode="before")
    @classmethod
    def _a_notch_is_complete(cls, data: Any) -> Any:  # noqa: ANN401 - pydantic hands over what it got
        if isinstance(data, dict) and data.get("type") == "notch":
            return {**NOTCH, **data}
        return data

    @model_validator(mode="after")
    def _keys_fit_one_another(self) -> FilterStage:
        for check in _CHECKS:
            check(self)
        return self


def _check_design(stage: FilterStage) -> None:
    if stage.design is None:
        raise refusal("design", "nothing", _DESIGNS, "Add the key design.")
    if stage.type == "notch" and stage.design != "butterworth":
        raise refusal("design", stage.design, "butterworth for a notch", "Delete design.")


def _check_cutoffs(stage: FilterStage) -> None:
    wanted = {"notch": 0, "bandpass": 2, "bandstop": 2}.get(stage.type, 1)
    if len(stage.edges_hz) != wanted:
        numbers = ("no value", "one value", "two values, lower and upper,")
        remedy = "Add the key cutoff_hz." if not stage.edges_hz else "Change type or cutoff_hz."
        found = ("nothing", "one value", "two values")[len(stage.edges_hz)]
        raise refusal("cutoff_hz", found, f"{numbers[wanted]} for {stage.type}", remedy)
    if wanted == 2 and stage.edges_hz[0] >= stage.edges_hz[1]:
        found = f"[{stage.edges_hz[0]:g}, {stage.edges_hz[1]:g}]"
        raise refusal("cutoff_hz", found, "two increasing values", "Write the lower value first.")


def _check_options(stage: FilterStage) -> None:
    name = "notch" if stage.type == "notch" else str(stage.design)
    for key in _NEEDED[name]:
        if getattr(stage, key) is None:
            raise refusal(key, "nothing", _allowed(key), f"Add the key {key}: {name} needs it.")
    _refuse_others(stage, name, (*_NEEDED[name], *_POSSIBLE.get(name, ())))


def _refuse_others(stage: FilterStage, name: str, fitting: Iterable[str]) -> None:
    for key in _OPTIONS:
        value = getattr(stage, key)
        if value is not None and key not in fitting:
            raise refusal(key, _shown(value), f"no {key} with {name}", "Delete it, or change the design.")


def _allowed(key: str) -> str:
    extra = FilterStage.model_fields[key].json_schema_extra
    return str(extra["allowed"]) if isinstance(extra, dict) else ""


def _shown(value: object) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    return f"{value:g}" if isinstance(value, float) else str(value)


def _check_fir(stage: FilterStage) -> None:
    if stage.design != "fir":
        return
    if (stage.window is None) == (stage.attenuation_db is None):
        found = (
            "neither window nor attenuation_db" if stage.window is None else "both window and attenuation_db"
        )
        raise refusal("", found, "one of the two with fir", "Name a window, or an attenuation for Kaiser's.")
    if stage.attenuation_db is not None and stage.attenuation_db < LEAST_KAISER_DB:
        allowed = f"at least {LEAST_KAISER_DB:g} with fir"
        raise refusal("attenuation_db", f"{stage.attenuation_db:g}", allowed, "Raise it.")
    low_hz, high_hz = stage.edges_hz[0], stage.edges_hz[-1]
    room_hz = min(2 * low_hz, high_hz - low_hz) if len(stage.edges_hz) == 2 else 2 * low_hz
    if stage.transition_hz is not None and stage.transition_hz > room_hz:
        allowed = f"at most {room_hz:g} Hz: twice the lowest cut-off, and the width of the band"
        raise refusal("transition_hz", f"{stage.transition_hz:g} Hz", allowed, "Lower it.")


def _check_passes(stage: FilterStage) -> None:
    if stage.phase == "zero" and (stage.ripple_db or 0.0) * 2 > LARGEST_RIPPLE_DB:
        allowed = f"at most {LARGEST_RIPPLE_DB / 2:g} with phase zero, which doubles it"
        raise refusal("ripple_db", f"{stage.ripple_db:g}", allowed, "Lower it.")
    if stage.phase == "causal" and stage.corrected:
        allowed = "no corrected with phase causal, which runs once"
        raise refusal("corrected", "true", allowed, "Delete it: the cut-offs are where they are declared.")


_CHECKS: tuple[Callable[[FilterStage], None], ...] = (
    _check_design,
    _check_cutoffs,
    _check_options,
    _check_fir,
    _check_passes,
)
