"""Small folders of recordings to draft studies from."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING

import numpy as np
import pytest

from bandcairn.recordings.export import ExportChannel, write_bdf, write_edf

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence
    from pathlib import Path

    from numpy.typing import NDArray

PEOPLE = ("01", "02", "03")
TASKS = ("rest", "watch")
LENGTH_S = 40


@pytest.fixture(scope="session")
def noise() -> Callable[..., NDArray[np.float64]]:
    """Build samples: `noise(rate_hz, length_s=40, seed=1, spread=20, hum_hz=None, hum=40)`."""

    def build(
        rate_hz: int,
        *,
        length_s: int = LENGTH_S,
        seed: int = 1,
        spread: float = 20.0,
        hum_hz: float | None = None,
        hum: float = 40.0,
    ) -> NDArray[np.float64]:
        time_s = np.arange(length_s * rate_hz) / rate_hz
        samples = spread * np.random.default_rng(seed).standard_normal(time_s.size)
        return samples if hum_hz is None else samples + hum * np.sin(2 * np.pi * hum_hz * time_s)

    return build


@pytest.fixture(scope="session")
def put_edf(noise: Callable[..., NDArray[np.float64]]) -> Callable[..., None]:
    """Write an EDF or BDF file: `put_edf(path, {"Fz": 256}, unit="uV", **noise)`; folders are made."""

    def put(path: Path, rates_hz: dict[str, int], unit: str = "uV", **how: float) -> None:
        path.parent.mkdir(parents=True, exist_ok=True)
        channels = [
            ExportChannel(label, unit, rate_hz, noise(rate_hz, **how), (-3000.0, 3000.0))
            for label, rate_hz in rates_hz.items()
        ]
        (write_bdf if path.suffix == ".bdf" else write_edf)(path, channels)

    return put


@pytest.fixture(scope="session")
def put_table() -> Callable[..., None]:
    """Write a tab-separated table: `put_table(path, header, *rows)`."""

    def put(path: Path, *rows: Sequence[object]) -> None:
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text("".join("\t".join(map(str, row)) + "\n" for row in rows), "utf-8")

    return put


@pytest.fixture
def dataset(tmp_path: Path, put_edf: Callable[..., None], put_table: Callable[..., None]) -> Path:
    """Return a complete BIDS dataset: 3 people by 2 tasks, EEG with ECG in EDF, EMG of its own in BDF.

    The JSON of the root describes every EEG file; the channels of one recording are described beside it.
    """
    root = tmp_path / "harbour"
    root.mkdir()
    (root / "dataset_description.json").write_text(
        json.dumps({"Name": "Harbour watch", "BIDSVersion": "1.11.0"})
    )
    put_table(
        root / "participants.tsv",
        ("participant_id", "age", "group"),
        ("sub-01", 31, "crew"),
        ("sub-02", 44, "crew"),
        ("sub-03", "n/a", "office"),
    )
    common = {"SoftwareFilters": "n/a", "PowerLineFrequency": 50, "RecordingType": "continuous"}
    eeg = {**common, "EEGReference": "M1", "SamplingFrequency": 256}
    (root / "task-rest_eeg.json").write_text(json.dumps({**eeg, "TaskName": "rest"}))
    (root / "task-watch_eeg.json").write_text(json.dumps({**eeg, "TaskName": "watch"}))
    (root / "emg.json").write_text(json.dumps({**common, "EMGReference": "elbow", "SamplingFrequency": 1000}))
    header = ("name", "type", "units", "sampling_frequency", "status", "status_description")
    eeg_rows = [
        ("Fz", "EEG", "uV", "n/a", "good", "n/a"),
        ("Cz", "EEG", "uV", "n/a", "good", "n/a"),
        ("Heart", "ECG", "uV", "512", "good", "n/a"),
        ("UP", "VEOG", "uV", "n/a", "good", "n/a"),
    ]
    put_table(root / "task-rest_channels.tsv", header, *eeg_rows)
    put_table(root / "task-watch_channels.tsv", header, *eeg_rows)
    events = ("onset", "duration", "trial_type")
    for person in PEOPLE:
        folder = root / f"sub-{person}"
        for task in TASKS:
            stem = f"sub-{person}_task-{task}"
            put_edf(folder / "eeg" / f"{stem}_eeg.edf", {"Fz": 256, "Cz": 256, "Heart": 512, "UP": 256})
            put_edf(folder / "emg" / f"{stem}_emg.bdf", {"B1": 1000})
            put_table(
                folder / "emg" / f"{stem}_channels.tsv",
                ("name", "type", "units", "target_muscle"),
                ("B1", "EMG", "uV", "biceps brachii"),
            )
            put_table(folder / "emg" / f"{stem}_events.tsv", events, (5, 20, "hold"), (30, 0, "beep"))
    bad = [("Cz", "EEG", "uV", "n/a", "bad", "loose"), *(row for row in eeg_rows if row[0] != "Cz")]
    put_table(root / "sub-02" / "eeg" / "sub-02_task-rest_channels.tsv", header, *bad)
    return root
