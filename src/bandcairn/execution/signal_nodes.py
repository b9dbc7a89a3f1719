"""Nodes that hold samples: load, resample."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from typing import TYPE_CHECKING, Any

from bandcairn.execution.frames import frame_to_signal, raw_to_frame, signal_to_frame
from bandcairn.recordings import MAX_MISSING_SHARE, Declared, read
from bandcairn.signal import Repair
from bandcairn.steps.resample import resample
from bandcairn.store.frame import Frame

if TYPE_CHECKING:
    from collections.abc import Mapping
    from pathlib import Path


def load_node(parameters: Mapping[str, Any], path: Path) -> Frame:
    """Read a signal's channels from the raw file; what was found amiss stands beside the samples."""
    channels = tuple(parameters["channels"])
    labels = tuple(parameters.get("labels", channels))
    cut = parameters.get("start_s"), parameters.get("stop_s")
    raw = read(path, labels, _declared(parameters), *cut)
    frame = raw_to_frame(replace(raw, labels=channels))
    return Frame(frame.columns, {**frame.facts, **_told(parameters)})


def _declared(parameters: Mapping[str, Any]) -> Declared:
    rate_hz = parameters.get("rate_hz")
    share = parameters.get("max_missing_share")
    return Declared(
        rate_hz=None if rate_hz is None else exact_rate(rate_hz),
        unit=parameters.get("unit"),
        unit_reason=parameters.get("unit_reason"),
        missing_are_gaps=parameters.get("missing") == "gap",
        max_missing_share=MAX_MISSING_SHARE if share is None else Fraction(str(share)),
    )


def _told(parameters: Mapping[str, Any]) -> dict[str, Any]:
    """Return what a reader of the samples must know of how they were read; nothing for a plain file."""
    told = {name: parameters[name] for name in ("labels", "unit_reason") if name in parameters}
    if "repair" in parameters:
        repair = Repair(**parameters["repair"])
        told["repairs"] = [{**parameters["repair"], "told": str(repair)}]
    return told


def resample_node(parameters: Mapping[str, Any], parents: Mapping[str, Frame]) -> Frame:
    """Bring the signal to the study's rate."""
    return signal_to_frame(resample(frame_to_signal(parents["signal"]), exact_rate(parameters["rate_hz"])))


def exact_rate(rate_hz: float) -> Fraction:
    """Return a declared rate as the fraction its shortest decimal text means."""
    return Fraction(str(rate_hz))
