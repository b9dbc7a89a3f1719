"""``bandcairn new`` on the command line."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING

import numpy as np
import pytest

from bandcairn.cli.app import exit_code_of
from bandcairn.cli.console import DONE, SOME_FAILED, STUDY_AT_FAULT
from bandcairn.recordings.export import ExportChannel, write_edf

if TYPE_CHECKING:
    from pathlib import Path


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """Return a folder of two recordings with hum at 60 Hz."""
    time_s = np.arange(40 * 256) / 256
    for person in (1, 2):
        hum = 30 * np.sin(2 * np.pi * 60 * time_s)
        samples = 20 * np.random.default_rng(person).standard_normal(time_s.size) + hum
        write_edf(tmp_path / f"p{person}.edf", [ExportChannel("Fz", "uV", 256, samples, (-500.0, 500.0))])
    return tmp_path


def test_drafts_say_what_was_guessed_and_what_to_do_next(
    folder: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    """The last line is the next command, and that command finds no problem."""
    assert exit_code_of(["new", str(folder)]) == DONE
    told = capfd.readouterr().out
    assert "guessed  study.yaml, line" in told
    assert "written to" in told
    assert told.rstrip().endswith(f"bandcairn check {folder}")
    assert exit_code_of(["check", str(folder)]) == DONE


def test_json_holds_what_was_found(folder: Path, capfd: pytest.CaptureFixture[str]) -> None:
    """For a program: signals, people, mains, guesses and the files written; nothing else on stdout."""
    assert exit_code_of(["new", str(folder), "--json"]) == DONE
    found = json.loads(capfd.readouterr().out)
    assert found["mains_hz"] == 60
    assert found["signals"]["eeg"]["channels"] == ["Fz"]
    assert [row["participant"] for row in found["recordings"]] == ["p1", "p2"]
    assert found["written"] == ["recordings.csv", "study.yaml"]
    assert found["guesses"]


def test_a_second_draft_is_refused_with_the_files_in_the_way(
    folder: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    """Named, with the remedy, and before any file is read."""
    exit_code_of(["new", str(folder)])
    before = (folder / "study.yaml").read_bytes()
    capfd.readouterr()
    assert exit_code_of(["new", str(folder)]) == STUDY_AT_FAULT
    told = capfd.readouterr().err
    assert all(text in told for text in ("study.yaml", "recordings.csv", "nothing is ever overwritten"))
    assert (folder / "study.yaml").read_bytes() == before


def test_an_unreadable_recording_is_left_out_and_tells_by_the_exit_code(
    folder: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    """The others make the study."""
    (folder / "p3.edf").write_bytes(b"0" * 300)
    assert exit_code_of(["new", str(folder)]) == SOME_FAILED
    assert "left out: p3.edf" in capfd.readouterr().err
    assert "p3" not in (folder / "recordings.csv").read_text("utf-8")


def test_a_folder_that_is_not_there_is_the_users_to_mend(
    tmp_path: Path, capfd: pytest.CaptureFixture[str]
) -> None:
    """No traceback."""
    assert exit_code_of(["new", str(tmp_path / "nowhere")]) == STUDY_AT_FAULT
    assert "no such folder" in capfd.readouterr().err
