"""Whole studies by the command line and the engine: what runs and what does not, side by side, damaged, interrupted."""

from __future__ import annotations

import os
import platform
import re
import shutil
import signal
import stat
import subprocess
import sys
import time
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd
import pytest

from bandcairn.api import Study
from bandcairn.cli.app import exit_code_of
from bandcairn.recordings.export import ExportChannel, write_delimited, write_edf

if TYPE_CHECKING:
    from collections.abc import Callable

    Edit = Callable[[Path, str, str], None]

BIN = Path(sys.executable).parent
WORKFLOW = Path(__file__).parent.parent / "workflow" / "Snakefile"
EMG_FILTER = "cutoff_hz: 20, design"
OTHER_EMG_FILTER = "cutoff_hz: 25, design"
TABLES = ("features", "statistics", "quality", "exclusions")


@pytest.fixture
def study(finished_study: Path, tmp_path: Path) -> Path:
    """Return a finished study of one's own."""
    return Path(shutil.copytree(finished_study, tmp_path / "own"))


@pytest.fixture(scope="module")
def plain(finished_study: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return the study, run from nothing by plain Snakemake."""
    folder = _unrun(finished_study, tmp_path_factory.mktemp("plain") / "study")
    done = _snakemake(folder, "--cores", "2")
    assert done.returncode == 0, done.stderr
    return folder


def _run(folder: Path, cores: int = 2) -> int:
    return exit_code_of(["run", str(folder), "--cores", str(cores)])


def _planned(folder: Path) -> set[tuple[str, str, str]]:
    """Return step, signal and recording of every node that would run."""
    return {(r.node.step, r.node.signal, r.node.recording) for r in Study(folder).plan()}


def _ledger(folder: Path) -> pd.DataFrame:
    return pd.read_parquet(folder / "results" / "ledger.parquet").set_index("key")


def _digests(folder: Path) -> dict[str, str]:
    return {str(key): digest for key, digest in _ledger(folder)["data_digest"].items()}


def _results(folder: Path) -> dict[str, bytes]:
    return {name: (folder / "results" / f"{name}.csv").read_bytes() for name in TABLES}


def _change_sample(file: Path) -> None:
    """Flip the lowest bit of the first sample of the first channel of an EDF file."""
    content = bytearray(file.read_bytes())
    content[int(content[184:192])] ^= 1
    file.write_bytes(content)


class TestStaleness:
    """What a change touches is computed, and nothing else."""

    def test_second_run_computes_nothing(self, study: Path, capfd: pytest.CaptureFixture[str]) -> None:
        """Where everything stands, a run says so, starts no engine and leaves every file as it is."""
        before = {path: path.stat().st_mtime_ns for path in study.rglob("*") if path.is_file()}
        assert _run(study) == 0
        assert "nothing to compute: all" in capfd.readouterr().out
        after = {path: path.stat().st_mtime_ns for path in study.rglob("*") if path.is_file()}
        index = study / "nodes" / "raw_index.json"  # a copy's files are looked at once
        assert {path: when for path, when in after.items() if path != index} == {
            path: when for path, when in before.items() if path != index
        }
        assert not (study / ".snakemake").exists()

    def test_one_emg_cutoff_runs_emg_from_the_filter_on_and_changed_back_nothing(
        self, study: Path, edit_study: Edit, capfd: pytest.CaptureFixture[str]
    ) -> None:
        """One EMG cut-off: filter and what follows of EMG alone runs, as the ledger's times tell; back: nothing."""
        before = _ledger(study)
        edit_study(study, EMG_FILTER, OTHER_EMG_FILTER)
        planned = {(step, signal) for step, signal, _ in _planned(study)}
        # What the filter asks of a recording is part of what its quality is held against: hence the verdict.
        steps = ("filter", "epoch", "spectrum", "features", "verdict", "table")
        assert planned == {(step, "arm") for step in steps} | {("statistics", "")}
        assert _run(study) == 0
        after = _ledger(study)
        anew = after[~after.index.isin(before.index)]
        assert set(zip(anew["step"], anew["signal"].fillna(""), strict=True)) == planned
        assert (after["started"] > before["started"].max()).sum() == len(anew) == 4 * 4 + 3
        stood = after.loc[after.index.isin(before.index), "started"]
        assert stood.equals(before.loc[stood.index, "started"])

        edit_study(study, OTHER_EMG_FILTER, EMG_FILTER)
        capfd.readouterr()
        assert _run(study) == 0
        assert "nothing to compute" in capfd.readouterr().out
        assert _ledger(study).equals(before)

    def test_copied_and_touched_study_runs_nothing(self, study: Path, tmp_path: Path) -> None:
        """Another place and other time stamps are no other content."""
        elsewhere = Path(shutil.copytree(study, tmp_path / "elsewhere" / "deep"))
        for path in elsewhere.rglob("*"):
            os.utime(path, (1_000_000_000, 1_000_000_000))
        assert Study(elsewhere).plan() == []

    def test_changed_patient_name_runs_nothing(self, study: Path) -> None:
        """The identity in a header is no part of the content: a de-identified copy keeps its nodes."""
        for file in (study / "raw").glob("*.edf"):
            content = bytearray(file.read_bytes())
            content[8:88] = b"MCH-0234567 F 02-MAY-1951 Haagse_Harry".ljust(80)
            file.write_bytes(content)
        assert Study(study).plan() == []

    def test_one_changed_sample_runs_its_signal_of_its_recording(self, study: Path) -> None:
        """One EEG sample: the nodes of EEG of that recording, and the tables and answers that stand on them."""
        _change_sample(study / "raw" / "p1_day.edf")
        steps = ("load", "quality", "resample", "filter", "epoch", "spectrum", "features")
        own = {(step, "eeg", "p1_day") for step in steps}
        assert _planned(study) == own | {
            ("verdict", "eeg", ""),
            ("table", "eeg", ""),
            ("statistics", "", ""),
        }
        assert "raw data changed" in str([reason.why for reason in Study(study).plan()])

    def test_rows_in_another_order_run_nothing(self, study: Path) -> None:
        """The order of the recordings table is no part of any recipe, nor of the results."""
        before = _results(study)
        table = study / "recordings.csv"
        header, *rows = table.read_text("utf-8").splitlines()
        table.write_text("\n".join([header, *reversed(rows)]) + "\n", "utf-8")
        assert Study(study).plan() == []
        assert _run(study) == 0
        assert _results(study) == before

    def test_edited_and_deleted_results_are_written_anew_without_computing(
        self, study: Path, capfd: pytest.CaptureFixture[str]
    ) -> None:
        """A number altered by hand does not survive a run, a lost file comes back, and both are told."""
        before = _results(study)
        with (study / "results" / "statistics.csv").open("a", encoding="utf-8") as file:
            file.write("by hand\n")
        (study / "results" / "features.csv").unlink()
        assert exit_code_of(["plan", str(study)]) == 0
        assert "results are missing or changed and would be written anew" in capfd.readouterr().out
        assert _run(study) == 0
        assert "nothing to compute: all" in (told := capfd.readouterr().out)
        assert "results written anew" in told
        assert _results(study) == before
        shutil.rmtree(study / "results")
        assert _run(study) == 0
        assert _results(study) == before


class TestWaysToRun:
    """One core or two, our command or the plain engine: the same data, to the last bit."""

    @pytest.mark.parametrize("cores", [1, 2])
    def test_cores_and_engine_give_equal_keys_digests_and_results(
        self, finished_study: Path, plain: Path, tmp_path: Path, cores: int
    ) -> None:
        """Run with one core and with two, by plain Snakemake, and without engine: equal digests, equal tables."""
        folder = _unrun(finished_study, tmp_path / "study")
        assert _run(folder, cores) == 0
        assert _digests(folder) == _digests(plain) == _digests(finished_study)
        assert _results(folder) == _results(plain) == _results(finished_study)

    def test_dry_run_of_a_finished_study_says_nothing_to_be_done(self, plain: Path) -> None:
        """The engine itself says of a finished study that there is nothing to do."""
        done = _snakemake(plain, "-n")
        assert done.returncode == 0, done.stderr
        assert "Nothing to be done" in done.stdout + done.stderr

    def test_no_receipt_and_no_log_of_the_engine_is_left(self, plain: Path) -> None:
        """What the engine needs for one run is gone when it ends."""
        assert not (plain / "nodes" / ".receipts").exists()
        assert list((plain / ".snakemake" / "log").iterdir()) == []

    def test_two_runs_at_the_same_time_do_no_harm(self, finished_study: Path, tmp_path: Path) -> None:
        """Two runs of one study side by side both end well, with the data of an undisturbed run."""
        folder = _unrun(finished_study, tmp_path / "study")
        runs = [_start("run", str(folder), "--cores", "1") for _ in range(2)]
        told = [run.communicate() for run in runs]
        assert [run.returncode for run in runs] == [0, 0], told
        assert _digests(folder) == _digests(finished_study)
        assert _results(folder) == _results(finished_study)
        assert _run(folder) == 0

    def test_run_speaks_plainly_where_no_one_watches(self, finished_study: Path, tmp_path: Path) -> None:
        """Without a terminal there is no progress, no colour, no word of the engine."""
        folder = Path(shutil.copytree(finished_study, tmp_path / "study"))
        shutil.rmtree(folder / "nodes" / "statistics")
        run = _start("run", str(folder))
        out, err = run.communicate()
        assert (run.returncode, err) == (0, "")
        assert re.match(r"computed 2 of \d+ nodes in \d+ s\nleft out: nothing .*\nresults: ", out)
        assert "\x1b" not in out
        assert len(out.splitlines()) == 4


class TestPrivacy:
    """Recordings are of people: nothing tells who worked on them and where."""

    def test_nothing_names_the_folder_the_machine_or_the_user(
        self, finished_study: Path, tmp_path: Path
    ) -> None:
        """Neither store nor results nor the engine's folder carries the path of the study, the machine or the user."""
        folder = _unrun(finished_study, tmp_path / "a_telling_name")
        assert _run(folder) == 0
        written = [path for part in ("nodes", "results", ".snakemake") for path in (folder / part).rglob("*")]
        files = [path for path in written if path.is_file()]
        assert len(files) > 50
        for path in files:
            content = path.read_bytes()
            assert b"a_telling_name" not in content, path
            assert str(Path.home()).encode() + b"/" not in content, path
        told = b"".join(path.read_bytes() for path in files if path.suffix in {".json", ".csv", ".log"})
        machine = re.escape(platform.node().encode())
        assert not re.search(rb"\b(Host|User): |\b" + machine + rb"\b(?!\w)", told)

    def test_every_file_of_store_and_results_is_private(self, finished_study: Path, tmp_path: Path) -> None:
        """Files are readable by their owner alone, folders are open to their owner alone."""
        folder = _unrun(finished_study, tmp_path / "study")
        assert _run(folder) == 0
        for part in ("nodes", "results"):
            for path in [folder / part, *(folder / part).rglob("*")]:
                allowed = 0o700 if path.is_dir() else 0o600
                assert stat.S_IMODE(path.stat().st_mode) == allowed, path


class TestDamage:
    """Nodes, files and runs come to harm; the next run mends it."""

    def test_damaged_node_is_healed_when_its_child_is_computed(self, study: Path) -> None:
        """A flipped byte in a node's data is found when the node is read, and the node computed anew."""
        whole = _digests(study)
        table = _ledger(study)
        damaged = study / table[(table["step"] == "filter") & (table["signal"] == "arm")]["path"].iloc[0]
        content = bytearray(damaged.read_bytes())
        content[len(content) // 2] ^= 0xFF
        damaged.write_bytes(content)
        for step in ("epoch", "spectrum", "features", "table", "statistics"):
            shutil.rmtree(study / "nodes" / step)
        assert _run(study) == 0
        assert damaged.read_bytes() != bytes(content)
        assert _digests(study) == whole

    @pytest.mark.parametrize("step", ["verdict", "table", "statistics"])
    def test_damaged_table_is_healed_when_results_are_written(self, study: Path, step: str) -> None:
        """A damaged node of the study is computed anew when the results are gathered from it."""
        before, digests = _results(study), _digests(study)
        node = next((study / "nodes" / step).iterdir())
        node.write_bytes(node.read_bytes()[:-20])
        shutil.rmtree(study / "results")
        assert _run(study) == 0
        assert _results(study) == before
        assert _digests(study) == digests

    @pytest.mark.parametrize("seed", [1, 2, 3])
    def test_killed_run_is_resumed_to_the_same_data(
        self, finished_study: Path, tmp_path: Path, seed: int
    ) -> None:
        """Kill -9 at any moment, every process at once: the next run ends with the data of an undisturbed run.

        Whatever was half-written is counted by prune, and no half-written node passes for a whole one.
        """
        folder = _unrun(finished_study, tmp_path / "study")
        run = _start("run", str(folder), "--cores", "2")
        deadline = time.monotonic() + 60
        # Some time after the first node, so that kills fall into the work rather than into the start.
        while not list((folder / "nodes").glob("load/*.parquet")) and time.monotonic() < deadline:
            time.sleep(0.01)
        time.sleep(float(np.random.default_rng(seed).uniform(0, 0.8)))
        os.killpg(run.pid, signal.SIGKILL)
        run.communicate()
        half_written = [path for path in folder.rglob("*.tmp") if path.is_file()]
        counted = _pruned(folder)
        assert half_written == [] or counted >= len(half_written)
        assert _run(folder) == 0
        assert _digests(folder) == _digests(finished_study)
        assert _results(folder) == _results(finished_study)

    def test_interrupted_run_says_so_and_is_resumed(self, finished_study: Path, tmp_path: Path) -> None:
        """Ctrl-C to the command alone: exit 130 and a sentence, the engine ended, and the next run goes on."""
        folder = _unrun(finished_study, tmp_path / "study")
        run = _start("run", str(folder), "--cores", "1")
        deadline = time.monotonic() + 60
        while not list((folder / "nodes").glob("load/*.parquet")) and time.monotonic() < deadline:
            time.sleep(0.01)
        os.kill(run.pid, signal.SIGINT)
        _, err = run.communicate(timeout=30)
        assert run.returncode == 130
        assert "interrupted; what was computed is kept" in err
        assert "Traceback" not in err
        stood = {path.name for path in (folder / "nodes" / "load").iterdir()}
        time.sleep(0.5)
        assert {path.name for path in (folder / "nodes" / "load").iterdir()} == stood
        assert _run(folder) == 0
        assert _digests(folder) == _digests(finished_study)

    @pytest.mark.parametrize("name", ["nodes", "results"])
    def test_folder_that_cannot_be_written_is_a_plain_refusal(
        self, study: Path, edit_study: Edit, name: str, capfd: pytest.CaptureFixture[str]
    ) -> None:
        """Where store or results cannot be written, the run says which, before anything is computed."""
        edit_study(study, EMG_FILTER, OTHER_EMG_FILTER)
        shutil.rmtree(study / name)
        (study / name).write_text("a file in the place of the folder", "utf-8")
        assert _run(study) == 2
        told = capfd.readouterr().err
        assert re.search(rf"^{name}\n|/{name}/load: Not a directory", told)
        assert "Traceback" not in told


BRAIN_ONLY = """\
study: Harbour, brain only
mains_hz: 50
load: {unit: uV, rate_hz: 256}
signals:
  eeg:
    kind: eeg
    channels: [Fz, Cz]
    filter:
      - {type: bandpass, cutoff_hz: [0.5, 40], design: butterworth, order: 4}
    epoch: {length_s: 2}
    spectrum: {method: welch, segment_s: 2}
    features:
      bands_hz: {theta: [4, 8], alpha: [8, 13]}
questions:
  - name: alpha by shift
    signal: eeg
    feature: band_power
    band: alpha
    within: condition
    contrast: [night, day]
    test: paired_t
"""


def _brain(path: Path, seed: int, length_s: int = 20) -> None:
    """Write noise of two channels."""
    samples = np.random.default_rng(seed).normal(0, 10, (2, 256 * length_s))
    if path.suffix == ".csv":
        write_delimited(path, ("Fz", "Cz"), list(samples))
        return
    write_edf(
        path,
        [
            ExportChannel(label, "uV", 256, row, (-400, 400))
            for label, row in zip(("Fz", "Cz"), samples, strict=True)
        ],
    )


@pytest.fixture
def brains(tmp_path: Path) -> Path:
    """Return a study of six people by day and night, EEG alone, whose first recording is delimited text."""
    folder = tmp_path / "brains"
    (folder / "raw").mkdir(parents=True)
    (folder / "study.yaml").write_text(BRAIN_ONLY, "utf-8")
    rows = ["recording,participant,file,condition"]
    for person in range(1, 7):
        for shift, condition in enumerate(("day", "night")):
            name = f"p{person}_{condition}"
            file = f"raw/{name}.csv" if name == "p1_day" else f"raw/{name}.edf"
            _brain(folder / file, 10 * person + shift)
            rows.append(f"{name},p{person},{file},{condition}")
    (folder / "recordings.csv").write_text("\n".join(rows) + "\n", "utf-8")
    return folder


class TestFailures:
    """Some recordings fail; the others do not suffer, and the truth is told."""

    def test_failed_recordings_are_told_the_rest_is_done_and_only_they_are_tried_again(
        self, brains: Path, capfd: pytest.CaptureFixture[str]
    ) -> None:
        """Not finite, truncated, too short to filter: exit 3, reasons in exclusions, true n; mended: exit 0."""
        kept = {
            name: (brains / "raw" / name).read_bytes() for name in ("p1_day.csv", "p2_day.edf", "p3_day.edf")
        }
        lines = kept["p1_day.csv"].decode().splitlines()
        lines[500] = "nan," + lines[500].split(",")[1]
        (brains / "raw" / "p1_day.csv").write_text("\n".join(lines) + "\n", "utf-8")
        (brains / "raw" / "p2_day.edf").write_bytes(kept["p2_day.edf"][:10_000])
        _brain(brains / "raw" / "p3_day.edf", seed=1, length_s=2)

        assert _run(brains) == 3
        told = capfd.readouterr().err
        assert "3 recordings have failed: p1_day, p2_day, p3_day" in told
        reasons = _reasons(brains)
        assert "'nan' in row 500 (line 501), column Fz" in reasons["p1_day"]
        assert "data records" in reasons["p2_day"]
        assert "gap-free run of 2.000 s" in reasons["p3_day"]
        answers = Study(brains).statistics()
        assert set(answers["n_participants"]) == {3}
        assert all("p1" in note and "p2" in note and "p3" in note for note in answers["note"])
        done = set(Study(brains).features()["recording"])
        assert len(done) == 9
        before = _ledger(brains)

        capfd.readouterr()
        assert _run(brains) == 3
        assert "computed 0 of" in capfd.readouterr().out
        assert _reasons(brains) == reasons
        assert _ledger(brains)["started"].equals(before["started"])

        for name, content in kept.items():
            (brains / "raw" / name).write_bytes(content)
        assert _run(brains) == 0
        after = _ledger(brains)
        assert after.loc[before.index.intersection(after.index), "started"].equals(
            before.loc[before.index.intersection(after.index), "started"]
        )
        assert set(Study(brains).statistics()["n_participants"]) == {6}
        assert Study(brains).exclusions().empty

    def test_recordings_of_equal_content_all_tell_their_failure(self, brains: Path) -> None:
        """Where a study accepts equal content its rows share nodes; each is told as failed, none silently absent."""
        study = brains / "study.yaml"
        study.write_text("accept_same_content: a drill\n" + study.read_text("utf-8"), "utf-8")
        _brain(brains / "raw" / "p3_day.edf", seed=1, length_s=2)
        shutil.copyfile(brains / "raw" / "p3_day.edf", brains / "raw" / "p4_day.edf")
        assert _run(brains) == 3
        assert _reasons(brains).keys() == {"p3_day", "p4_day"}

    def test_study_whose_recordings_all_fail_ends_with_empty_answers(self, brains: Path) -> None:
        """Nothing can be computed: exit 3, every recording told, and answers that say they have no one."""
        for seed, file in enumerate((brains / "raw").iterdir()):
            _brain(file, seed, length_s=2)
        assert _run(brains) == 3
        assert len(_reasons(brains)) == 12
        answers = Study(brains).statistics()
        assert set(answers["n_participants"]) == {0}
        assert answers["estimate"].isna().all()
        assert (answers["status"] != "ok").all()

    def test_fault_of_bandcairn_in_one_recording_is_exit_70_and_the_others_are_done(
        self,
        brains: Path,
        tmp_path: Path,
        monkeypatch: pytest.MonkeyPatch,
        capfd: pytest.CaptureFixture[str],
    ) -> None:
        """A programming error in one node is told as ours, without a traceback; the other recordings are done."""
        # Loaded by the engine's process at its start.
        (tmp_path / "sitecustomize.py").write_text(
            "import bandcairn.execution.worker as worker\n"
            "sound = worker.compute\n"
            "def faulty(node, parents, project):\n"
            "    if (node.step, node.recording) == ('spectrum', 'p5_night'):\n"
            "        raise ZeroDivisionError('planted')\n"
            "    return sound(node, parents, project)\n"
            "worker.compute = faulty\n",
            "utf-8",
        )
        monkeypatch.setenv("PYTHONPATH", str(tmp_path), prepend=os.pathsep)
        assert _run(brains) == 70
        told = capfd.readouterr().err
        assert "failed: p5_night eeg: spectrum: fault of bandcairn: ZeroDivisionError: planted" in told
        assert "Traceback" not in told
        assert _reasons(brains).keys() == {"p5_night"}
        assert set(Study(brains).statistics()["n_participants"]) == {5}
        monkeypatch.undo()
        assert _run(brains) == 0


class TestPrune:
    """What is no longer needed goes; what is needed stays."""

    def test_prune_keeps_what_the_study_needs(
        self, study: Path, edit_study: Edit, capfd: pytest.CaptureFixture[str]
    ) -> None:
        """After an edit and a run, prune removes the former nodes alone: nothing is computed; changed back, all is."""
        former = set(_ledger(study).index)
        edit_study(study, EMG_FILTER, OTHER_EMG_FILTER)
        assert _run(study) == 0
        needed = set(_ledger(study).index)
        capfd.readouterr()
        assert exit_code_of(["prune", str(study)]) == 0
        count = len(former - needed)
        assert f"not removed (--yes removes them): {count} files" in capfd.readouterr().out
        assert exit_code_of(["prune", str(study), "--yes"]) == 0
        assert f"removed {count} files" in capfd.readouterr().out
        stored = {path.stem for path in (study / "nodes").glob("*/*.parquet")}
        assert stored == needed
        assert exit_code_of(["prune", str(study), "--yes"]) == 0
        assert "nothing to prune" in capfd.readouterr().out
        assert Study(study).plan() == []
        edit_study(study, OTHER_EMG_FILTER, EMG_FILTER)
        assert {reason.node.key for reason in Study(study).plan()} == former - needed


def _unrun(finished: Path, folder: Path) -> Path:
    """Return a copy of a study as it was before its first run."""
    return Path(shutil.copytree(finished, folder, ignore=shutil.ignore_patterns("nodes", "results")))


def _start(*arguments: str) -> subprocess.Popen[str]:
    """Start the command in a group of processes of its own."""
    return subprocess.Popen(
        [str(BIN / "bandcairn"), *arguments],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        start_new_session=True,
    )


def _snakemake(folder: Path, *arguments: str) -> subprocess.CompletedProcess[str]:
    command = [str(BIN / "snakemake"), "--snakefile", str(WORKFLOW), "--directory", str(folder), *arguments]
    return subprocess.run(command, capture_output=True, text=True, check=False)


def _pruned(folder: Path) -> int:
    """Remove what prune finds, and return the number of files."""
    from bandcairn.cli.prune import _leftovers
    from bandcairn.execution.project import open_project

    found = _leftovers(open_project(folder))
    for leftover in found:
        leftover.path.unlink()
    return len(found)


def _reasons(folder: Path) -> dict[str, str]:
    """Return why each recording failed."""
    rows: list[dict[str, Any]] = Study(folder).exclusions().to_dict("records")  # type: ignore[assignment]
    return {row["recording"]: row["reason"] for row in rows if row["what"] in {"recording", "signal"}}
