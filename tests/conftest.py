"""A tiny study on disk that many tests share: minutes of EEG, ECG and EMG, computed in moments."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pytest
from hypothesis import HealthCheck, settings

from bandcairn.recordings.export import ExportChannel, write_delimited, write_edf

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    from numpy.typing import NDArray

# Property tests: the same examples every time, and no failure because a machine is busy.
settings.register_profile(
    "calm", derandomize=True, deadline=None, suppress_health_check=[HealthCheck.too_slow]
)
settings.load_profile("calm")


LENGTH_S = 60
CONDITIONS = ("day", "night")
RATES_HZ = {"Fz": 256, "Cz": 256, "ECG": 256, "EMG": 1000}
RANGES_UV = {"Fz": 400.0, "Cz": 400.0, "ECG": 4000.0, "EMG": 4000.0}
STUDY = """\
study: Harbour in small
mains_hz: 50
signals:
  eeg:
    kind: eeg
    channels: [Fz, Cz]
    segments: []
    resample: {rate_hz: 128}
    filter:
      - {type: bandpass, cutoff_hz: [0.5, 40], design: butterworth, order: 4}
    epoch: {length_s: 4, overlap: 0.5, reject: {peak_to_peak_uv: 300}}
    spectrum: {method: welch, segment_s: 2}
    features:
      bands_hz: {theta: [4, 8], alpha: [8, 13]}
  heart:
    kind: ecg
    channels: [ECG]
    segments: []
    filter:
      - {type: bandpass, cutoff_hz: [1, 40], design: butterworth, order: 2}
    epoch: {length_s: 60}
    spectrum: {method: welch, segment_s: 30}
  arm:
    kind: emg
    channels: [EMG]
    segments: [hold]
    filter:
      - {type: highpass, cutoff_hz: 20, design: butterworth, order: 4}
      - {type: lowpass, cutoff_hz: 400, design: butterworth, order: 2}
    epoch: {length_s: 1}
    spectrum: {method: periodogram}
questions:
  - name: alpha by shift
    signal: eeg
    feature: band_power
    band: alpha
    scale: log10
    within: condition
    contrast: [night, day]
    test: paired_t
    family: watch
  - name: heart rate by shift
    signal: heart
    feature: heart_rate
    within: condition
    contrast: [night, day]
    test: paired_t
    family: watch
  - name: fatigue by shift
    signal: arm
    feature: median_frequency
    within: condition
    contrast: [night, day]
    test: paired_t
"""


@pytest.fixture(scope="session")
def make_study() -> Callable[..., Path]:
    """Build studies: `make_study(folder, people=2, study=STUDY, delimited=False)` returns the folder.

    Each participant has a recording by day and one by night, ``p1_day``, in ``raw/p1_day.edf``. Delimited files
    have all channels at 1000 Hz and no unit, and the study declares it: each takes a third of a second.
    """
    return _make_study


@pytest.fixture
def small_study(tmp_path: Path) -> Path:
    """Return the folder of a study of two participants, not yet run."""
    return _make_study(tmp_path / "study")


@pytest.fixture(scope="session")
def edit_study() -> Callable[[Path, str, str], None]:
    """Change a text of study.yaml that must stand there once: `edit_study(folder, before, after)`."""

    def edit(folder: Path, before: str, after: str) -> None:
        file = folder / "study.yaml"
        text = file.read_text("utf-8")
        assert text.count(before) == 1, f"{before!r} stands {text.count(before)} times in the study"
        file.write_text(text.replace(before, after), "utf-8")

    return edit


@pytest.fixture(scope="session")
def finished_study(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Return the folder of a study of two participants that has been run. Shared: copy it before changing it.

    Its nodes are computed in this process, without the workflow engine, which takes many seconds to start.
    """
    from bandcairn.execution.project import open_project
    from bandcairn.execution.publish import publish
    from bandcairn.execution.worker import Worker

    folder = _make_study(tmp_path_factory.mktemp("finished") / "study")
    project = open_project(folder)
    worker = Worker(project)
    done = worker.work(project.plan.nodes.values())
    records = {record["key"]: record for record in done.records}
    publish(project, worker.plan_study_nodes(), worker.store, records, done.failures)
    assert done.failures == []
    open_project(folder)  # by now the files are old enough for the memory of raw files to trust their times
    return folder


def _make_study(folder: Path, people: int = 2, study: str = STUDY, *, delimited: bool = False) -> Path:
    (folder / "raw").mkdir(parents=True)
    suffix = "csv" if delimited else "edf"
    rows = ["recording,participant,file,condition,group"]
    segments = ["recording,segment,start_s,stop_s"]
    for person in range(1, people + 1):
        for shift, condition in enumerate(CONDITIONS):
            name = f"p{person}_{condition}"
            _write_recording(folder / "raw" / f"{name}.{suffix}", seed=100 * person + shift, shift=shift)
            group = "crew" if person % 2 else "office"
            rows.append(f"{name},p{person},raw/{name}.{suffix},{condition},{group}")
            segments.append(f"{name},hold,10,50")
    load = "load: {rate_hz: 1000, unit: uV}\n" if delimited else ""
    for file, text in (
        ("study.yaml", study.replace("signals:\n", f"{load}signals:\n", 1)),
        ("recordings.csv", "\n".join(rows) + "\n"),
        ("segments.csv", "\n".join(segments) + "\n"),
    ):
        (folder / file).write_text(text, "utf-8")
    return folder


def _write_recording(path: Path, seed: int, shift: int) -> None:
    rates_hz = RATES_HZ if path.suffix == ".edf" else dict.fromkeys(RATES_HZ, 1000)
    rng = np.random.default_rng(seed)
    samples = {label: _samples(label, rate_hz, shift, rng) for label, rate_hz in rates_hz.items()}
    if path.suffix == ".csv":
        write_delimited(path, list(samples), list(samples.values()), decimals=2)
        return
    channels = [
        ExportChannel(label, "uV", rates_hz[label], values, (-RANGES_UV[label], RANGES_UV[label]))
        for label, values in samples.items()
    ]
    write_edf(path, channels)


def _samples(label: str, rate_hz: int, shift: int, rng: np.random.Generator) -> NDArray[np.float64]:
    """Return noise with an alpha rhythm, heart beats, or a plain interference pattern, in uV."""
    time_s = np.arange(LENGTH_S * rate_hz) / rate_hz
    noise = rng.standard_normal(time_s.size)
    values: NDArray[np.float64] = 8 * noise + (10 + 4 * shift) * np.sin(2 * np.pi * 10 * time_s)
    if label == "EMG":
        values = (200 + 20 * shift) * noise
    elif label == "ECG":
        intervals_s = (0.80, 0.86)[shift] + rng.normal(0, 0.03, 2 * LENGTH_S)
        beats_s = 0.5 + np.cumsum(intervals_s)
        since_s = time_s - beats_s[np.abs(time_s[:, None] - beats_s).argmin(axis=1)]
        values = 1000 * np.exp(-0.5 * (since_s / 0.012) ** 2) + 10 * noise
    return values
