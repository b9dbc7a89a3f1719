"""Which describing files apply to a recording of a BIDS dataset."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING

import pytest

from bandcairn.drafting.inheritance import BidsName, Sidecars

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path


@pytest.fixture
def recording(tmp_path: Path) -> Path:
    """Return the path of a recording two folders below the root; the file itself is not needed."""
    folder = tmp_path / "sub-01" / "ses-2" / "eeg"
    folder.mkdir(parents=True)
    return folder / "sub-01_ses-2_task-rest_eeg.edf"


def _put(path: Path, **content: object) -> None:
    path.write_text(json.dumps(content), "utf-8")


def test_a_name_is_taken_apart() -> None:
    """Entities, suffix and extension."""
    name = BidsName.of("sub-01_task-rest_eeg.EDF")
    assert (dict(name.entities), name.suffix, name.extension) == (
        {"sub": "01", "task": "rest"},
        "eeg",
        ".edf",
    )


def test_lower_folders_and_more_entities_win(tmp_path: Path, recording: Path) -> None:
    """The root speaks first, then each folder below; within one the name of more entities speaks last."""
    _put(tmp_path / "eeg.json", a="root", b="root", c="root", d="root")
    _put(tmp_path / "task-rest_eeg.json", b="task", c="task", d="task")
    _put(tmp_path / "sub-01" / "sub-01_eeg.json", c="subject", d="subject")
    _put(recording.with_suffix(".json"), d="own")
    merged = Sidecars(tmp_path).merged(recording, "eeg")
    assert merged == {"a": "root", "b": "task", "c": "subject", "d": "own"}


def test_what_describes_others_does_not_apply(tmp_path: Path, recording: Path) -> None:
    """Another task, another person, another suffix, or a folder aside."""
    _put(tmp_path / "task-watch_eeg.json", a=1)
    _put(tmp_path / "sub-02_eeg.json", a=2)
    _put(tmp_path / "emg.json", a=3)
    (tmp_path / "sub-02").mkdir()
    _put(tmp_path / "sub-02" / "eeg.json", a=4)
    assert Sidecars(tmp_path).merged(recording, "eeg") == {}


def test_of_tables_the_nearest_counts_alone(
    tmp_path: Path, recording: Path, put_table: Callable[..., None]
) -> None:
    """Rows are never mixed; n/a is blank, and a short row too."""
    put_table(tmp_path / "channels.tsv", ("name", "type"), ("Fz", "EEG"), ("Cz", "EEG"))
    own = recording.with_name("sub-01_ses-2_task-rest_channels.tsv")
    put_table(own, ("name", "type", "units"), ("Fz", "n/a"))
    assert Sidecars(tmp_path).nearest(recording, "channels") == [{"name": "Fz", "type": "", "units": ""}]
    assert Sidecars(tmp_path).nearest(recording, "events") is None


def test_a_file_that_cannot_be_read_is_told(tmp_path: Path, recording: Path) -> None:
    """Broken JSON takes nothing over and is named once."""
    (tmp_path / "eeg.json").write_text("{", "utf-8")
    sidecars = Sidecars(tmp_path)
    assert sidecars.merged(recording, "eeg") == {} == sidecars.merged(recording, "eeg")
    assert len(sidecars.problems) == 1
    assert sidecars.problems[0].startswith("eeg.json cannot be read")
