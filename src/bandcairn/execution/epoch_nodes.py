"""The epoch node, and what is told of epochs beside every feature."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING, Any

import numpy as np

from bandcairn.execution.frames import epochs_to_frame, frame_to_signal
from bandcairn.nodes.marks import DECIDED
from bandcairn.steps.epoch import (
    Around,
    BadStretch,
    EdgeZone,
    Epochs,
    LeftOut,
    Reject,
    Segment,
    cut_around,
    cut_epochs,
)
from bandcairn.steps.rejection import REASONS

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from bandcairn.signal import Signal
    from bandcairn.store.frame import Frame

# Counts of epochs beside every row of features: one a reason, and the events that have no window.
EPOCH_COUNTS = (*REASONS, "no_window")


def epoch_node(parameters: Mapping[str, Any], parents: Mapping[str, Frame]) -> Frame:
    """Lay the windows of every segment and mark those that are not used."""
    signal = frame_to_signal(parents["signal"])
    segments = tuple(Segment(*segment) for segment in parameters["segments"])
    edges = _edge_zone(parents["signal"].facts, signal, keep_edges=parameters.get("keep_edges"))
    left_out = _left_out(parameters.get("decisions", {}), edges)
    epochs = _cut(parameters, signal, segments, left_out)
    starts: dict[str, float] = {}
    for segment in segments or (Segment("", float(signal.runs[0].start_s), 0),):
        starts.setdefault(segment.name, segment.start_s)
    facts = {
        "edge_start_s": float(edges.start_samples / signal.rate_hz),
        "edge_stop_s": float(edges.stop_samples / signal.rate_hz),
        "channels_by_decision": list(left_out.channels),
        "left_out_in_average": parameters.get("decisions", {}).get("in_average", []),
    }
    return epochs_to_frame(epochs, signal, tuple(starts.items()), **facts)


def epoch_counts(reason: NDArray[np.int8], no_window: int) -> dict[str, int]:
    """Return how many epochs of one channel and segment each reason has dropped.

    Parameters
    ----------
    reason : ndarray of int8, shape (n_epochs,)
        Why each epoch is dropped, or 0.
    no_window : int
        Events of the segment that have no window.
    """
    counts = {name: int(np.count_nonzero(reason == code)) for name, code in REASONS.items()}
    return counts | {"no_window": no_window}


def why_missing(channel: str, kept: int, parameters: Mapping[str, Any], epochs: Frame) -> str | None:
    """Return why a channel has no value whatever was computed: a decision, or too few epochs; None if it has one.

    Parameters
    ----------
    channel : str
        Name of the channel.
    kept : int
        Epochs of the segment that are kept.
    parameters : mapping
        Those of the features; `least` is the least number of epochs.
    epochs : Frame
        The epoch node.
    """
    if channel in epochs.facts.get("channels_by_decision", []):
        return DECIDED
    least = parameters.get("least", 0)
    if kept < least:
        return f"{kept} epochs kept, fewer than the least of {least}"
    return None


def note_of_average(channel: str, epochs: Frame) -> str | None:
    """Return which channels the average reference of a channel holds although a decision leaves them out."""
    others = [name for name in epochs.facts.get("left_out_in_average", []) if name != channel]
    return f"its average reference holds {', '.join(others)}, {DECIDED}" if others else None


def _cut(
    parameters: Mapping[str, Any], signal: Signal, segments: tuple[Segment, ...], left_out: LeftOut
) -> Epochs:
    reject = Reject(**parameters["reject"]) if "reject" in parameters else None
    if "events" in parameters:
        around = Around(parameters["start_s"], parameters["stop_s"], tuple(parameters["events"]))
        return cut_around(signal, around, segments, reject, left_out=left_out)
    length_s, overlap = parameters["length_s"], parameters["overlap"]
    return cut_epochs(signal, length_s, overlap, segments, reject, left_out=left_out)


def _left_out(decisions: Mapping[str, Any], edges: EdgeZone) -> LeftOut:
    stretches = tuple(
        BadStretch(start_s, stop_s, tuple(channels))
        for start_s, stop_s, channels in decisions.get("stretches", [])
    )
    return LeftOut(edges, stretches, tuple(decisions.get("channels", [])))


def _edge_zone(facts: Mapping[str, Any], signal: Signal, *, keep_edges: bool | None) -> EdgeZone:
    """Return where the filter has not settled: at both ends of a run for zero phase, at its beginning if causal.

    Zero-phase sections run as one cascade, which settles as its slowest pole does; taps reach one behind the other.
    Absent, `keep_edges` leaves the zones out at gaps alone: an end of the recording is a gap if the filter has left
    out a run beyond it.
    """
    if keep_edges:
        return EdgeZone()
    stages = facts.get("stages", [])
    both = _settling_s([stage for stage in stages if "delay" not in stage])
    forward = _settling_s([stage for stage in stages if "delay" in stage])
    gone = [run["start_s"] for run in facts.get("left_out", [])]
    first, last = signal.runs[0], signal.runs[-1]
    return EdgeZone(
        start_samples=_samples(both + forward, signal.rate_hz),
        stop_samples=_samples(both, signal.rate_hz),
        at_start=keep_edges is False or any(start_s < first.start_s for start_s in gone),
        at_stop=keep_edges is False or any(start_s > last.start_s for start_s in gone),
    )


def _settling_s(stages: list[Mapping[str, Any]]) -> float:
    cascade_s = max((stage["settling_s"] for stage in stages if "taps" not in stage), default=0.0)
    return float(cascade_s + sum(stage["settling_s"] for stage in stages if "taps" in stage))


def _samples(time_s: float, rate_hz: Fraction) -> int:
    """Return a time that was a whole number of samples as that number."""
    return round(Fraction(time_s) * rate_hz)
