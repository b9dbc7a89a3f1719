"""Nodes that hold samples: load, quality, resample, filter."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING, Any

from bandcairn.execution.frames import frame_to_signal, raw_to_frame, signal_to_frame
from bandcairn.recordings import Declared, read
from bandcairn.steps.quality import assess
from bandcairn.steps.resample import resample
from bandcairn.store.frame import Frame

if TYPE_CHECKING:
    from collections.abc import Mapping
    from pathlib import Path

# Measure of the quality node -> its unit.
QUALITY_UNITS = {
    "clipped_share": "1",
    "clipped_longest_s": "s",
    "flat_share": "1",
    "flat_longest_s": "s",
    "peak_to_peak_uv": "uV",
    "rms_uv": "uV",
}


def load_node(parameters: Mapping[str, Any], path: Path) -> Frame:
    """Read a signal's channels from the raw file."""
    rate_hz = parameters.get("rate_hz")
    declared = Declared(None if rate_hz is None else exact_rate(rate_hz), parameters.get("unit"))
    cut = parameters.get("start_s"), parameters.get("stop_s")
    return raw_to_frame(read(path, tuple(parameters["channels"]), declared, *cut))


def quality_node(_: Mapping[str, Any], parents: Mapping[str, Frame]) -> Frame:
    """Measure clipped and flat stretches of the signal as it was recorded: one row a channel."""
    signal = frame_to_signal(parents["signal"])
    measured = assess(signal.samples, (None,) * len(signal.channels), float(signal.rate_hz))
    return Frame(
        {"channel": signal.channels, **{measure: getattr(measured, measure) for measure in QUALITY_UNITS}}
    )


def resample_node(parameters: Mapping[str, Any], parents: Mapping[str, Frame]) -> Frame:
    """Bring the signal to the study's rate."""
    return signal_to_frame(resample(frame_to_signal(parents["signal"]), exact_rate(parameters["rate_hz"])))


def exact_rate(rate_hz: float) -> Fraction:
    """Return a declared rate as the fraction its shortest decimal text means."""
    return Fraction(str(rate_hz))
