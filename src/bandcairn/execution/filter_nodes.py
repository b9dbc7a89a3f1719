"""Nodes between the rate and the epochs: reference and filter, with what is kept of them beside the samples."""

from __future__ import annotations

from dataclasses import asdict
from functools import lru_cache
from typing import TYPE_CHECKING, Any

from bandcairn.execution.frames import frame_to_signal, signal_to_frame
from bandcairn.steps.filter import FilterStage, apply_stages, effective_cutoffs, short_runs
from bandcairn.steps.filter_report import curve, report, stop_bands
from bandcairn.steps.reference import Pair, against_average, against_channels, as_pairs, rereference

if TYPE_CHECKING:
    from collections.abc import Mapping

    from bandcairn.signal import Signal
    from bandcairn.steps.filter_report import StageReport
    from bandcairn.steps.reference import Derivation
    from bandcairn.store.frame import Frame


def reference_node(parameters: Mapping[str, Any], parents: Mapping[str, Frame]) -> Frame:
    """Measure the channels against others; how many are independent afterwards stands beside the samples."""
    signal = frame_to_signal(parents["signal"])
    derivation = _derivation(parameters, signal.channels)
    return signal_to_frame(rereference(signal, derivation), rank=derivation.rank)


def filter_node(parameters: Mapping[str, Any], parents: Mapping[str, Frame]) -> Frame:
    """Apply the filter stages; designs, cut-offs, response and the runs left out stand beside the samples."""
    signal = frame_to_signal(parents["signal"])
    stages = tuple(_stage(stage) for stage in parameters["stages"])
    filtered = apply_stages(signal, stages)
    facts = {**_facts(stages, float(signal.rate_hz)), "left_out": _left_out(signal, stages)}
    return signal_to_frame(filtered, **facts)


def _derivation(parameters: Mapping[str, Any], channels: tuple[str, ...]) -> Derivation:
    if "pairs" in parameters:
        return as_pairs(channels, tuple(Pair(*pair) for pair in parameters["pairs"]))
    if parameters["reference"] == "average":
        return against_average(channels)
    return against_channels(channels, tuple(parameters["reference"]))


def _stage(stage: Mapping[str, Any]) -> FilterStage:
    cutoff_hz = stage.get("cutoff_hz", [])
    edges = cutoff_hz if isinstance(cutoff_hz, list) else [cutoff_hz]
    return FilterStage(**{**stage, "cutoff_hz": tuple(float(edge) for edge in edges)})


@lru_cache(maxsize=16)
def _facts(stages: tuple[FilterStage, ...], rate_hz: float) -> dict[str, Any]:
    """Return what is known of a chain before any sample: the same for every recording at this rate."""
    shape = curve(stages, rate_hz)
    stopped = stop_bands(stages, rate_hz)
    facts = {
        "cutoffs": [asdict(cutoff) for cutoff in effective_cutoffs(stages, rate_hz)],
        "stages": [_stage_facts(told) for told in report(stages, rate_hz)],
        "response": {"frequency_hz": shape.frequency_hz.tolist(), "gain_db": shape.gain_db.tolist()},
    }
    return {**facts, "stop_bands_hz": [list(edges) for edges in stopped]} if stopped else facts


def _stage_facts(told: StageReport) -> dict[str, Any]:
    facts: dict[str, Any] = {
        "design": told.words,
        "cutoffs": [asdict(cutoff) for cutoff in told.cutoffs],
        "at_cutoffs": [asdict(gain) for gain in told.at_cutoffs],
        "at_mains": [asdict(gain) for gain in told.at_mains],
        "largest_pole_radius": told.largest_pole_radius,
        "settling_s": told.settling_s,
    }
    if told.taps.size:
        facts["taps"] = told.taps.tolist()
    else:
        facts["sections"] = told.sections.tolist()
    if told.delay is not None:
        facts["delay"] = asdict(told.delay)
    return facts


def _left_out(signal: Signal, stages: tuple[FilterStage, ...]) -> list[dict[str, float]]:
    """Return the gap-free runs that are too short for the chain, in seconds from the start of the file."""
    return [
        {
            "start_s": float(found.run.start_s),
            "stop_s": float(found.run.start_s) + found.length_s,
            "needed_s": found.needed_s,
        }
        for found in short_runs(signal, stages)
    ]
