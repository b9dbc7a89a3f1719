"""The command line: exit codes, what is said and where, and that a wrong word changes nothing."""

from __future__ import annotations

import json
import shutil
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest

from bandcairn.cli.answers import p_value
from bandcairn.cli.app import exit_code_of
from bandcairn.cli.plan import duration
from bandcairn.errors import EngineError

if TYPE_CHECKING:
    from collections.abc import Callable

COMMANDS = ("demo", "check", "plan", "run", "prune")
# What stands in the study, what it becomes, and where the problem must be told.
MISTAKES = (
    ("study.yaml", "mains_hz: 50", "mains_hz: 55", "mains_hz"),
    ("study.yaml", "resample: {rate_hz: 128}", "resample: {rate: 128}", "signals.eeg.resample.rate"),
    ("study.yaml", "cutoff_hz: [0.5, 40]", "cutoff_hz: [40, 0.5]", "signals.eeg.filter[0].cutoff_hz"),
    ("study.yaml", "length_s: 4, overlap: 0.5", "length_s: 4, overlap: 1.5", "signals.eeg.epoch.overlap"),
    (
        "study.yaml",
        "peak_to_peak_uv: 300",
        "peak_to_peak_uv: -300",
        "signals.eeg.epoch.reject.peak_to_peak_uv",
    ),
    (
        "study.yaml",
        "method: welch, segment_s: 2}",
        "method: welsh, segment_s: 2}",
        "signals.eeg.spectrum.method",
    ),
    ("study.yaml", "theta: [4, 8]", "theta: [8, 4]", "signals.eeg.features.bands_hz.theta"),
    ("study.yaml", "channels: [ECG]", "channels: [ECG, ECG]", "signals.heart.channels"),
    (
        "study.yaml",
        "cutoff_hz: [1, 40], design: butterworth",
        "cutoff_hz: [1, 40], design: buterworth",
        "design",
    ),
    ("study.yaml", "order: 2}\n    epoch: {length_s: 60}", "order: 0}\n    epoch: {length_s: 60}", "order"),
    ("study.yaml", "epoch: {length_s: 60}", "epoch: {length_s: -60}", "signals.heart.epoch.length_s"),
    ("study.yaml", "segment_s: 30", "segment: 30", "signals.heart.spectrum.segment"),
    ("study.yaml", "kind: emg", "kind: eng", "signals.arm.kind"),
    ("study.yaml", "feature: heart_rate", "feature: hart_rate", "feature"),
    ("study.yaml", "scale: log10", "scale: log", "scale"),
    ("study.yaml", "name: fatigue by shift", "name: alpha by shift", "name"),
    ("recordings.csv", "p1_night,p1,raw/p1_night.edf,night", "p1_day,p1,raw/p1_night.edf,night", "recording"),
    ("recordings.csv", "raw/p2_day.edf", "raw/p2_dya.edf", "file"),
    ("recordings.csv", "p2_night,p2,", "p2_night,,", "participant"),
    ("segments.csv", "p1_day,hold,10,50", "p1_day,hold,50,10", "stop_s"),
)


@pytest.fixture
def study(finished_study: Path, tmp_path: Path) -> Path:
    """Return a finished study of one's own."""
    return Path(shutil.copytree(finished_study, tmp_path / "own"))


def _told(capfd: pytest.CaptureFixture[str], *arguments: str) -> tuple[int, str, str]:
    """Run a command and return exit code, stdout, stderr."""
    capfd.readouterr()
    code = exit_code_of(list(arguments))
    return code, *capfd.readouterr()


def _tree(folder: Path) -> dict[str, bytes | None]:
    """Return every path below a folder with its content."""
    return {str(path): path.read_bytes() if path.is_file() else None for path in folder.rglob("*")}


class TestSeededMistakes:
    """Twenty mistakes in description and tables."""

    @pytest.mark.parametrize("command", ["run", "plan", "prune", "check"])
    @pytest.mark.parametrize(
        "mistake", MISTAKES, ids=[f"{field}: {after}" for _, _, after, field in MISTAKES]
    )
    def test_each_mistake_is_named_by_every_command_and_nothing_is_written(
        self,
        small_study: Path,
        capfd: pytest.CaptureFixture[str],
        command: str,
        mistake: tuple[str, str, str, str],
    ) -> None:
        """A mistake is told with its file and field, exit 2, and the folder is as it was."""
        file, before, after, field = mistake
        _seed(small_study, file, before, after)
        tree = _tree(small_study)
        code, out, err = _told(capfd, command, str(small_study))
        assert (code, out) == (2, "")
        assert file in err
        assert field in err
        assert "allowed  " in err
        assert "remedy   " in err
        assert "nothing was run, nothing was written" in err
        assert _tree(small_study) == tree

    def test_twenty_mistakes_are_all_named_in_one_pass(
        self, small_study: Path, capfd: pytest.CaptureFixture[str]
    ) -> None:
        """All mistakes that stand in the study at once come in one telling, each with file, place and field."""
        for file, before, after, _ in MISTAKES:
            _seed(small_study, file, before, after)
        tree = _tree(small_study)
        code, out, err = _told(capfd, "run", str(small_study), "--json")
        assert (code, out) == (2, "")
        problems = json.loads(err)["problems"]
        assert _tree(small_study) == tree
        unnamed = [
            mistake
            for mistake in MISTAKES
            if not any(p["file"] == mistake[0] and mistake[3] in p["field"] for p in problems)
        ]
        assert unnamed == []
        assert len(problems) >= len(MISTAKES)
        assert all(p["found"] and p["allowed"] and p["remedy"] for p in problems)


class TestUsage:
    """What is not understood is told, and touches nothing."""

    @pytest.mark.parametrize(
        ("arguments", "told"),
        [
            (["run", "STUDY", "--bogus"], "--bogus"),
            (["runn", "STUDY"], "runn"),
            (["run"], "STUDY"),
            (["run", "STUDY", "--cores", "0"], "--cores"),
            (["run", "STUDY", "--cores", "many"], "--cores"),
            (["plan", "STUDY", "more"], "more"),
        ],
    )
    def test_wrong_command_line_is_exit_2_with_a_sentence(
        self, capfd: pytest.CaptureFixture[str], arguments: list[str], told: str
    ) -> None:
        """An unknown command, option or value, or a missing one: exit 2, named on stderr, no traceback."""
        code, out, err = _told(capfd, *arguments)
        assert (code, out) == (2, "")
        assert told in err
        assert "Traceback" not in err
        assert "fault of bandcairn" not in err

    @pytest.mark.parametrize("command", ["check", "plan", "run", "prune"])
    def test_missing_study_folder_is_exit_2_with_the_remedy(
        self, tmp_path: Path, capfd: pytest.CaptureFixture[str], command: str
    ) -> None:
        """A folder that does not exist is told as the study's fault, and is not made."""
        code, out, err = _told(capfd, command, str(tmp_path / "nowhere"))
        assert (code, out) == (2, "")
        assert "nowhere" in err
        assert "remedy" in err
        assert not (tmp_path / "nowhere").exists()

    @pytest.mark.parametrize("command", COMMANDS)
    def test_help_of_each_command_has_an_example(
        self, capfd: pytest.CaptureFixture[str], command: str
    ) -> None:
        """--help says what the command does and shows how it is called."""
        code, out, _ = _told(capfd, command, "--help")
        assert code == 0
        assert f"Example: bandcairn {command} demo-study" in out

    def test_help_names_every_command_and_research_use(self, capfd: pytest.CaptureFixture[str]) -> None:
        """The program's own help lists the commands and says that no result is a diagnosis."""
        code, out, _ = _told(capfd, "--help")
        assert code == 0
        assert all(f"\n  {command} " in out for command in COMMANDS)
        assert "no result is a diagnosis" in out

    def test_demo_into_an_occupied_folder_is_refused(
        self, tmp_path: Path, capfd: pytest.CaptureFixture[str]
    ) -> None:
        """The demo never writes among files of somebody's own."""
        (tmp_path / "mine.txt").write_text("mine", "utf-8")
        code, _, err = _told(capfd, "demo", str(tmp_path))
        assert code == 2
        assert "a new or an empty folder" in err
        assert [path.name for path in tmp_path.iterdir()] == ["mine.txt"]


class TestErrorsBecomeExitCodes:
    """Only here do errors become exit codes."""

    @pytest.mark.parametrize(
        ("error", "verdict"),
        [
            (ZeroDivisionError("planted"), (70, "a fault of bandcairn: ZeroDivisionError: planted (test_")),
            (EngineError("the engine ended"), (70, "bandcairn: the engine ended")),
            (KeyboardInterrupt(), (130, "interrupted; what was computed is kept")),
            (PermissionError(13, "Permission denied", "nodes"), (2, "nodes: Permission denied")),
            (OSError(28, "No space left on device", "nodes"), (2, "nodes: No space left on device")),
        ],
    )
    def test_error_gives_its_exit_code_and_a_sentence(
        self,
        study: Path,
        monkeypatch: pytest.MonkeyPatch,
        capfd: pytest.CaptureFixture[str],
        error: BaseException,
        verdict: tuple[int, str],
    ) -> None:
        """A fault of ours is 70, an interrupt 130, a disk that refuses 2; each in one sentence, without traceback."""
        _raise_on_open(monkeypatch, error)
        code, out, err = _told(capfd, "run", str(study))
        assert (code, out) == (verdict[0], "")
        assert verdict[1] in err
        assert "Traceback" not in err
        assert len(err.splitlines()) == 1

    def test_error_is_json_where_json_was_asked_for(
        self, study: Path, monkeypatch: pytest.MonkeyPatch, capfd: pytest.CaptureFixture[str]
    ) -> None:
        """With --json an error is JSON on stderr, and stdout stays empty."""
        _raise_on_open(monkeypatch, ZeroDivisionError("planted"))
        code, out, err = _told(capfd, "plan", str(study), "--json")
        assert (code, out) == (70, "")
        assert "planted" in json.loads(err)["error"]

    def test_reader_that_has_had_enough_is_no_error(
        self, study: Path, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        """A closed pipe, as `head` leaves it, ends the command quietly."""
        _raise_on_open(monkeypatch, BrokenPipeError())
        monkeypatch.setattr("os.dup2", lambda *_: None)
        assert exit_code_of(["plan", str(study)]) == 0


class TestJson:
    """What a program reads has the documented keys."""

    def test_check(self, study: Path, capfd: pytest.CaptureFixture[str]) -> None:
        """`check` gives the description with every default, and the files that cannot be read."""
        code, told = _json(capfd, "check", str(study))
        assert code == 0
        assert told.keys() == {"study", "unreadable"}
        assert told["unreadable"] == {}
        assert told["study"]["signals"]["eeg"]["spectrum"]["overlap"] == 0.5
        quality = told["study"]["signals"]["arm"]["quality"]
        assert (quality["flat_share"], quality["on_failure"]) == (0.05, "exclude")

    def test_plan_of_a_finished_study(self, study: Path, capfd: pytest.CaptureFixture[str]) -> None:
        """`plan` of a finished study names nothing."""
        code, told = _json(capfd, "plan", str(study))
        assert code == 0
        assert told == {"nodes": told["nodes"], "missing": 0, "estimated_seconds": 0.0, "would_run": []}
        assert told["nodes"] > 80

    def test_plan_after_an_edit(
        self, study: Path, edit_study: Callable[..., None], capfd: pytest.CaptureFixture[str]
    ) -> None:
        """`plan` gives key, step, recording, signal and the reasons of each node, parents first, and a time."""
        edit_study(study, "cutoff_hz: 20, design", "cutoff_hz: 25, design")
        code, told = _json(capfd, "plan", str(study))
        assert code == 0
        assert told["missing"] == len(told["would_run"])
        assert {node["signal"] for node in told["would_run"]} == {"arm", None}
        assert told["estimated_seconds"] > 0
        assert all(node.keys() == {"key", "step", "recording", "signal", "why"} for node in told["would_run"])
        first = told["would_run"][0]
        assert (first["step"], first["signal"]) == ("filter", "arm")
        assert first["why"] == ["stages[0].cutoff_hz changed from 20 to 25"]
        assert told["would_run"][-1]["recording"] is None

    def test_run(self, study: Path, capfd: pytest.CaptureFixture[str]) -> None:
        """`run` tells its exit code, what it computed, and the failures."""
        code, told = _json(capfd, "run", str(study))
        assert code == 0
        nodes = told.pop("nodes")
        assert nodes > 80
        assert told == {
            "exit_code": 0,
            "computed": 0,
            "results_written": False,
            "failures": [],
            "results": "results",
        }

    def test_prune(self, study: Path, capfd: pytest.CaptureFixture[str]) -> None:
        """`prune` tells files, megabytes and whether they are gone; without --yes they stay."""
        stray = study / "nodes" / "filter" / f"{'0' * 64}.parquet"
        stray.write_bytes(bytes(2_000_000))
        code, told = _json(capfd, "prune", str(study))
        assert (code, told) == (0, {"files": 1, "megabytes": 2.0, "removed": False})
        assert stray.exists()
        code, told = _json(capfd, "prune", str(study), "--yes")
        assert (code, told) == (0, {"files": 1, "megabytes": 2.0, "removed": True})
        assert not stray.exists()


class TestPlanForPeople:
    """`plan` in words."""

    def test_every_kind_of_reason_is_named(
        self, study: Path, edit_study: Callable[..., None], capfd: pytest.CaptureFixture[str]
    ) -> None:
        """A changed parameter is told with both values, a child with what it follows, a lost file as lost."""
        edit_study(study, "cutoff_hz: 20, design", "cutoff_hz: 25, design")
        lost = next((study / "nodes" / "beats").iterdir())
        lost.unlink()
        code, out, err = _told(capfd, "plan", str(study), "--cores", "2")
        assert (code, err) == (0, "")
        assert "stages[0].cutoff_hz changed from 20 to 25" in out
        assert "follows filter" in out
        assert "its file is missing" in out
        assert out.splitlines()[-1].endswith("on 2 cores")

    def test_study_without_a_run_is_all_new(
        self, small_study: Path, capfd: pytest.CaptureFixture[str]
    ) -> None:
        """Before the first run every node is new, and no time is invented."""
        code, out, _ = _told(capfd, "plan", str(small_study))
        assert code == 0
        assert " new\n" in out
        assert "no earlier run to estimate the time from" in out
        assert not (small_study / "results").exists()

    @pytest.mark.parametrize(
        ("seconds", "words"),
        [
            (0.1, "1 s"),
            (89, "89 s"),
            (90, "2 min"),
            (5340, "89 min"),
            (5400, "1 h 30 min"),
            (7260, "2 h 1 min"),
        ],
    )
    def test_durations_read_as_people_say_them(self, seconds: float, words: str) -> None:
        """Seconds below one and a half minutes, minutes below one and a half hours, then hours."""
        assert duration(seconds) == words


def test_check_prints_the_study_in_full_with_its_defaults_marked(
    study: Path, edit_study: Callable[..., None], capfd: pytest.CaptureFixture[str]
) -> None:
    """`check` prints every key; its text, taken as study.yaml, means the same study."""
    edit_study(study, "spectrum: {method: periodogram}", "spectrum: {method: welch, segment_s: 0.5}")
    code, out, err = _told(capfd, "check", str(study))
    assert (code, err) == (0, "")
    assert "on_failure: exclude  # default" in out
    assert "mains_hz: 50\n" in out
    described = _json(capfd, "check", str(study))
    (study / "study.yaml").write_text(out, "utf-8")
    assert _json(capfd, "check", str(study)) == described


@pytest.mark.parametrize(
    ("p", "printed"), [(None, ""), (0.0004, "< .001"), (0.001, ".001"), (0.0496, ".050"), (1.0, "1.000")]
)
def test_p_values_are_printed_as_papers_do(p: float | None, printed: str) -> None:
    """Three digits without the leading zero, and never as zero."""
    assert p_value(p) == printed


def _seed(folder: Path, file: str, before: str, after: str) -> None:
    path = folder / file
    text = path.read_text("utf-8")
    assert before in text, before
    path.write_text(text.replace(before, after, 1), "utf-8")


def _json(capfd: pytest.CaptureFixture[str], *arguments: str) -> tuple[int, Any]:
    """Run a command with --json and return exit code and what it said."""
    code, out, err = _told(capfd, *arguments, "--json")
    assert err == ""
    return code, json.loads(out)


def _raise_on_open(monkeypatch: pytest.MonkeyPatch, error: BaseException) -> None:
    """Let the opening of any study raise an error."""

    def faulty(*_: object) -> None:
        raise error

    monkeypatch.setattr("bandcairn.execution.project.open_project", faulty)
