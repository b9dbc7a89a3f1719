"""Blocks of study.yaml about acquisition: what a recorder lets pass, and how good a channel must be.

Ranges of plausible amplitude: requirements of the field as collected for this project (common practice).
"""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from bandcairn.study.blocks import Band, Block, Name, NotNegative, Number, Positive, Share, refusal, told

_SHARE = "0 to 1, or null: not judged"
_LONGEST = "0 or above, or null: not judged"
_RANGE = "two increasing values, or null: not judged"
_ABSENT = "absent: not judged."


class Recorder(Block):
    """What a recorder lets pass, where its files do not say it or say it wrong."""

    highpass_hz: NotNegative | None = Field(
        default=None,
        description="Its high-pass; 0 where it is coupled directly. "
        "Of this and the file's own word the stricter counts.",
        json_schema_extra=told("Hz", "0 or above, below lowpass_hz"),
    )
    lowpass_hz: Positive | None = Field(
        default=None,
        description="Its low-pass. Of this and the file's own word the stricter counts.",
        json_schema_extra=told("Hz", "above 0"),
    )
    range_uv: tuple[Number, Number] | None = Field(
        default=None,
        description="The lowest and the highest value that it can give; samples that rest there are clipped.",
        json_schema_extra=told("uV", "two increasing values"),
    )

    @model_validator(mode="after")
    def _something_passes(self) -> Recorder:
        if (
            self.highpass_hz is not None
            and self.lowpass_hz is not None
            and self.highpass_hz >= self.lowpass_hz
        ):
            allowed = f"below lowpass_hz ({self.lowpass_hz:g})"
            raise refusal("highpass_hz", f"{self.highpass_hz:g}", allowed, "Exchange or correct the two.")
        if self.range_uv is not None and self.range_uv[0] >= self.range_uv[1]:
            found = f"[{self.range_uv[0]:g}, {self.range_uv[1]:g}]"
            raise refusal("range_uv", found, "two increasing values", "Write the lower value first.")
        return self


class QualityLimits(Block):
    """How good a channel must be; what breaks a limit is left out or flagged."""

    clipped_share: Share | None = Field(
        default=0.01,
        description="Largest share of a channel's samples that may sit at the limit of its range.",
        json_schema_extra=told("share", _SHARE),
    )
    clipped_longest_s: NotNegative | None = Field(
        default=None,
        description=f"Longest stretch that may sit there; {_ABSENT}",
        json_schema_extra=told("s", _LONGEST),
    )
    flat_share: Share | None = Field(
        default=0.05,
        description="Largest share of a channel's samples that may lie in flat stretches.",
        json_schema_extra=told("share", _SHARE),
    )
    flat_longest_s: NotNegative | None = Field(
        default=None,
        description=f"Longest flat stretch; {_ABSENT}",
        json_schema_extra=told("s", _LONGEST),
    )
    missing_share: Share | None = Field(
        default=None,
        description=f"Largest share of the recorded time that may be missing in gaps; {_ABSENT}",
        json_schema_extra=told("share", _SHARE),
    )
    longest_gap_s: NotNegative | None = Field(
        default=None,
        description=f"Longest gap; {_ABSENT}",
        json_schema_extra=told("s", _LONGEST),
    )
    identical_channels: Annotated[int, Field(strict=True, ge=0)] | None = Field(
        default=0,
        description="How many other channels of the signal may hold the very same samples.",
        json_schema_extra=told("", "whole number from 0, or null: not judged"),
    )
    mains_db: Number | None = Field(
        default=None,
        description=f"Highest level of the mains, within 1.5 Hz of the line, over its neighbours; {_ABSENT}",
        json_schema_extra=told("dB", "a number, or null: not judged"),
    )
    accept_other_mains: Name | None = Field(
        default=None,
        description="Why a clear line at the other mains frequency, with none at mains_hz, is no fault; "
        "absent: the recording is refused.",
        json_schema_extra=told("", "the reason, in words"),
    )
    quantisation_margin_db: Number | None = Field(
        default=10.0,
        description="How far the mean density of a requested band must lie above the noise of the recorder's steps.",
        json_schema_extra=told("dB", "a number, or null: not judged"),
    )
    beyond_recorder_share: Share | None = Field(
        default=0.0,
        description="Largest share of a requested band that may lie beyond the recorder's high-pass or low-pass.",
        json_schema_extra=told("share", _SHARE),
    )
    recorder_loss_db: NotNegative | None = Field(
        default=None,
        description="Largest loss of a requested band to the recorder's filters, taken as of the first order; "
        f"{_ABSENT}",
        json_schema_extra=told("dB", _LONGEST),
    )
    on_failure: Literal["exclude", "flag"] = Field(
        default="exclude",
        description="What happens to a channel beyond a limit: left out, or kept with a note.",
        json_schema_extra=told("", "exclude or flag"),
    )
    on_band_failure: Literal["exclude", "flag"] = Field(
        default="flag",
        description="What happens to the features of a band beyond a limit: left out, or kept with a note.",
        json_schema_extra=told("", "exclude or flag"),
    )


class EegQuality(QualityLimits):
    """How good a channel of EEG must be."""

    typical_rms_uv: Band | None = Field(
        default=(1.0, 500.0),
        description="Plausible root mean square: the median over windows of 2 s, each about its mean. "
        "Beyond it the unit is likely wrong or the electrode off.",
        json_schema_extra=told("uV", _RANGE),
    )


class EcgQuality(QualityLimits):
    """How good a channel of ECG must be."""

    typical_peak_to_peak_uv: Band | None = Field(
        default=(50.0, 20_000.0),
        description="Plausible height: the median over windows of 2 s of largest minus smallest sample. "
        "Beyond it the unit is likely wrong or the electrode off.",
        json_schema_extra=told("uV", _RANGE),
    )
    beats_rate_hz: Positive | None = Field(
        default=250.0,
        description="Least sampling rate at which beats are found; below it the features of intervals are noted, "
        "never left out.",
        json_schema_extra=told("Hz", "above 0, or null: not judged"),
    )


class EmgQuality(QualityLimits):
    """How good a channel of EMG must be."""

    rms_uv: Band | None = Field(
        default=(1.0, 20_000.0),
        description="Plausible root mean square of the whole recording about its mean. "
        "Beyond it the unit is likely wrong or the electrode off.",
        json_schema_extra=told("uV", _RANGE),
    )
