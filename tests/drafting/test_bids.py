"""Drafts from a BIDS dataset."""

from __future__ import annotations

import csv
import json
import re
from typing import TYPE_CHECKING, Any

import pytest

from bandcairn.drafting import draft_study, write_draft
from bandcairn.execution.project import check_project
from bandcairn.study.description import load_study

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path


def _rows(text: str) -> list[dict[str, str]]:
    return list(csv.DictReader(text.splitlines()))


def _change_json(path: Path, **changes: Any) -> None:  # noqa: ANN401 - any JSON
    path.write_text(json.dumps({**json.loads(path.read_text("utf-8")), **changes}), "utf-8")


def _remarks(folder: Path, datatype: str | None = None) -> str:
    return "\n".join(draft_study(folder, datatype).remarks)


@pytest.mark.parametrize("datatype", ["eeg", "emg"])
def test_a_complete_dataset_is_a_study_at_once(dataset: Path, datatype: str) -> None:
    """Nothing is left to fill in: description, tables and files go together."""
    draft = draft_study(dataset, datatype)
    assert draft.blanks == ()
    assert draft.guesses == ()
    write_draft(dataset, draft)
    study, unreadable = check_project(dataset)
    assert unreadable == {}
    assert len(study.recordings) == 6


def test_types_of_the_channels_table_make_the_signals(dataset: Path) -> None:
    """Names do not matter where the table speaks; an eye channel stays unused; inherited from the root."""
    draft = draft_study(dataset)
    signals = {each.group.name: (each.group.kind, each.group.labels) for each in draft.proposals}
    assert signals == {"eeg": ("eeg", ("Fz", "Cz")), "heart": ("ecg", ("Heart",))}
    assert "#   UP: VEOG" in draft.files["study.yaml"]


def test_a_bad_channel_is_told_with_its_recording(dataset: Path) -> None:
    """The nearest channels table counts, and its reason is quoted."""
    assert "Cz is marked bad in sub-02_task-rest (loose)" in draft_study(dataset).files["study.yaml"]


def test_entities_that_vary_and_columns_of_people_are_the_design(dataset: Path) -> None:
    """Task varies; age and group come from participants.tsv, n/a as blank."""
    first, *_, last = _rows(draft_study(dataset).files["recordings.csv"])
    assert first == {
        "recording": "sub-01_task-rest",
        "participant": "sub-01",
        "file": "sub-01/eeg/sub-01_task-rest_eeg.edf",
        "task": "rest",
        "age": "31",
        "group": "crew",
    }
    assert (last["task"], last["age"], last["group"]) == ("watch", "", "office")


def test_every_entity_that_varies_becomes_a_column(
    dataset: Path, put_edf: Callable[..., None], put_table: Callable[..., None]
) -> None:
    """Also session, acquisition, run and recording, the last under another name, for the table has its own."""
    stem = "sub-04_ses-2_task-rest_acq-dry_run-2_recording-b"
    put_edf(dataset / "sub-04" / "ses-2" / "emg" / f"{stem}_emg.edf", {"B1": 1000})
    beside = dataset / "sub-04" / "ses-2" / "emg" / f"{stem}_channels.tsv"
    put_table(beside, ("name", "type", "units"), ("B1", "EMG", "uV"))
    row = _rows(draft_study(dataset, "emg").files["recordings.csv"])[-1]
    columns = ("session", "task", "acquisition", "run", "device")
    assert [row[column] for column in columns] == ["2", "rest", "dry", "2", "b"]


def test_a_column_that_results_use_is_renamed(dataset: Path, put_table: Callable[..., None]) -> None:
    """`note` is a column of the results, `task` an entity: neither may stop the study."""
    header = ("participant_id", "note", "task")
    put_table(dataset / "participants.tsv", header, *((f"sub-0{n}", "x", "y") for n in (1, 2, 3)))
    draft = draft_study(dataset)
    assert {"task", "participant_note", "participant_task"} <= _rows(draft.files["recordings.csv"])[0].keys()
    write_draft(dataset, draft)
    load_study(dataset)


def test_events_that_last_are_segments(dataset: Path) -> None:
    """A moment is none."""
    rows = _rows(draft_study(dataset, "emg").files["segments.csv"])
    assert len(rows) == 6
    assert rows[0] == {"recording": "sub-01_task-rest", "segment": "hold", "start_s": "5", "stop_s": "25"}


def test_mains_that_differ_are_told_and_left_to_a_person(dataset: Path) -> None:
    """A study has one mains frequency: none of two is chosen."""
    _change_json(dataset / "task-watch_eeg.json", PowerLineFrequency=60)
    draft = draft_study(dataset)
    assert draft.mains_hz is None
    page = " ".join(draft.files["study.yaml"].split())
    assert "50 Hz in 3, 60 Hz in 3 recordings" in page.replace(" # ", " ")


def test_rates_that_differ_from_the_sidecars_are_told(dataset: Path) -> None:
    """The file's own rate counts; an override of channels.tsv is noted."""
    _change_json(dataset / "task-watch_eeg.json", SamplingFrequency=999)
    remarks = _remarks(dataset)
    assert "SamplingFrequency is 999 Hz, but the file holds 256 Hz, 512 Hz" in remarks
    assert "Heart has a rate of its own, 512 Hz" in remarks


def test_what_was_done_before_storing_is_told(dataset: Path) -> None:
    """Software filters and cut recordings matter to every number."""
    _change_json(dataset / "task-rest_eeg.json", SoftwareFilters={"notch": 50}, RecordingType="epoched")
    remarks = _remarks(dataset)
    assert re.search(r"SoftwareFilters is .*filtered before .*\(in 3 of 6 recordings\)", remarks)
    assert "RecordingType is epoched" in remarks


def test_the_other_datatype_and_unread_formats_are_told(dataset: Path) -> None:
    """Nothing is left out in silence."""
    (dataset / "sub-01" / "eeg" / "sub-01_task-nap_eeg.xyz").touch()
    draft = draft_study(dataset)
    assert any("datatype emg" in remark for remark in draft.remarks)
    assert [one.file for one in draft.left_out] == ["sub-01/eeg/sub-01_task-nap_eeg.xyz"]


def test_people_without_recordings_and_recordings_without_people_are_told(
    dataset: Path, put_table: Callable[..., None]
) -> None:
    """Both ways."""
    put_table(
        dataset / "participants.tsv", ("participant_id", "age"), ("sub-01", 1), ("sub-02", 2), ("sub-09", 3)
    )
    remarks = _remarks(dataset)
    assert "Not in participants.tsv, so that their cells are blank: sub-03." in remarks
    assert "In participants.tsv, but without a recording here: sub-09." in remarks


def test_a_dataset_inside_the_study_folder_is_found(dataset: Path) -> None:
    """The study may lie around the dataset, which then stays untouched."""
    folder = dataset.parent
    write_draft(folder, draft_study(folder))
    study, _ = check_project(folder)
    assert study.recordings[0].file == "harbour/sub-01/eeg/sub-01_task-rest_eeg.edf"
    assert not (dataset / "study.yaml").exists()


def test_a_recorder_band_is_declared(dataset: Path, put_table: Callable[..., None]) -> None:
    """low_cutoff is a high-pass and high_cutoff a low-pass, in BIDS; the filter stays inside."""
    header = ("name", "type", "units", "low_cutoff", "high_cutoff")
    for path in dataset.glob("sub-*/emg/*_channels.tsv"):
        put_table(path, header, ("B1", "EMG", "uV", 10, 350))
    draft = draft_study(dataset, "emg")
    assert "recorder: {highpass_hz: 10, lowpass_hz: 350}" in draft.files["study.yaml"]
    assert draft.proposals[0].settings.filter_hz == (20, 350)
