"""Drafts from a plain folder of files."""

from __future__ import annotations

import csv
import re
from typing import TYPE_CHECKING

import pytest

from bandcairn.drafting import draft_study, write_draft
from bandcairn.errors import StudyError
from bandcairn.execution.project import check_project
from bandcairn.recordings.export import ExportChannel, write_delimited, write_edf
from bandcairn.signal import Annotation
from bandcairn.study.description import load_study

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    import numpy as np
    from numpy.typing import NDArray

FILLED = {"mains_hz": "50", "rate_hz": "250", "unit": "uV"}


def _fill_in(folder: Path) -> None:
    """Fill the blanks as a person would: values behind the marked keys, a name in each blank cell."""
    page = (folder / "study.yaml").read_text("utf-8")
    for key, value in FILLED.items():
        page = re.sub(rf"(?m)^( *{key}:)(?= *(#|$))", rf"\1 {value}", page)
    (folder / "study.yaml").write_text(page, "utf-8")
    table = (folder / "recordings.csv").read_text("utf-8")
    with (folder / "recordings.csv").open("w", encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(table.splitlines()))
        writer = csv.DictWriter(file, rows[0], lineterminator="\n")
        writer.writeheader()
        writer.writerows({**row, "participant": row["participant"] or f"p{n}"} for n, row in enumerate(rows))


@pytest.fixture
def edf_folder(tmp_path: Path, put_edf: Callable[..., None]) -> Path:
    """Return a folder of two people by day and night, with hum at 50 Hz and two rates."""
    for person in (1, 2):
        for shift in ("day", "night"):
            rates_hz = {"EEG Fz": 256, "EEG Cz": 256, "EKG": 512, "biceps": 1024, "Resp": 32}
            put_edf(tmp_path / "raw" / f"p{person}_{shift}.edf", rates_hz, hum_hz=50, hum=30.0)
    return tmp_path


def test_a_folder_that_tells_enough_is_a_study_at_once(edf_folder: Path) -> None:
    """Signals by names, mains by hum, people and shifts by file names: each marked as a guess."""
    draft = draft_study(edf_folder)
    assert {each.group.name: each.group.labels for each in draft.proposals} == {
        "eeg": ("EEG Fz", "EEG Cz"),
        "heart": ("EKG",),
        "muscle": ("biceps",),
    }
    assert draft.blanks == ()
    assert len(draft.guesses) == 7  # title, participant, condition, mains, three lists of channels
    write_draft(edf_folder, draft)
    study, _ = check_project(edf_folder)
    assert study.recordings[1].design == {"condition": "night"}
    assert "#   Resp: breathing" in draft.files["study.yaml"]


def test_blanks_once_filled_make_a_study(tmp_path: Path, noise: Callable[..., NDArray[np.float64]]) -> None:
    """Text without clock, unit of no usual size, names that tell nobody: all of it marked, and then it loads."""
    samples = [noise(250, spread=0.8), noise(250, spread=0.8)]
    for name in ("left rest", "right rest", "left task", "right task"):
        write_delimited(tmp_path / f"{name}.csv", ["C3", "C4"], samples, decimals=3)
    draft = draft_study(tmp_path)
    write_draft(tmp_path, draft)
    with pytest.raises(StudyError) as refused:
        load_study(tmp_path)
    assert {problem.field for problem in refused.value.problems} >= {"mains_hz", "participant"}
    marked = " ".join(mark.text for mark in draft.blanks)
    assert all(key in marked for key in ("mains_hz", "rate_hz", "unit", "participant"))
    _fill_in(tmp_path)
    check_project(tmp_path)


@pytest.mark.parametrize("case", ["within", "between"])
def test_the_example_question_holds(tmp_path: Path, put_edf: Callable[..., None], case: str) -> None:
    """Taking the marks away leaves a question with the study's own names that passes every check."""
    names = {
        "within": ("p1_day", "p1_night", "p2_day", "p2_night"),
        "between": ("crew_p1", "crew_p2", "office_p3", "office_p4"),
    }[case]
    for name in names:
        put_edf(tmp_path / f"{name}.edf", {"Fz": 256, "Cz": 256}, hum_hz=60)
    write_draft(tmp_path, draft_study(tmp_path))
    page = (tmp_path / "study.yaml").read_text("utf-8")
    head, asked = page.split("# questions:\n")
    asked = re.sub(r"(?m)^# ", "", asked)
    (tmp_path / "study.yaml").write_text(f"{head}questions:\n{asked}", "utf-8")
    study = load_study(tmp_path)
    (question,) = study.description.questions
    assert getattr(question, case) == {"within": "condition", "between": "group"}[case]


def test_annotations_in_every_file_are_offered_as_segments(
    tmp_path: Path, noise: Callable[..., NDArray[np.float64]]
) -> None:
    """A text that marks one stretch in each file; moments and texts of some files are not."""
    for person in (1, 2):
        notes = [Annotation(5, 20, "eyes closed"), Annotation(30, 0, "blink")]
        notes += [Annotation(26, 3, "once")] if person == 1 else []
        channel = ExportChannel("Fz", "uV", 256, noise(256, hum_hz=50), (-900.0, 900.0))
        write_edf(tmp_path / f"p{person}.edf", [channel], notes)
    draft = draft_study(tmp_path)
    assert "segments: {annotations: [eyes closed]}" in draft.files["study.yaml"]
    write_draft(tmp_path, draft)
    check_project(tmp_path)


def test_tables_of_something_else_and_broken_files_are_left_out(
    edf_folder: Path,
) -> None:
    """A list of people is no recording; a broken file is one that cannot be read."""
    (edf_folder / "people.csv").write_text("name,age\nann,31\nbob,40\n", "utf-8")
    (edf_folder / "ages.csv").write_text("Fz,Cz\n1,2\n3,4\n", "utf-8")
    (edf_folder / "raw" / "p3_day.edf").write_bytes(b"0" * 300)
    left_out = {one.file: one.damaged for one in draft_study(edf_folder).left_out}
    assert left_out == {"people.csv": False, "ages.csv": False, "raw/p3_day.edf": True}


def test_a_channel_that_few_lack_is_told_and_its_signal_kept_ready(
    edf_folder: Path, put_edf: Callable[..., None]
) -> None:
    """Where one recording has no ECG, the signal stands commented out with the rows to delete."""
    put_edf(edf_folder / "raw" / "p3_day.edf", {"EEG Fz": 256, "EEG Cz": 256, "biceps": 1024}, hum_hz=50)
    draft = draft_study(edf_folder)
    page = draft.files["study.yaml"]
    assert "# heart is not used: not in p3_day: delete those rows of recordings.csv to use it." in page
    assert "#     kind: ecg" in page
    write_draft(edf_folder, draft)
    study, _ = check_project(edf_folder)
    assert list(study.description.signals) == ["eeg", "muscle"]


def test_files_without_a_channel_in_common_are_left_to_another_study(
    edf_folder: Path, put_edf: Callable[..., None]
) -> None:
    """The larger part makes the study; the rest is named."""
    put_edf(edf_folder / "raw" / "p3_day.edf", {"V5": 256})
    draft = draft_study(edf_folder)
    assert len(draft.recordings) == 4
    assert [one.file for one in draft.left_out] == ["raw/p3_day.edf"]


def test_channels_in_an_unknown_unit_are_not_used(tmp_path: Path, put_edf: Callable[..., None]) -> None:
    """Nothing is scaled by guess."""
    put_edf(tmp_path / "p1.edf", {"Fz": 256}, unit="hPa")
    with pytest.raises(StudyError, match="no name of an EEG"):
        draft_study(tmp_path)


def test_what_a_study_computes_is_not_taken_for_recordings(edf_folder: Path) -> None:
    """The store and the results lie in the same folder."""
    for name in ("nodes/x.csv", "results/features.csv", ".hidden/y.csv"):
        (edf_folder / name).parent.mkdir(exist_ok=True)
        (edf_folder / name).write_text("Fz\n" + "1\n" * 200, "utf-8")
    assert len(draft_study(edf_folder).recordings) == 4


@pytest.mark.parametrize(
    ("name", "found"), [("absent", "no such folder"), ("file", "a file"), ("empty", "nothing")]
)
def test_a_folder_without_recordings_is_refused(tmp_path: Path, name: str, found: str) -> None:
    """With what is allowed and what to do."""
    (tmp_path / "file").touch()
    (tmp_path / "empty").mkdir()
    with pytest.raises(StudyError, match=found):
        draft_study(tmp_path / name)


def test_equal_names_in_two_folders_stay_apart(tmp_path: Path, put_edf: Callable[..., None]) -> None:
    """Recordings are named by their path where their stems repeat."""
    for shift in ("day", "night"):
        for person in (1, 2):
            put_edf(tmp_path / shift / f"p{person}.edf", {"Fz": 256}, hum_hz=50)
    draft = draft_study(tmp_path)
    assert [one.name for one in draft.recordings] == [
        "day_p1_edf",
        "day_p2_edf",
        "night_p1_edf",
        "night_p2_edf",
    ]
    assert [one.participant for one in draft.recordings] == ["p1", "p2", "p1", "p2"]
    assert draft.recordings[0].design == {"condition": "day"}


def test_a_long_list_of_channels_is_broken_between_names(
    tmp_path: Path, put_edf: Callable[..., None]
) -> None:
    """Names with blanks stay whole, and all of them are read back."""
    labels = [f"EEG {site}-Ref" for site in ("Fp1", "Fp2", "F3", "F4", "C3", "C4", "P3", "P4", "O1", "O2")]
    put_edf(tmp_path / "p1.edf", dict.fromkeys(labels, 128), hum_hz=50)
    put_edf(tmp_path / "p2.edf", dict.fromkeys(labels, 250), hum_hz=50)
    write_draft(tmp_path, draft_study(tmp_path))
    assert list(load_study(tmp_path).description.signals["eeg"].channels) == labels
    page = (tmp_path / "study.yaml").read_text("utf-8")
    assert all(label in page for label in labels)
