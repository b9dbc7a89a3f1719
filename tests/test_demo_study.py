"""The demo study by one command: what it writes, and whether the planted effects come back."""

from __future__ import annotations

import csv
import json
import math
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest

from bandcairn.demo.faults import CLIPPED, FAULTS, FLAT

COMMAND = str(Path(sys.executable).with_name("bandcairn"))
DESIGN = ["condition", "group", "age"]
# Word for word from the contract.
CONTRACT = {
    "features": [
        *("recording", "participant", *DESIGN, "signal", "channel", "segment", "feature", "band"),
        *("value", "unit", "epochs_used", "epochs_total", "note", "node"),
    ],
    "statistics": [
        *("question", "signal", "channel", "feature", "band", "test", "term", "estimate", "estimate_unit"),
        *("ci_low", "ci_high", "statistic", "df", "df2", "p", "p_adjusted", "adjustment", "family"),
        *("family_size", "effect_size", "effect_size_name", "effect_ci_low", "effect_ci_high"),
        *("n_participants", "n_observations", "status", "note", "node"),
    ],
    "quality": ["recording", "signal", "channel", "measure", "value", "unit", "limit", "passed", "node"],
    "exclusions": ["recording", "signal", "channel", "segment", "what", "count", "total", "reason"],
    "ledger": [
        *("key", "step", "recording", "signal", "path", "parents", "parameters", "data_digest"),
        *("step_version", "software", "started", "seconds", "peak_memory_mb"),
    ],
}


@pytest.fixture(scope="module")
def demo(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return the folder of a demo study, written and run by the command itself."""
    folder = tmp_path_factory.mktemp("demo") / "demo-study"
    done = subprocess.run(
        [COMMAND, "demo", str(folder), "--cores", "2"], capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stderr
    assert "alpha power, night against day" in done.stdout
    assert f"results: {folder / 'results'}" in done.stdout
    return folder


def _table(demo: Path, name: str) -> pd.DataFrame:
    return pd.read_parquet(demo / "results" / f"{name}.parquet")


def _rows(demo: Path, name: str, **where: str) -> list[dict[str, Any]]:
    found = [
        row
        for row in _table(demo, name).to_dict("records")
        if all(row[column] == value for column, value in where.items())
    ]
    assert found, f"no row of {name} has {where}"
    return found  # type: ignore[return-value]


def _expectations() -> list[tuple[str, str]]:
    """Return question and channel of everything planted, as the truth file will name them."""
    alike = ("alpha power, night against day", "beta power, night against day")
    single = {
        "heart rate, night against day": "ECG",
        "beat-to-beat variability, night against day": "ECG",
        "LF/HF ratio, night against day": "ECG",
        "fatigue, boat against quay": "EMG",
        "fatigue, night against day": "EMG",
        "starting frequency, night against day": "EMG",
    }
    channels = [(question, channel) for question in alike for channel in ("Fz", "Cz", "Pz", "Oz")]
    return [*channels, *single.items()]


def test_every_contract_table_has_exactly_its_columns_in_order(demo: Path) -> None:
    """The five tables stand as Parquet and as CSV, with the columns of the contract and no other."""
    for name, columns in CONTRACT.items():
        assert list(_table(demo, name).columns) == columns
        header = (demo / "results" / f"{name}.csv").read_text("utf-8").split("\n", 1)[0]
        assert header.split(",") == columns


def test_parquet_and_csv_hold_the_same_numbers(demo: Path) -> None:
    """A number in a CSV is the very number of the Parquet file, to the last bit."""
    for name in CONTRACT:
        with (demo / "results" / f"{name}.csv").open(encoding="utf-8", newline="") as file:
            rows = list(csv.DictReader(file))
        table = _table(demo, name)
        assert len(rows) == len(table) > 0
        for column in table.select_dtypes("float64"):
            numbers = [float(row[column]) if row[column] else math.nan for row in rows]
            np.testing.assert_array_equal(numbers, table[column].to_numpy())


def test_features_are_sorted_by_their_columns(demo: Path) -> None:
    """The feature table is sorted by recording, participant, design, signal, channel, segment, feature, band."""
    order = CONTRACT["features"][:10]
    places = _table(demo, "features")[order].fillna("").astype(str)
    rows = [tuple(row) for row in places.itertuples(index=False)]
    assert rows == sorted(rows)
    assert len(set(rows)) == len(rows)


def test_truth_names_every_question_and_channel(demo: Path) -> None:
    """Whatever is asked of the demo study has a planted answer, and nothing else has."""
    truth = json.loads((demo / "ground_truth.json").read_text("utf-8"))
    planted = {(one["question"], one["channel"]) for one in truth["expectations"]}
    answers = _table(demo, "statistics")
    asked = set(zip(answers["question"], answers["channel"], strict=True))
    assert planted == asked == set(_expectations())


@pytest.mark.parametrize(("question", "channel"), _expectations())
def test_planted_effect_is_found_within_its_interval_and_with_its_sign(
    demo: Path, question: str, channel: str
) -> None:
    """Each estimate lies between low and high of the truth file; a planted difference keeps its sign and is told apart.

    A planted null must not come out as significant with the seed of the demo.
    """
    truth = json.loads((demo / "ground_truth.json").read_text("utf-8"))
    planted = next(
        one for one in truth["expectations"] if (one["question"], one["channel"]) == (question, channel)
    )
    (row,) = _rows(demo, "statistics", question=question, channel=channel)
    assert planted["low"] <= row["estimate"] <= planted["high"]
    assert row["status"] == "ok"
    assert row["n_participants"] == planted["n_participants"]
    assert row["estimate_unit"] == planted["unit"]
    if planted["planted"] == 0:
        assert row["p_adjusted"] > 0.05
    else:
        assert row["estimate"] * planted["planted"] > 0
        assert row["p_adjusted"] < 0.05
        assert row["ci_low"] * row["ci_high"] > 0


@pytest.mark.parametrize(("kind", "measure"), [(CLIPPED, "clipped_share"), (FLAT, "flat_share")])
def test_planted_fault_stands_in_quality_and_exclusions(demo: Path, kind: str, measure: str) -> None:
    """A clipped and a flat channel fail their quality limit, and are left out with the measure as their reason."""
    fault = next(fault for fault in FAULTS if fault.kind == kind)
    place = {"recording": fault.recording, "channel": fault.channel}
    failed = [row for row in _table(demo, "quality").to_dict("records") if row["passed"] is False]
    assert sum(row["measure"] == measure for row in failed) == 1
    (judged,) = _rows(demo, "quality", **place, measure=measure)
    assert judged["passed"] is False
    assert judged["value"] > judged["limit"]
    excluded = _rows(demo, "exclusions", **place, what="channel")
    assert [row["reason"].startswith(measure) for row in excluded] == [True]
    left_out = _rows(demo, "features", **place)
    assert all(pd.isna(row["value"]) and measure in row["note"] for row in left_out)
    assert {row["epochs_used"] for row in left_out} == {0}


def test_recording_in_millivolt_has_the_scale_of_its_fellow(demo: Path) -> None:
    """A file that states mV gives values in uV: its power is that of the same person's other recording.

    A unit taken for another would be off by 10^6 in power; between the two visits power moves by less than 4 times.
    """
    ratios = []
    for channel in ("Fz", "Cz", "Pz", "Oz"):
        place = {"channel": channel, "feature": "total_power"}
        (night,) = _rows(demo, "features", recording="W07_night", **place)
        (day,) = _rows(demo, "features", recording="W07_day", **place)
        ratios.append(night["value"] / day["value"])
    assert all(1 / 4 < ratio < 4 for ratio in ratios)


def test_band_that_needs_longer_epochs_is_null_with_its_reason(demo: Path) -> None:
    """VLF power needs 300 s; from epochs of 240 s it is null, and the note says why."""
    rows = [row for row in _rows(demo, "features", feature="band_power") if row["band"] == "vlf"]
    assert len(rows) == 24
    assert all(pd.isna(row["value"]) for row in rows)
    assert {row["note"] for row in rows} == {"epoch of 240 s is shorter than 300 s"}


def test_every_value_names_a_node_of_the_ledger(demo: Path) -> None:
    """Each number leads to a node whose file exists and whose digest and recipe stand in the ledger."""
    ledger = _table(demo, "ledger").set_index("key")
    for name in ("features", "statistics", "quality"):
        assert set(_table(demo, name)["node"]) <= set(ledger.index)
    assert ledger.index.is_unique
    assert all((demo / path).is_file() for path in ledger["path"])
    assert ledger["data_digest"].str.fullmatch("[0-9a-f]{64}").all()


def test_demo_on_its_own_folder_runs_it_as_it_stands(demo: Path) -> None:
    """A second demo into the same folder writes no recording anew and computes nothing."""
    before = {path: path.stat().st_mtime_ns for path in (demo / "raw").iterdir()}
    again = subprocess.run([COMMAND, "demo", str(demo)], capture_output=True, text=True, check=False)
    assert again.returncode == 0, again.stderr
    assert "nothing to compute" in again.stdout
    assert {path: path.stat().st_mtime_ns for path in (demo / "raw").iterdir()} == before
