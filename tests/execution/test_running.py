"""Around a run: progress, receipts, the engine's log, and what killed runs have left."""

from __future__ import annotations

import json
import os
import shutil
import subprocess
import sys
import time
from pathlib import Path
from typing import TYPE_CHECKING

import pytest

from bandcairn.errors import EngineError, StudyError
from bandcairn.execution import launch
from bandcairn.execution.abandoned import abandoned_files, in_use
from bandcairn.execution.launch import run_project, workflow_folder
from bandcairn.execution.progress import PIPE_VARIABLE, reporter
from bandcairn.execution.project import open_project
from bandcairn.execution.wiring import RECEIPTS, RUN_VARIABLE, clear_receipts, receipt
from bandcairn.nodes.node import make_node

if TYPE_CHECKING:
    from collections.abc import Callable

NODE = make_node("load", parameters="{}", recording="p1", signal="eeg")
# Above the largest process number of the usual systems.
GONE = 4_194_304 + 7


@pytest.fixture
def study(finished_study: Path, tmp_path: Path) -> Path:
    """Return a finished study of one's own."""
    return Path(shutil.copytree(finished_study, tmp_path / "own"))


class TestProgress:
    """A line a node to whoever watches."""

    def test_each_node_is_a_line_of_json(self, monkeypatch: pytest.MonkeyPatch) -> None:
        """Through the pipe goes step, recording and time of each node."""
        reading, writing = os.pipe()
        monkeypatch.setenv(PIPE_VARIABLE, str(writing))
        reporter()(NODE, 0.25)
        os.close(writing)
        with os.fdopen(reading, encoding="utf-8") as events:
            assert [json.loads(line) for line in events] == [
                {"step": "load", "recording": "p1", "seconds": 0.25}
            ]

    def test_watcher_that_is_gone_does_not_stop_the_work(self, monkeypatch: pytest.MonkeyPatch) -> None:
        """A command that was killed leaves its engine working: no node fails for want of an audience."""
        reading, writing = os.pipe()
        monkeypatch.setenv(PIPE_VARIABLE, str(writing))
        report = reporter()
        os.close(reading)
        report(NODE, 0.25)
        os.close(writing)

    def test_without_a_watcher_nothing_is_told(self, monkeypatch: pytest.MonkeyPatch) -> None:
        """The plain engine opens no pipe."""
        monkeypatch.delenv(PIPE_VARIABLE, raising=False)
        reporter()(NODE, 0.25)


class TestReceipts:
    """Receipts live for one run."""

    def test_runs_have_receipts_of_their_own(self, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
        """One run clears its own receipts and leaves those of a run beside it."""
        for run in ("one", "two"):
            monkeypatch.setenv(RUN_VARIABLE, run)
            path = tmp_path / receipt("load", "batch")
            path.parent.mkdir(parents=True)
            path.touch()
        clear_receipts(tmp_path, "one")
        assert [folder.name for folder in (tmp_path / RECEIPTS).iterdir()] == ["two"]
        clear_receipts(tmp_path, "two")
        assert not (tmp_path / RECEIPTS).exists()

    def test_receipts_of_a_run_killed_long_ago_are_cleared(self, tmp_path: Path) -> None:
        """What no run has touched for more than a week is swept away by the next."""
        for name, age_s in (("old", 8 * 86400), ("young", 6 * 86400)):
            folder = tmp_path / RECEIPTS / name
            folder.mkdir(parents=True)
            os.utime(folder, (time.time() - age_s,) * 2)
        clear_receipts(tmp_path, "own")
        assert [folder.name for folder in (tmp_path / RECEIPTS).iterdir()] == ["young"]


class TestAbandoned:
    """What killed runs leave is found; what living ones write is left alone."""

    def test_half_written_files_of_dead_processes_are_found_everywhere(self, study: Path) -> None:
        """Half-written results, a half-written memory of files and receipts are all counted."""
        old = study / "nodes" / ".raw_index.json.abcd1234"
        left = [
            study / "results" / f".features.csv.{GONE}.tmp",
            old,
            study / RECEIPTS / f"18ed-{GONE}" / "load" / "0000.json",
        ]
        for path in left:
            path.parent.mkdir(parents=True, exist_ok=True)
            path.write_bytes(b"half")
        os.utime(old, (0, 0))
        found = abandoned_files(open_project(study))
        assert {leftover.path for leftover in found} == set(left)
        assert all(leftover.n_bytes == 4 for leftover in found)

    def test_files_of_living_processes_are_in_use(self, tmp_path: Path) -> None:
        """A file whose process lives, or that was written a moment ago, belongs to a run at work."""
        own = tmp_path / f".features.csv.{os.getpid()}.tmp"
        node = tmp_path / f".{'0' * 64}.parquet.{os.getpid()}-1234.tmp"
        young = tmp_path / ".raw_index.json.abcd1234"
        for path in (own, node, young):
            path.touch()
            assert in_use(path)

    def test_files_of_a_killed_process_that_no_one_has_noticed_are_not_in_use(self, tmp_path: Path) -> None:
        """Where nothing collects ended processes, as in some containers, their numbers stay: they write no more."""
        ended = subprocess.Popen([sys.executable, "-c", ""])
        os.waitid(os.P_PID, ended.pid, os.WEXITED | os.WNOWAIT)
        path = tmp_path / f".node.parquet.{ended.pid}-1.tmp"
        path.touch()

        assert not in_use(path)
        ended.wait()

    def test_nodes_are_never_in_use_by_name(self, tmp_path: Path) -> None:
        """A whole node is no temporary file, however young."""
        node = tmp_path / f"{'0' * 64}.parquet"
        node.touch()
        assert not in_use(node)


class TestLaunch:
    """Starting the engine, and what is said when it fails."""

    def test_engine_that_fails_is_told_with_a_log_that_names_no_one(
        self, small_study: Path, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        """The log of a failed engine is kept, private, without the folder of the study, machine or user."""
        script = "import os; print('  Host: here'); print('  User: me'); print('in', os.getcwd()); exit(4)"
        monkeypatch.chdir(small_study)
        monkeypatch.setattr(launch, "engine_command", lambda *_: [sys.executable, "-c", script])
        with pytest.raises(EngineError, match=r"ended with code 4; its log is nodes/last_run.log"):
            run_project(open_project(small_study), 1)
        log = small_study / "nodes" / "last_run.log"
        assert log.read_text("utf-8") == "in STUDY\n"
        assert log.stat().st_mode & 0o777 == 0o600

    def test_engine_that_was_interrupted_is_an_interrupt(
        self, small_study: Path, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        """Ctrl-C that reaches the engine alone is told as an interrupt, not as a fault."""
        command = [sys.executable, "-c", "exit(130)"]
        monkeypatch.setattr(launch, "engine_command", lambda *_: command)
        with pytest.raises(KeyboardInterrupt):
            run_project(open_project(small_study), 1)

    @pytest.mark.parametrize("name", ["nodes", "results"])
    def test_folder_without_permission_is_refused_before_the_engine_starts(
        self, study: Path, edit_study: Callable[..., None], monkeypatch: pytest.MonkeyPatch, name: str
    ) -> None:
        """A folder this user may not write to is named, with a remedy, and no engine is started."""
        edit_study(study, "cutoff_hz: 20, design", "cutoff_hz: 25, design")
        allowed = os.access
        # The administrator may write anywhere: the answer is given for a user who may not.
        monkeypatch.setattr(os, "access", lambda path, mode: allowed(path, mode) and Path(path).name != name)
        monkeypatch.setattr(launch, "engine_command", lambda *_: pytest.fail("the engine was started"))
        with pytest.raises(StudyError, match="a place that cannot be written to") as refused:
            run_project(open_project(study), 1)
        assert [problem.file for problem in refused.value.problems] == [name]

    def test_workflow_stands_in_the_clone(self) -> None:
        """The Snakefile that the command runs is the one of the repository, or of the installed package."""
        assert (workflow_folder() / "Snakefile").is_file()
        assert (workflow_folder() / "profiles" / "default" / "profile.yaml").is_file()
