"""Carrying out nodes: one failure stays its own, damage is healed, a file that changes is not trusted."""

from __future__ import annotations

import json
import os
import shutil
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest

import bandcairn.execution.worker as worker_module
from bandcairn.errors import RecordingError
from bandcairn.execution.compute import compute
from bandcairn.execution.failure import Failure
from bandcairn.execution.project import open_project
from bandcairn.execution.worker import Work, Worker

if TYPE_CHECKING:
    from bandcairn.nodes.node import Node
    from bandcairn.store.frame import Frame


@pytest.fixture
def study(finished_study: Path, tmp_path: Path) -> Path:
    """Return a finished study of one's own."""
    return Path(shutil.copytree(finished_study, tmp_path / "own"))


def _fail_at(monkeypatch: pytest.MonkeyPatch, error: Exception, step: str, recording: str) -> None:
    """Let the computing of one node raise an error."""

    def faulty(node: Node, parents: dict[str, Frame], project: Any) -> Frame:  # noqa: ANN401 - a Project
        if (node.step, node.recording) == (step, recording):
            raise error
        return compute(node, parents, project)

    monkeypatch.setattr(worker_module, "compute", faulty)


def test_nodes_that_stand_are_not_computed_again(study: Path) -> None:
    """Existence is freshness: a finished study gives the worker nothing to do."""
    project = open_project(study)
    assert Worker(project).work(project.plan.nodes.values()) == Work([], [])


def test_failed_node_fails_alone_and_its_children_stay_silent(
    small_study: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A step that refuses its input is told once; other recordings, and other signals of this one, are done."""
    _fail_at(monkeypatch, RecordingError("too short"), "beats", "p1_night")
    project = open_project(small_study)
    done = Worker(project).work(project.plan.recording_nodes.values())
    assert done.failures == [Failure("p1_night", "heart", "beats", "too short")]
    missing = {(node.recording, node.signal, node.step) for node in project.missing() if node.recording}
    assert missing == {("p1_night", "heart", step) for step in ("beats", "spectrum", "features")}


def test_fault_of_our_own_is_kept_with_its_place_but_without_folders(
    small_study: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """An error that is not the recording's is marked as ours; its trace names files and lines, no folder."""
    _fail_at(monkeypatch, FileNotFoundError(f"no {small_study}/nodes/x"), "epoch", "p1_day")
    project = open_project(small_study)
    done = Worker(project).work(project.plan.recording_nodes.values())
    assert {failure.recording for failure in done.failures} == {"p1_day"}
    first = done.failures[0]
    assert first.reason == "fault of bandcairn: FileNotFoundError: no nodes/x"
    assert "worker.py, line" in first.fault
    assert first.fault.endswith("FileNotFoundError")
    assert os.sep not in first.fault


def test_damaged_parent_is_computed_anew_for_its_child(study: Path) -> None:
    """A parent whose file is torn is made again from its own parents, down to the raw file if need be."""
    project = open_project(study)
    chain = {
        node.step: node
        for node in project.plan.recording_nodes.values()
        if (node.recording, node.signal) == ("p1_day", "arm")
    }
    worker = Worker(project)
    for step in ("load", "filter"):
        path = worker.store.path(step, chain[step].key)
        path.write_bytes(path.read_bytes()[:100])
    worker.store.path("epoch", chain["epoch"].key).unlink()
    done = worker.work([chain["epoch"]])
    assert done.failures == []
    assert [record["step"] for record in done.records] == ["load", "filter", "epoch"]


def test_heal_reads_whole_nodes_and_mends_damaged_ones(study: Path) -> None:
    """Only the damaged one of some nodes is computed anew, with the same data."""
    project = open_project(study)
    worker = Worker(project)
    nodes = list(project.plan.study_nodes.values())
    before = [worker.store.record(node.step, node.key)["data_digest"] for node in nodes]
    path = worker.store.path(nodes[0].step, nodes[0].key)
    path.write_bytes(b"PAR1 and no more")
    healed = Worker(project).heal(nodes)
    assert [record["key"] for record in healed] == [nodes[0].key]
    assert [worker.store.record(node.step, node.key)["data_digest"] for node in nodes] == before


def test_file_that_changes_while_the_study_runs_is_refused(small_study: Path) -> None:
    """What was read from a file that is no longer as it was surveyed is thrown away, and the run says so."""
    project = open_project(small_study)
    file = small_study / "raw" / "p1_day.edf"
    file.write_bytes(file.read_bytes() + b" ")
    loads = [node for node in project.plan.recording_nodes.values() if node.step == "load"]
    done = Worker(project).work(loads)
    assert {failure.recording for failure in done.failures} == {"p1_day"}
    assert not any(
        Worker(project).store.has("load", node.key) for node in loads if node.recording == "p1_day"
    )


def test_file_that_changes_during_one_read_is_refused_afterwards(small_study: Path) -> None:
    """The state is compared after reading, too: a change in the midst of it does not slip through."""
    survey = open_project(small_study).survey
    with (
        pytest.raises(RecordingError, match="has changed while the study was running; run again"),
        survey.unchanged_file("p1_day") as path,
    ):
        path.write_bytes(path.read_bytes() + b" ")
    with survey.unchanged_file("p1_night") as path:
        assert path.name == "p1_night.edf"


def test_file_that_vanishes_while_the_study_runs_is_told(small_study: Path) -> None:
    """A file that is removed, or whose drive goes away, fails its recording and no other."""
    project = open_project(small_study)
    (small_study / "raw" / "p2_day.edf").unlink()
    loads = [node for node in project.plan.recording_nodes.values() if node.step == "load"]
    done = Worker(project).work(loads)
    assert {(failure.recording, failure.fault) for failure in done.failures} == {("p2_day", "")}


def test_work_survives_its_receipt() -> None:
    """What a receipt tells is what was done."""
    work = Work(
        [{"key": "k", "step": "load", "recording": "ä", "seconds": 0.5}], [Failure("r", "s", "load", "no")]
    )
    assert Work.from_json(work.to_json()) == work
    assert json.loads(work.to_json())["records"][0]["recording"] == "ä"
    assert work.log() == "load ä 0.500 s\nFAILED load r s: no\n\n"


def test_sentence_of_a_failure_names_the_step_once() -> None:
    """A reason that names its step already is not given it twice."""
    assert Failure("r", "s", "filter", "filter: too short").sentence == "filter: too short"
    assert Failure("r", "s", "load", "no such channel").sentence == "load: no such channel"
