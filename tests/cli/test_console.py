"""How commands speak to a person at a terminal."""

from __future__ import annotations

import re
import sys
import time
from typing import TYPE_CHECKING

from bandcairn.cli.app import exit_code_of
from bandcairn.cli.console import counted_progress, print_error
from bandcairn.cli.run import left_out
from bandcairn.errors import Problem, StudyError
from bandcairn.execution.project import open_project

if TYPE_CHECKING:
    from pathlib import Path

    import pytest


def problem(place: str, found: str = "EKG") -> Problem:
    """Return a problem of one recording."""
    return Problem(
        f"raw/{place}.edf", f"recording {place}", "signals.heart.channels[0]", found, "ECG", "Mend it."
    )


def test_like_problems_of_many_files_are_told_once_with_their_places(
    capsys: pytest.CaptureFixture[str],
) -> None:
    """A misspelt channel is one mistake, however many files lack it; another one stays apart."""
    problems = (*(problem(f"p{number}") for number in range(24)), problem("p24", "EMG"))

    print_error(StudyError(problems), as_json=False)

    told = capsys.readouterr().err
    assert told.count("found    EKG") == 1
    assert (
        "raw/p0.edf, recording p0\nraw/p1.edf, recording p1\nraw/p2.edf, recording p2\nand 21 more like these"
        in told
    )
    assert "raw/p24.edf, recording p24\n" in told
    assert told.endswith("25 problems; nothing was run, nothing was written\n")


def test_progress_shows_count_rate_and_time_left_on_a_terminal(
    monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    """Before the total is known there is a bar alone; then how many, how fast, and how long still."""
    monkeypatch.setattr(sys.stderr, "isatty", lambda: True)
    monkeypatch.setenv("TERM", "xterm")
    monkeypatch.setenv("COLUMNS", "120")

    with counted_progress("computing", "nodes") as advance:
        time.sleep(0.3)
        for done in range(1, 6):
            advance(done, 10)
            time.sleep(0.15)

    shown = re.sub(r"\x1b\[[0-9;?]*[a-zA-Z]", "", capsys.readouterr().err)
    assert re.search(r"computing .* \d of 10 nodes \d+ a second, left \d\d:\d\d", shown)


def test_progress_is_silent_where_no_one_watches(capsys: pytest.CaptureFixture[str]) -> None:
    """A log file is no terminal."""
    with counted_progress("computing", "nodes") as advance:
        advance(1, 2)

    assert capsys.readouterr().err == ""


def test_what_a_run_has_left_out_is_told_in_one_line(finished_study: Path) -> None:
    """By what it is, with the place to look it up; nothing is said to be nothing."""
    assert left_out(open_project(finished_study)) == "left out: nothing (results/exclusions.csv)"


def test_version_is_printed(capsys: pytest.CaptureFixture[str]) -> None:
    """So that it can be cited, and reported with a fault."""
    assert exit_code_of(["--version"]) == 0
    assert re.fullmatch(r"bandcairn \d+\.\d+\.\d+\n", capsys.readouterr().out)
