"""The survey of raw files: each looked at once, and none changed behind the back of a run."""

from __future__ import annotations

import os
import shutil
import time
from typing import TYPE_CHECKING

import pytest

from bandcairn.errors import RecordingError, StudyError
from bandcairn.nodes.survey import INDEX_NAME, inspect_files, survey_study
from bandcairn.recordings import RawIndex, content_digests
from bandcairn.recordings.export import ExportChannel, write_edf
from bandcairn.signal import Annotation
from bandcairn.study.description import load_study

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path


def age(folder: Path) -> None:
    """Let the files look old, for times of a moment ago are not trusted."""
    for file in (folder / "raw").iterdir():
        os.utime(file, ns=(10**18, 10**18))
    time.sleep(0.15)  # the time of a file's last change of status cannot be set


def test_every_recording_has_its_facts_and_the_digests_of_its_channels(small_study: Path) -> None:
    """They are those of the file itself, by the name of the recording."""
    survey = survey_study(load_study(small_study), small_study / "nodes")
    assert list(survey.contents) == ["p1_day", "p1_night", "p2_day", "p2_night"]
    assert survey.unreadable == {}
    found = survey.contents["p1_day"]
    expected = content_digests(small_study / "raw/p1_day.edf").channels
    assert found.digests == {channel.label: channel.sha256 for channel in expected}
    assert found.facts_of("EMG").rate_hz == 1000
    assert found.rate_hz("EMG", 500.0) == 1000


def test_progress_is_told_for_each_file(small_study: Path) -> None:
    """The caller may show how far the survey is."""
    told: list[tuple[int, int]] = []
    survey_study(
        load_study(small_study), small_study / "nodes", lambda done, total: told.append((done, total))
    )
    assert told == [(1, 4), (2, 4), (3, 4), (4, 4)]


def test_a_file_that_cannot_be_read_is_told_and_leaves_the_others(small_study: Path) -> None:
    """One torn file is one recording less, with its reason."""
    torn = small_study / "raw/p2_night.edf"
    torn.write_bytes(torn.read_bytes()[:100])
    survey = survey_study(load_study(small_study), small_study / "nodes")
    assert list(survey.contents) == ["p1_day", "p1_night", "p2_day"]
    assert list(survey.unreadable) == ["p2_night"]
    assert "p2_night.edf" in survey.unreadable["p2_night"]


def test_a_study_that_does_not_fit_its_files_is_refused(
    small_study: Path, edit_study: Callable[[Path, str, str], None]
) -> None:
    """A channel that no file holds is told before anything is digested or written."""
    edit_study(small_study, "channels: [Fz, Cz]", "channels: [Fz, Pz]")
    with pytest.raises(StudyError, match="no channel Pz"):
        survey_study(load_study(small_study), small_study / "nodes")
    assert not (small_study / "nodes").exists()


def test_the_memory_of_files_lies_in_the_store_and_stays_private(small_study: Path) -> None:
    """Like all that is computed from recordings of people."""
    age(small_study)
    survey_study(load_study(small_study), small_study / "nodes")
    assert (small_study / "nodes" / INDEX_NAME).stat().st_mode & 0o077 == 0


def test_inspecting_writes_nothing(small_study: Path) -> None:
    """A check leaves no trace."""
    facts, unreadable = inspect_files(
        load_study(small_study), RawIndex.load(small_study / "nodes" / INDEX_NAME)
    )
    assert len(facts) == 4
    assert unreadable == {}
    assert not (small_study / "nodes").exists()


def test_a_file_that_is_as_surveyed_may_be_read(small_study: Path) -> None:
    """Nothing stands in the way of an unchanged file."""
    survey = survey_study(load_study(small_study), small_study / "nodes")
    with survey.unchanged_file("p1_day") as path:
        assert path == small_study / "raw/p1_day.edf"


def test_a_file_changed_while_it_was_read_is_refused(small_study: Path) -> None:
    """Samples read from a file in motion belong to no key; the node is not written."""
    survey = survey_study(load_study(small_study), small_study / "nodes")
    with (
        pytest.raises(RecordingError, match=r"p1_day\.edf has changed while the study was running"),
        survey.unchanged_file("p1_day") as path,
    ):
        path.write_bytes(path.read_bytes()[:-2] + b"\0\1")


def test_a_file_that_vanished_is_refused(small_study: Path) -> None:
    """Even where the system would still give its bytes."""
    survey = survey_study(load_study(small_study), small_study / "nodes")
    with pytest.raises(RecordingError, match="has changed"), survey.unchanged_file("p1_day") as path:
        path.unlink()


def test_one_sample_changed_changes_one_digest(small_study: Path) -> None:
    """The memory of files never hides a change, and only the channel that changed is touched."""
    age(small_study)
    before = survey_study(load_study(small_study), small_study / "nodes").contents["p1_day"].digests
    file = small_study / "raw/p1_day.edf"
    content = bytearray(file.read_bytes())
    # The last channel of a record is the list of annotations; the EMG with its 1000 samples lies before it.
    first_record = int(content[184:192])
    content[first_record + 2 * (3 * 256 + 500)] ^= 1
    file.write_bytes(content)
    after = survey_study(load_study(small_study), small_study / "nodes").contents["p1_day"].digests
    assert {label for label in before if before[label] != after[label]} == {"EMG"}


def test_annotated_stretches_become_segments_where_the_study_says_so(
    small_study: Path, edit_study: Callable[[Path, str, str], None]
) -> None:
    """Those of the declared texts, with their start and stop."""
    import numpy as np

    (small_study / "segments.csv").unlink()
    edit_study(small_study, "mains_hz: 50", "mains_hz: 50\nsegments: {annotations: [hold]}")
    marks = (Annotation(10, 30, "hold"), Annotation(45, 5, "other"))
    for value, file in enumerate((small_study / "raw").iterdir()):
        channels = [
            ExportChannel(label, "uV", rate_hz, np.full(60 * rate_hz, value), (-400, 400))
            for label, rate_hz in (("Fz", 256), ("Cz", 256), ("ECG", 256), ("EMG", 1000))
        ]
        write_edf(file, channels, marks)
    survey = survey_study(load_study(small_study), small_study / "nodes")
    assert survey.contents["p1_day"].annotated_segments == (("hold", 10.0, 40.0),)


def test_the_same_content_under_two_names_is_refused_with_both(small_study: Path) -> None:
    """One night entered twice would count as two: the names of both recordings, files and rows are told."""
    shutil.copyfile(small_study / "raw/p1_day.edf", small_study / "raw/p2_night.edf")
    told = (
        r"recordings\.csv, row 5, column file: file: found p2_night \(raw/p2_night\.edf\) with the same samples as "
        r"p1_day \(raw/p1_day\.edf, row 2\)"
    )
    with pytest.raises(StudyError, match=told):
        survey_study(load_study(small_study), small_study / "nodes")


def test_the_same_content_is_accepted_where_the_study_says_why(
    small_study: Path, edit_study: Callable[[Path, str, str], None]
) -> None:
    """The reason stands in the study."""
    shutil.copyfile(small_study / "raw/p1_day.edf", small_study / "raw/p2_night.edf")
    edit_study(small_study, "mains_hz: 50", "mains_hz: 50\naccept_same_content: a drill of the pipeline")
    assert len(survey_study(load_study(small_study), small_study / "nodes").contents) == 4


@pytest.mark.parametrize(("stop_s", "start_s", "refused"), [(30, 30, False), (31, 30, True), ("", 30, True)])
def test_stretches_of_one_file_are_two_recordings_unless_they_overlap(
    small_study: Path, stop_s: object, start_s: object, *, refused: bool
) -> None:
    """Before and after a moment of one file is fair; a second in common is the same second twice."""
    (small_study / "segments.csv").write_text("recording,segment,start_s,stop_s\n", "utf-8")
    text = (small_study / "study.yaml").read_text("utf-8")
    # Short enough for half a minute; of the intervals between beats only the fast rhythm is resolved.
    for before, after in (
        ("segments: [hold]", "segments: []"),
        ("epoch: {length_s: 60}", "epoch: {length_s: 20}"),
        ("segment_s: 30}", "segment_s: 10}\n    features: {bands_hz: {hf: [0.15, 0.4]}}"),
    ):
        text = text.replace(before, after)
    (small_study / "study.yaml").write_text(text, "utf-8")
    rows = ["recording,participant,file,condition,group,start_s,stop_s"]
    rows += [
        f"p1_day,p1,raw/p1_day.edf,day,crew,,{stop_s}",
        f"p1_night,p1,raw/p1_day.edf,night,crew,{start_s},",
        "p2_day,p2,raw/p2_day.edf,day,office,,",
        "p2_night,p2,raw/p2_night.edf,night,office,,",
    ]
    (small_study / "recordings.csv").write_text("\n".join(rows) + "\n", "utf-8")
    if refused:
        with pytest.raises(StudyError, match=r"p1_night .* with the same samples as p1_day"):
            survey_study(load_study(small_study), small_study / "nodes")
    else:
        assert len(survey_study(load_study(small_study), small_study / "nodes").contents) == 4
