"""How a stretch is cut into epochs, and which of them are not used."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from bandcairn.study.blocks import Block, Name, Names, Number, Overlap, Positive, refusal, told


class Reject(Block):
    """When an epoch is dropped."""

    peak_to_peak_uv: Positive | None = Field(
        default=None,
        description="An epoch whose highest and lowest sample differ by more is dropped.",
        json_schema_extra=told("uV", "above 0"),
    )
    flat_uv: Positive | None = Field(
        default=None,
        description="An epoch whose highest and lowest sample differ by less is dropped.",
        json_schema_extra=told("uV", "above 0"),
    )
    step_uv: Positive | None = Field(
        default=None,
        description="An epoch in which two neighbouring samples, after resampling and filters, differ by more "
        "is dropped.",
        json_schema_extra=told("uV", "above 0"),
    )
    robust_z: Positive | None = Field(
        default=None,
        description="An epoch is dropped if the logarithm of its peak to peak lies further from the median of the "
        "recording's own epochs of that channel than this many times 1.4826 median absolute deviations; "
        "those that another rule drops are no standard, and fewer than 10 are not judged.",
        json_schema_extra=told("", "above 0; 5 is cautious"),
    )
    scope: Literal["channel", "epoch"] = Field(
        default="channel",
        description="Dropped for the channel that fails, or for all channels of the signal.",
        json_schema_extra=told("", "channel or epoch"),
    )

    @model_validator(mode="after")
    def _one_limit_at_least(self) -> Reject:
        low, high = self.flat_uv, self.peak_to_peak_uv
        if all(limit is None for limit in (low, high, self.step_uv, self.robust_z)):
            allowed = "peak_to_peak_uv, flat_uv, step_uv, robust_z or several of them"
            raise refusal("", "no limit", allowed, "Declare a limit, or delete reject.")
        if low is not None and high is not None and low >= high:
            allowed = f"below peak_to_peak_uv ({high:g})"
            raise refusal("flat_uv", f"{low:g}", allowed, "As it stands every epoch would be dropped.")
        return self


class Epoch(Block):
    """How a stretch is cut into epochs."""

    length_s: Positive | None = Field(
        default=None,
        description="Length of an epoch; epochs then lie one after the other.",
        json_schema_extra=told("s", "above 0, at most the shortest stretch; either length_s or around"),
    )
    overlap: Overlap = Field(
        default=0.0,
        description="Share of an epoch that it has in common with the next.",
        json_schema_extra=told("share", "0 or above, below 1; length_s only"),
    )
    around: Name | Annotated[Names, Field(min_length=1)] | None = Field(
        default=None,
        description="Events, one or a list, each of which has an epoch about it: texts of the files' annotations, "
        "or events of the events table where the study has one.",
        json_schema_extra=told("", "text or a list of texts; either length_s or around"),
    )
    start_s: Number | None = Field(
        default=None,
        description="Where an epoch begins after its event; negative before it.",
        json_schema_extra=told("s", "below stop_s; around only, which requires it"),
    )
    stop_s: Number | None = Field(
        default=None,
        description="Where an epoch ends after its event.",
        json_schema_extra=told("s", "above start_s; around only, which requires it"),
    )
    keep_edges: bool | None = Field(
        default=None,
        strict=True,
        description="Whether epochs are used in which a filter has not settled: within its settling time of either "
        "end of a gap-free stretch (causal: of its beginning). Absent: not at gaps, but at the start and the end "
        "of the recording.",
        json_schema_extra=told("", "true or false"),
    )
    least: Annotated[int, Field(strict=True, ge=1)] | None = Field(
        default=None,
        description="Least number of epochs kept of a channel in a segment; with fewer it has no value.",
        json_schema_extra=told("", "whole number, 1 or above"),
    )
    reject: Reject | None = Field(
        default=None,
        description="When an epoch is dropped; absent: never.",
        json_schema_extra=told("", "a block of limits"),
    )

    @property
    def events(self) -> tuple[str, ...]:
        """Names of the events that have an epoch about them."""
        return (self.around,) if isinstance(self.around, str) else self.around or ()

    @property
    def window_s(self) -> float:
        """Length of an epoch in seconds."""
        if self.length_s is not None:
            return self.length_s
        return (self.stop_s or 0.0) - (self.start_s or 0.0)

    @property
    def window_key(self) -> str:
        """The key that sets the length of an epoch."""
        return "stop_s" if self.length_s is None else "length_s"

    @model_validator(mode="after")
    def _one_way_to_lie(self) -> Epoch:
        if self.length_s is None and self.around is None:
            allowed = "a length in seconds, above 0, or around with start_s and stop_s"
            raise refusal("length_s", "nothing", allowed, "Add the key length_s.")
        if self.around is None:
            for key in ("start_s", "stop_s"):
                if getattr(self, key) is not None:
                    raise refusal(key, f"{key} without around", "around beside it", "Name the events.")
            return self
        if self.length_s is not None:
            raise refusal("length_s", "length_s beside around", "one of the two", "Delete one of them.")
        self._check_window()
        return self

    def _check_window(self) -> None:
        for key, value in (("start_s", self.start_s), ("stop_s", self.stop_s)):
            if value is None:
                allowed = "seconds after the event, negative before it"
                raise refusal(key, "nothing", allowed, f"around needs {key}.")
        if self.overlap != 0:
            remedy = "Delete it: where events are near, their epochs overlap."
            raise refusal("overlap", f"{self.overlap:g}", "no overlap with around", remedy)
        if self.window_s <= 0:
            allowed = f"above start_s ({self.start_s:g})"
            raise refusal("stop_s", f"{self.stop_s:g}", allowed, "Exchange the two, or correct one.")
