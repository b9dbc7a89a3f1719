"""The demo study as files: reproducible, loadable, with its faults, and true to its truth."""

from __future__ import annotations

import csv
import json
from dataclasses import asdict
from fractions import Fraction
from typing import TYPE_CHECKING

import numpy as np
import pytest

from bandcairn.demo import faults, muscle, people, write_demo
from bandcairn.demo import write as demo_write
from bandcairn.errors import StudyError
from bandcairn.recordings import Declared, inspect, read
from bandcairn.study.description import load_study

if TYPE_CHECKING:
    from pathlib import Path

SHORT = muscle.Contraction(2, 8)
LENGTH_S = 10
EEG = ("Fz", "Cz", "Pz", "Oz")


def visit_of(recording: str) -> people.Visit:
    """Return one recording of the default study."""
    return next(visit for visit in people.visits(20) if visit.recording == recording)


def written(folder: Path, recording: str) -> Path:
    """Write ten seconds of a recording and return its path."""
    visit = visit_of(recording)
    path = folder / demo_write.file_of(visit).removeprefix("raw/")
    demo_write.write_recording(path, 20, visit, LENGTH_S, SHORT)
    return path


def microvolts(path: Path, *labels: str) -> np.ndarray:
    """Read channels of a file, shape (n_channels, n_samples)."""
    return read(path, labels, Declared(unit="uV"), None, None).to_signal().samples


@pytest.fixture
def short_demo(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Write the whole study with recordings of ten seconds."""
    monkeypatch.setattr(demo_write, "LENGTH_S", LENGTH_S)
    monkeypatch.setattr(demo_write, "WORK", SHORT)
    write_demo(tmp_path / "watch")
    return tmp_path / "watch"


@pytest.mark.parametrize("recording", ["W01_day", "W03_day"])
def test_equal_seeds_write_equal_bytes(tmp_path: Path, recording: str) -> None:
    """A recording is a function of its seed, as EDF and as text."""
    (tmp_path / "again").mkdir()
    first, second = written(tmp_path, recording), written(tmp_path / "again", recording)

    assert first.read_bytes() == second.read_bytes()
    demo_write.write_recording(second, 21, visit_of(recording), LENGTH_S, SHORT)
    assert first.read_bytes() != second.read_bytes()


def test_edf_states_three_rates_and_microvolt(tmp_path: Path) -> None:
    """Each signal is stored at its own rate."""
    facts = inspect(written(tmp_path, "W01_day"))

    assert [(each.label, each.rate_hz, each.unit) for each in facts.channels] == [
        *((name, Fraction(256), "uV") for name in EEG),
        ("ECG", Fraction(500), "uV"),
        ("EMG", Fraction(2000), "uV"),
    ]


def test_text_export_has_one_clock_of_1000_hz(tmp_path: Path) -> None:
    """All channels stand beside time_s, one row a millisecond."""
    path = written(tmp_path, "W08_night")

    assert path.read_text().split("\n", 1)[0] == "time_s,Fz,Cz,Pz,Oz,ECG,EMG"
    assert {(each.rate_hz, each.n_samples) for each in inspect(path).channels} == {(Fraction(1000), 10_000)}


def test_clipped_emg_stands_at_its_physical_limit(tmp_path: Path) -> None:
    """More than 1 % of the samples are the largest or smallest that the file can hold."""
    emg = np.abs(microvolts(written(tmp_path, "W05_night"), "EMG"))

    assert emg.max() == pytest.approx(faults.CLIP_LIMIT_UV)
    assert np.mean(emg >= faults.CLIP_LIMIT_UV - 0.01) > 0.02


def test_no_other_channel_reaches_its_limit(tmp_path: Path) -> None:
    """An unharmed recording keeps clear of the range of each channel."""
    path = written(tmp_path, "W01_night")

    assert np.abs(microvolts(path, *EEG)).max() < 790
    assert np.abs(microvolts(path, "ECG")).max() < 4900
    assert np.abs(microvolts(path, "EMG")).max() < 4900


def test_flat_electrode_holds_one_value_and_its_neighbours_do_not(tmp_path: Path) -> None:
    """Cz of W09 by day is constant."""
    eeg = microvolts(written(tmp_path, "W09_day"), *EEG)

    assert (np.ptp(eeg, axis=1) == 0).tolist() == [False, True, False, False]


def test_recording_in_millivolt_holds_the_same_microvolts(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The header's unit differs, the physical signal does not, to the resolution of 16 bits."""
    path = written(tmp_path, "W07_night")
    in_millivolt = microvolts(path, *EEG)
    assert {each.unit for each in inspect(path).channels if each.label in EEG} == {"mV"}

    monkeypatch.setattr(faults, "FAULTS", ())
    demo_write.write_recording(path, 20, visit_of("W07_night"), LENGTH_S, SHORT)
    assert {each.unit for each in inspect(path).channels} == {"uV"}
    assert in_millivolt == pytest.approx(microvolts(path, *EEG), abs=1600 / 65535)


def test_artefacts_are_beyond_the_rejection_limit_in_every_recording() -> None:
    """Each recording has movements beyond 150 uV at all electrodes."""
    for visit in people.visits(20):
        assert 4 <= visit.blinks <= 9
        assert 1 <= visit.movements <= 2
    eeg = demo_write.simulate(20, visit_of("W02_day"), 60, SHORT, demo_write.Rates(128, 100, 1000)).eeg
    assert np.all(np.ptp(eeg, axis=1) > 150)


def test_study_loads_without_a_problem(short_demo: Path) -> None:
    """Description and tables are those of a faultless study: only signals are at fault."""
    study = load_study(short_demo)

    assert len(study.recordings) == 24
    assert set(study.description.signals) == {"eeg", "heart", "biceps"}
    assert {segment.segment for segment in study.segments} == {"contraction"}


def test_tables_name_every_file_that_was_written(short_demo: Path) -> None:
    """recordings.csv and raw/ hold the same files; two of them are text."""
    with (short_demo / "recordings.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))

    assert list(rows[0]) == ["recording", "participant", "file", "condition", "group", "age"]
    assert {row["file"] for row in rows} == {f"raw/{path.name}" for path in (short_demo / "raw").iterdir()}
    assert sum(row["file"].endswith(".csv") for row in rows) == 2


def test_truth_lists_recordings_faults_and_intervals(short_demo: Path) -> None:
    """ground_truth.json is complete, and each interval holds its own value."""
    content = json.loads((short_demo / "ground_truth.json").read_text(encoding="utf-8"))

    assert content["seed"] == 20
    assert content["faults"] == [asdict(fault) for fault in faults.FAULTS]
    assert len(content["recordings"]) == 24
    assert all(each["low"] < each["realised"] < each["high"] for each in content["expectations"])


def test_progress_is_told_after_each_recording(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """The number done counts up to the number of all."""
    monkeypatch.setattr(demo_write, "write_recording", lambda *_: None)
    told: list[tuple[int, int]] = []
    write_demo(tmp_path / "watch", progress=lambda done, of: told.append((done, of)))

    assert told == [(done, 24) for done in range(1, 25)]


def test_folder_with_anything_in_it_is_refused_and_left_alone(tmp_path: Path) -> None:
    """Nothing is overwritten."""
    (tmp_path / "notes.txt").write_text("keep", encoding="utf-8")

    with pytest.raises(StudyError, match="new or an empty folder"):
        write_demo(tmp_path)
    assert [path.name for path in tmp_path.iterdir()] == ["notes.txt"]


def test_file_in_place_of_the_folder_is_refused(tmp_path: Path) -> None:
    """A file of this name is no folder."""
    (tmp_path / "watch").write_text("keep", encoding="utf-8")

    with pytest.raises(StudyError, match="a file of this name"):
        write_demo(tmp_path / "watch")


def test_an_interrupted_writing_leaves_nothing_behind(tmp_path: Path) -> None:
    """Whoever interrupts the demo may start it again: the folder is empty, and no unfinished one stands beside."""

    def interrupt(_done: int, _total: int) -> None:
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        write_demo(tmp_path / "study", progress=interrupt)

    assert [path.name for path in tmp_path.iterdir()] == ["study"]
    assert list((tmp_path / "study").iterdir()) == []
