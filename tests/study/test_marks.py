"""Tables of events and decisions, and the epochs that use them."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pytest
import yaml

from bandcairn.errors import StudyError
from bandcairn.study.description import load_study
from bandcairn.study.epoch_blocks import Epoch, Reject
from bandcairn.study.marks import read_decisions, read_events

if TYPE_CHECKING:
    from pathlib import Path

    from bandcairn.errors import Problem

HEADER = "recording,signal,channel,start_s,stop_s,decision,who,when,why"


def write(folder: Path, name: str, *lines: str) -> Path:
    """Write a table and return its path."""
    path = folder / name
    path.write_text("\n".join(lines) + "\n", "utf-8")
    return path


def problems_of(folder: Path) -> tuple[Problem, ...]:
    """Return what is wrong with a study."""
    with pytest.raises(StudyError) as refused:
        load_study(folder)
    return refused.value.problems


def first_recording(folder: Path) -> str:
    """Return the name of a recording of the study."""
    return (folder / "recordings.csv").read_text("utf-8").splitlines()[1].split(",")[0]


def test_f4_a_decision_says_what_is_left_out_who_said_so_when_and_why(tmp_path: Path) -> None:
    """Blank cells mean all; the words are one sentence for the reports."""
    path = write(
        tmp_path,
        "decisions.csv",
        HEADER,
        "r1,eeg,Fz,,,exclude,AB,2024-05-03,electrode loose",
        "r1,,,12,15.5,exclude,CD,2024-05-04,coughing",
    )

    table = read_decisions(path, "decisions.csv")

    assert table.problems == ()
    channel, stretch = table.rows
    assert (channel.is_stretch, stretch.is_stretch) == (False, True)
    assert channel.told == "by decision: electrode loose (AB, 2024-05-03)"
    assert stretch.told == "by decision: 12 to 15.5 s, coughing (CD, 2024-05-04)"


@pytest.mark.parametrize(
    ("row", "where", "found"),
    [
        ("r1,eeg,Fz,,,exclude,,2024,loose", "row 2, column who", "a blank cell"),
        ("r1,eeg,Fz,,,exclude,AB,,loose", "row 2, column when", "a blank cell"),
        ("r1,eeg,Fz,,,exclude,AB,2024,", "row 2, column why", "a blank cell"),
        ("r1,eeg,Fz,,,keep,AB,2024,fine", "row 2, column decision", "'keep'"),
        ("r1,eeg,Fz,3,,exclude,AB,2024,loose", "row 2, column stop_s", "a blank cell"),
        ("r1,eeg,Fz,,3,exclude,AB,2024,loose", "row 2, column start_s", "a blank cell"),
        ("r1,eeg,Fz,4,3,exclude,AB,2024,loose", "row 2, column stop_s", "3"),
        ("r1,eeg,Fz,soon,3,exclude,AB,2024,loose", "row 2, column start_s", "'soon'"),
        (",eeg,Fz,,,exclude,AB,2024,loose", "row 2, column recording", "a blank cell"),
    ],
)
def test_a_decision_at_fault_is_told_by_row_and_column(
    tmp_path: Path, row: str, where: str, found: str
) -> None:
    """What is left out without a name and a reason is not left out at all."""
    table = read_decisions(write(tmp_path, "decisions.csv", HEADER, row), "decisions.csv")

    assert table.rows == ()
    (problem,) = table.problems
    assert (problem.where, problem.found) == (where, found)


def test_the_same_decision_twice_and_an_unknown_column_are_refused(tmp_path: Path) -> None:
    """Undoing one of two would undo nothing."""
    row = "r1,eeg,Fz,,,exclude,AB,2024,loose,x"
    table = read_decisions(write(tmp_path, "d.csv", f"{HEADER},mood", row, row), "d.csv")

    assert [problem.field for problem in table.problems] == ["mood", "recording"]


def test_events_are_read_with_their_times(tmp_path: Path) -> None:
    """Other columns may stand beside."""
    path = write(tmp_path, "events.csv", "recording,onset_s,event,hand", "r1,1.2345,tone,left")

    (event,) = read_events(path, "events.csv").rows

    assert (event.recording, event.onset_s, event.event) == ("r1", 1.2345, "tone")


@pytest.mark.parametrize(
    ("rows", "where"),
    [
        (["r1,,tone"], "row 2, column onset_s"),
        (["r1,-1,tone"], "row 2, column onset_s"),
        (["r1,1,"], "row 2, column event"),
        (["r1,1,tone", "r1,1.0,tone"], "row 3, column onset_s"),
    ],
)
def test_an_event_at_fault_is_told_by_row_and_column(tmp_path: Path, rows: list[str], where: str) -> None:
    """Two events of one name at one time would be one epoch twice."""
    table = read_events(write(tmp_path, "events.csv", "recording,onset_s,event", *rows), "events.csv")

    assert [problem.where for problem in table.problems] == [where]


def test_decisions_are_used_when_the_file_is_there(study_folder: Path) -> None:
    """Nobody need name it."""
    assert load_study(study_folder).decisions == ()
    write(
        study_folder, "decisions.csv", HEADER, f"{first_recording(study_folder)},,,1,2,exclude,AB,2024,cough"
    )

    (decision,) = load_study(study_folder).decisions

    assert decision.why == "cough"


def test_decisions_that_fit_no_recording_signal_or_channel_are_told_in_the_same_pass(
    study_folder: Path,
) -> None:
    """A misspelt name would leave out nothing, unnoticed."""
    name = first_recording(study_folder)
    write(
        study_folder,
        "decisions.csv",
        HEADER,
        "nobody,,,,,exclude,AB,2024,loose",
        f"{name},egg,,,,exclude,AB,2024,loose",
        f"{name},eeg,F9,,,exclude,AB,2024,loose",
        f"{name},,,,,exclude,AB,,loose",
    )

    found = {(problem.file, problem.where) for problem in problems_of(study_folder)}

    columns = {2: "recording", 3: "signal", 4: "channel", 5: "when"}
    assert found == {("decisions.csv", f"row {row}, column {column}") for row, column in columns.items()}


def test_events_of_that_name_must_be_in_the_table(study_folder: Path) -> None:
    """Epochs about an event that never happens are a misspelling."""
    study = yaml.safe_load((study_folder / "study.yaml").read_text("utf-8"))
    study["signals"]["eeg"]["epoch"] = {"around": "tone", "start_s": -1, "stop_s": 3}
    (study_folder / "study.yaml").write_text(yaml.safe_dump(study), "utf-8")
    write(study_folder, "events.csv", "recording,onset_s,event", f"{first_recording(study_folder)},5,tome")

    (problem,) = problems_of(study_folder)

    assert problem.field == "signals.eeg.epoch.around"
    assert problem.remedy == "Did you mean tome?"


@pytest.mark.parametrize(
    ("block", "message"),
    [
        ({}, "a length in seconds, above 0, or around"),
        ({"length_s": 4, "around": "tone", "start_s": 0, "stop_s": 1}, "length_s beside around"),
        ({"length_s": 4, "start_s": 0}, "start_s without around"),
        ({"around": "tone", "start_s": 0}, "around needs stop_s"),
        ({"around": "tone", "start_s": 1, "stop_s": 1}, r"above start_s \(1\)"),
        ({"around": "tone", "start_s": 0, "stop_s": 1, "overlap": 0.5}, "no overlap with around"),
        ({"around": ["tone", "tone"], "start_s": 0, "stop_s": 1}, "more than once"),
        ({"length_s": 4, "least": 0}, "greater than or equal to 1"),
        ({"length_s": 4, "keep_edges": "yes"}, "valid boolean"),
        ({"length_s": 4, "equalise": {"within": "condition", "seed": 1}}, "Extra inputs"),
    ],
)
def test_an_epoch_lies_one_way_or_the_other(block: dict[str, object], message: str) -> None:
    """Either one after the other, or about events."""
    with pytest.raises(ValueError, match=message):
        Epoch.model_validate(block)


def test_a_limit_of_any_kind_is_enough_to_reject_by() -> None:
    """Each rule may stand alone; none is no rule."""
    assert Reject(robust_z=5).step_uv is None
    with pytest.raises(ValueError, match="no limit"):
        Reject()


def test_new_keys_leave_the_recipe_of_old_studies_as_it_was() -> None:
    """What is absent stays out of it."""
    written = Epoch(length_s=4, reject=Reject(flat_uv=1)).model_dump(mode="json", exclude_none=True)

    assert written == {"length_s": 4, "overlap": 0, "reject": {"flat_uv": 1, "scope": "channel"}}
