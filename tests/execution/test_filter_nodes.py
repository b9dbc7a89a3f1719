"""Reference and filter as nodes: what stands beside the samples, and what becomes of it further down."""

from __future__ import annotations

import json
from fractions import Fraction
from typing import TYPE_CHECKING, Any, cast

import numpy as np
import pytest

from bandcairn.execution.compute import compute
from bandcairn.execution.frames import frame_to_signal, signal_to_frame
from bandcairn.execution.group_nodes import frame_rows
from bandcairn.execution.project import open_project
from bandcairn.execution.through_reference import failures_behind
from bandcairn.execution.worker import Worker
from bandcairn.nodes.key import canonical_json
from bandcairn.nodes.node import make_node
from bandcairn.signal import Run, Signal

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping
    from pathlib import Path

    from bandcairn.execution.project import Project
    from bandcairn.store.frame import Frame

BAND_PASS = {"type": "bandpass", "cutoff_hz": [1, 40], "design": "butterworth", "order": 4, "phase": "zero"}
NOTCH = {
    "type": "notch",
    "design": "butterworth",
    "order": 2,
    "phase": "zero",
    "width_hz": 2,
    "harmonics": True,
    "mains_hz": 50,
}
FIR = {
    "type": "lowpass",
    "cutoff_hz": 30,
    "design": "fir",
    "window": "hann",
    "transition_hz": 10,
    "phase": "causal",
}


def noise(*lengths: int) -> Frame:
    """Return a node of three channels at 250 Hz, in runs of the given lengths a minute apart."""
    samples = np.random.default_rng(1).normal(0, 20, size=(3, sum(lengths)))
    runs, first = [], 0
    for index, length in enumerate(lengths):
        runs.append(Run(first, first + length, Fraction(60 * index)))
        first += length
    return signal_to_frame(Signal(samples, Fraction(250), ("A", "B", "C"), tuple(runs)))


def made(step: str, parameters: Mapping[str, Any], signal: Frame) -> Frame:
    """Compute one node, of parameters that have been through JSON."""
    node = make_node(step, parameters=canonical_json(parameters))
    return compute(node, {"signal": signal}, cast("Project", None))


def filtered(*stages: Mapping[str, Any], signal: Frame) -> Frame:
    """Compute a filter node."""
    return made("filter", {"stages": stages}, signal)


def test_a_filter_keeps_for_each_stage_what_a_paper_must_report() -> None:
    """Words, coefficients, requested and applied cut-offs, gain at them and at the mains, radius, settling."""
    band_pass, notch, fir = filtered(BAND_PASS, NOTCH, FIR, signal=noise(5000)).facts["stages"]

    assert band_pass["design"] == "Butterworth band-pass of order 4 at 1 and 40 Hz, forward and backward"
    assert np.shape(band_pass["sections"]) == (4, 6)
    assert [edge["requested_hz"] for edge in band_pass["cutoffs"]] == [1, 40]
    assert [edge["single_pass_hz"] for edge in band_pass["cutoffs"]] == pytest.approx([1, 40])
    low_hz, high_hz = (edge["effective_hz"] for edge in band_pass["cutoffs"])
    assert (1.1 < low_hz < 1.2, 36 < high_hz < 37.5) == (True, True)
    assert [gain["gain_db"] for gain in band_pass["at_cutoffs"]] == pytest.approx([-6.0206] * 2, abs=1e-3)
    assert [gain["frequency_hz"] for gain in band_pass["at_mains"]] == [50, 60]
    assert 0.98 < band_pass["largest_pole_radius"] < 1
    assert band_pass["settling_s"] == pytest.approx(1.9, abs=0.2)
    assert "delay" not in band_pass
    assert notch["at_mains"][0]["gain_db"] < -100
    assert fir["delay"] == {"frequency_hz": 15, "delay_s": 39 / 250}
    assert len(fir["taps"]) == 79
    assert "sections" not in fir


def test_a_filter_keeps_its_response_as_a_curve_of_512_points() -> None:
    """A report draws it without knowing how it is computed, and it survives JSON."""
    facts = filtered(BAND_PASS, NOTCH, signal=noise(5000)).facts

    curve = json.loads(json.dumps(facts, allow_nan=False))["response"]

    assert (len(curve["frequency_hz"]), len(curve["gain_db"])) == (512, 512)
    assert (curve["frequency_hz"][0], curve["frequency_hz"][-1]) == (0.1, 125)
    assert min(curve["gain_db"]) < -60
    assert max(curve["gain_db"]) <= 0.001


def test_the_same_filter_keeps_the_same_facts_for_every_recording() -> None:
    """Nothing in them depends on the samples, but the runs left out."""
    one, other = (filtered(BAND_PASS, NOTCH, signal=noise(length)) for length in (5000, 6000))

    assert {**one.facts, "runs": None} == {**other.facts, "runs": None}


def test_a_run_too_short_is_left_out_and_listed() -> None:
    """What lies too close to a gap is named with its times and what it lacks."""
    frame = filtered(BAND_PASS, signal=noise(5000, 200, 5000))

    assert frame_to_signal(frame).runs == (Run(0, 5000, Fraction(0)), Run(5000, 10000, Fraction(120)))
    (left_out,) = frame.facts["left_out"]
    assert (left_out["start_s"], left_out["stop_s"]) == (60, 60.8)
    assert left_out["needed_s"] > 0.8
    assert filtered(BAND_PASS, signal=noise(5000)).facts["left_out"] == []


def test_stop_bands_stand_beside_the_samples_only_where_there_are_any() -> None:
    """Features read them from the spectrum."""
    assert "stop_bands_hz" not in filtered(BAND_PASS, signal=noise(5000)).facts
    assert len(filtered(NOTCH, signal=noise(5000)).facts["stop_bands_hz"]) == 2


@pytest.mark.parametrize(
    ("parameters", "channels", "rank"),
    [
        ({"reference": "average"}, ("A", "B", "C"), 2),
        ({"reference": ["C"]}, ("A", "B"), 2),
        ({"pairs": [["C-A", "C", "A"], ["A-B", "A", "B"]]}, ("C-A", "A-B"), 2),
    ],
)
def test_a_reference_node_holds_the_channels_that_are_left(
    parameters: dict[str, Any], channels: tuple[str, ...], rank: int
) -> None:
    """And how many of them are independent."""
    frame = made("reference", parameters, noise(300, 200))

    assert frame_to_signal(frame).channels == channels
    assert frame_to_signal(frame).runs == frame_to_signal(noise(300, 200)).runs
    assert frame.facts["rank"] == rank


CLIPPED = {"about": "channel", "told": "clipped_share 0.2 is above 0.01"}
COARSE = {"about": "band", "told": "gamma is below the step"}
FAILURES = {("r1", "A"): [CLIPPED, COARSE], ("r2", "B"): [CLIPPED]}


def told(channel: str, reference: dict[str, Any] | None, recording: str = "r1") -> list[tuple[str, str]]:
    """Return what the failures behind a channel are about, and their words."""
    found = failures_behind(FAILURES, recording, channel, reference)
    return [(failure["about"], failure["told"]) for failure in found]


def test_a_pair_fails_with_either_of_its_channels() -> None:
    """The difference of a clipped channel is clipped."""
    pairs = {"pairs": [["A-B", "A", "B"], ["B-C", "B", "C"]]}

    assert told("A-B", pairs) == [
        ("channel", "A: clipped_share 0.2 is above 0.01"),
        ("band", "A: gamma is below the step"),
    ]
    assert told("B-C", pairs) == []
    assert told("B-C", pairs, "r2") == [("channel", "B: clipped_share 0.2 is above 0.01")]


@pytest.mark.parametrize("reference", ["average", ["A"]])
def test_a_failure_within_the_reference_is_told_at_every_other_channel(reference: str | list[str]) -> None:
    """It is spread over all of them, which stay."""
    assert told("B", {"reference": reference}) == [
        ("reference", "its reference holds A: clipped_share 0.2 is above 0.01")
    ]
    assert told("A", {"reference": "average"}) == [
        (item["about"], item["told"]) for item in (CLIPPED, COARSE)
    ]
    assert told("B", {"reference": ["C"]}) == []
    assert told("A", None) == told("A", {"reference": "average"})


def test_notch_and_pairs_go_through_to_the_results(
    tmp_path: Path, make_study: Callable[..., Path], edit_study: Callable[[Path, str, str], None]
) -> None:
    """Features have the new names, and the band that the notch eats into says so."""
    folder = make_study(tmp_path / "study")
    edit_study(folder, "channels: [Fz, Cz]", "channels: [Fz, Cz]\n    reference: {pairs: {Fz-Cz: [Fz, Cz]}}")
    edit_study(folder, "cutoff_hz: [0.5, 40]", "cutoff_hz: [0.5, 60]")
    edit_study(folder, "    epoch: {length_s: 4", "      - {type: notch}\n    epoch: {length_s: 4")
    edit_study(folder, "alpha: [8, 13]}", "alpha: [8, 13], mains: [45, 55]}")
    project = open_project(folder)
    worker = Worker(project)

    done = worker.work(project.plan.nodes.values())

    assert done.failures == []
    table = next(node for node in worker.plan_study_nodes() if (node.step, node.signal) == ("table", "eeg"))
    rows = frame_rows(worker.store.get("table", table.key))
    assert {row["channel"] for row in rows} == {"Fz-Cz"}
    notes = {(row["feature"], row["band"]): row["note"] for row in rows}
    assert notes["band_power", "mains"] == "20 % of the band lies in the stop band 48.97-50.97 Hz"
    assert notes["band_power", "alpha"] is None
    assert notes["total_power", None] == "3.9 % of the total range lies in the stop band 48.97-50.97 Hz"
    answers = next(node for node in worker.plan_study_nodes() if "alpha by shift" in node.parameters)
    assert {row["channel"] for row in frame_rows(worker.store.get("statistics", answers.key))} >= {"Fz-Cz"}
