"""Load nodes of files that are not plain: what was found amiss travels with the samples, to the last step."""

from __future__ import annotations

import re
from fractions import Fraction
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd
import pytest

from bandcairn.execution.frames import frame_to_signal
from bandcairn.execution.project import open_project
from bandcairn.execution.publish import publish
from bandcairn.execution.worker import Worker
from bandcairn.recordings.export import ExportChannel, write_delimited, write_edf
from bandcairn.store.store import Store

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    from bandcairn.store.frame import Frame

RATE_HZ = 128
STUDY = """\
study: Files as they come
mains_hz: 50
load: {unit: uV, missing: gap}
aliases: {Cz: [EEG Cz, CZ]}
signals:
  eeg:
    kind: eeg
    channels: [Cz]
    filter: [{type: bandpass, cutoff_hz: [1, 40], design: butterworth, order: 2}]
    epoch: {length_s: 2}
    spectrum: {method: periodogram}
    features: {bands_hz: {alpha: [8, 13]}}
"""


def eeg(seed: int, length_s: int = 120) -> np.ndarray[Any, np.dtype[np.float64]]:
    """Return noise in uV."""
    return np.random.default_rng(seed).normal(0, 20, length_s * RATE_HZ)


def edf(path: Path, label: str, seed: int, *, jump_s: int = 0, lost: int = 0) -> None:
    """Write two minutes; half way the clock jumps, and at the end bytes are lost."""
    write_edf(path, [ExportChannel(label, "uV", RATE_HZ, eeg(seed), (-500, 500))], record_s=1)
    content = path.read_bytes()
    if jump_s:
        content = content.replace(b"EDF+C", b"EDF+D")
        for record in reversed(range(60, 120)):
            before, after = f"+{record}\x14\x14", f"+{record + jump_s}\x14\x14"
            old, new = before.encode(), after.encode()
            place = content.index(old + b"\0", 768)
            content = content[:place] + new + content[place + len(new) :]
    path.write_bytes(content[: len(content) - lost])


@pytest.fixture
def study(tmp_path: Path) -> Callable[..., Path]:
    """Build a study of the files written by the test: `study(*names)` returns its folder."""

    def build(*names: str) -> Path:
        rows = [f"{name.partition('.')[0]},p{index},raw/{name},day" for index, name in enumerate(names)]
        (tmp_path / "recordings.csv").write_text(
            "recording,participant,file,condition\n" + "\n".join(rows) + "\n", "utf-8"
        )
        (tmp_path / "study.yaml").write_text(STUDY, "utf-8")
        return tmp_path

    (tmp_path / "raw").mkdir()
    return build


def computed(folder: Path) -> tuple[Callable[[str, str], Frame], list[str]]:
    """Compute every node; return a door to them by recording and step, and the reasons of failures."""
    project = open_project(folder)
    work = Worker(project).work(project.plan.recording_nodes.values())
    store = Store(project.store_folder)

    def node(recording: str, step: str) -> Frame:
        return store.get(step, project.plan.slots[recording, "eeg", step])

    reasons = [failure.reason for failure in work.failures] + list(project.survey.unreadable.values())
    return node, reasons


def test_p4_no_epoch_lies_across_a_gap_and_times_behind_it_are_true(
    study: Callable[..., Path], tmp_path: Path
) -> None:
    """From the file through the filter to the epochs: 60 s, an hour without samples, 60 s."""
    edf(tmp_path / "raw/gap.edf", "Cz", 1, jump_s=3600)
    node, reasons = computed(study("gap.edf"))
    assert reasons == []
    assert node("gap", "load").facts["runs"] == [[0, 7680, "0"], [7680, 15360, "3660"]]
    filtered = frame_to_signal(node("gap", "filter"))
    assert [run.start_s for run in filtered.runs] == [Fraction(0), Fraction(3660)]
    starts_s = node("gap", "epoch").numbers("start_s")
    np.testing.assert_array_equal(
        starts_s, np.concatenate((np.arange(0, 60, 2.0), 3660 + np.arange(0, 60, 2.0)))
    )


def test_p19_samples_beyond_a_gap_leave_no_trace(study: Callable[..., Path], tmp_path: Path) -> None:
    """The first half is filtered as if the second were another one."""
    halves = []
    for tail in (b"", b"\x7f\x7f" * RATE_HZ):
        path = tmp_path / "raw/one.edf"
        edf(path, "Cz", 1, jump_s=10)
        content = path.read_bytes()
        record = len(content[768:]) // 120
        first = 768 + 60 * record
        path.write_bytes(content[:first] + tail + content[first + len(tail) :])
        node, _ = computed(study("one.edf"))
        halves.append(frame_to_signal(node("one", "filter")).samples[0])
    np.testing.assert_array_equal(halves[0][:7680], halves[1][:7680])
    assert np.abs(halves[0][7680:] - halves[1][7680:]).max() > 100


def test_p6_what_was_repaired_stands_beside_the_samples(study: Callable[..., Path], tmp_path: Path) -> None:
    """And in no other node than that of the file cut short."""
    edf(tmp_path / "raw/whole.edf", "Cz", 1)
    edf(tmp_path / "raw/short.edf", "Cz", 2, lost=9)
    node, reasons = computed(study("whole.edf", "short.edf"))
    assert reasons == []
    (repair,) = node("short", "load").facts["repairs"]
    assert (repair["n_records_header"], repair["n_records_found"]) == (120, 119)
    assert repair["told"].startswith("the header says 120 data records, 119 found, ")
    assert "repairs" not in node("whole", "load").facts


def test_p6_what_was_repaired_stands_in_the_exclusions(study: Callable[..., Path], tmp_path: Path) -> None:
    """One row for the file, with the records that are missing and what was found."""
    edf(tmp_path / "raw/whole.edf", "Cz", 1)
    edf(tmp_path / "raw/short.edf", "Cz", 2, lost=9)
    project = open_project(study("whole.edf", "short.edf"))
    worker = Worker(project)
    done = worker.work(project.plan.nodes.values())
    records = {record["key"]: record for record in done.records}
    publish(project, worker.plan_study_nodes(), worker.store, records, done.failures)
    table = pd.read_parquet(project.results_folder / "exclusions.parquet")
    (row,) = table[table["what"] == "data records"].to_dict("records")
    assert (row["recording"], row["count"], row["total"]) == ("short", 1, 120)
    assert row["reason"].startswith("repaired: the header says 120 data records, 119 found")


def test_p6_a_file_that_lacks_too_much_is_left_out_and_the_others_go_on(
    study: Callable[..., Path], tmp_path: Path
) -> None:
    """With both numbers and what may be declared."""
    edf(tmp_path / "raw/whole.edf", "Cz", 1)
    edf(tmp_path / "raw/short.edf", "Cz", 2, lost=9000)
    node, (reason,) = computed(study("whole.edf", "short.edf"))
    assert re.search(r"short\.edf: .*header says 120 data records, \d+ found.*max_missing_share", reason)
    assert node("whole", "features").columns


def test_p14_channels_of_three_rigs_have_one_name_and_keep_their_label(
    study: Callable[..., Path], tmp_path: Path
) -> None:
    """The name of the study in every column, the label of the file beside it."""
    for name, label in (("a.edf", "Cz"), ("b.edf", "EEG Cz"), ("c.edf", "CZ")):
        edf(tmp_path / "raw" / name, label, ord(name[0]))
    node, reasons = computed(study("a.edf", "b.edf", "c.edf"))
    assert reasons == []
    assert [list(node(name, "load").columns) for name in "abc"] == [["Cz"]] * 3
    assert [node(name, "load").facts.get("labels") for name in "abc"] == [None, ["EEG Cz"], ["CZ"]]


def test_p24_missing_samples_of_a_table_part_the_signal(study: Callable[..., Path], tmp_path: Path) -> None:
    """Blank cells become a gap, which no filter crosses."""
    time_s = np.arange(120 * RATE_HZ) / RATE_HZ
    path = tmp_path / "raw/table.csv"
    write_delimited(path, ["time_s", "Cz"], [time_s, eeg(3)], decimals=7)
    lines = path.read_text("utf-8").splitlines()
    for row in range(1 + 50 * RATE_HZ, 1 + 53 * RATE_HZ):
        lines[row] = lines[row].partition(",")[0] + ","
    path.write_text("\n".join(lines) + "\n", "utf-8")
    node, reasons = computed(study("table.csv"))
    assert reasons == []
    assert node("table", "load").facts["runs"] == [[0, 6400, "0"], [6400, 14976, "53"]]
    assert np.isfinite(node("table", "filter").numbers("Cz")).all()
