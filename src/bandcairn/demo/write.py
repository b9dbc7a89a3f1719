"""Write the demo study: description, tables, raw files and the truth behind them."""

from __future__ import annotations

import csv
import json
import tempfile
from dataclasses import asdict, dataclass
from importlib.resources import files
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.demo import brain, faults, heart, muscle, people, truth
from bandcairn.errors import Problem, StudyError
from bandcairn.recordings.export import ExportChannel, write_delimited, write_edf

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Sequence

    from numpy.typing import NDArray

    from bandcairn.demo.people import Visit

LENGTH_S = 240
WORK = muscle.Contraction(20, 220)
SEGMENT = "contraction"

_EEG_RATE_HZ, _ECG_RATE_HZ, _EMG_RATE_HZ = 256, 500, 2000
_DELIMITED_RATE_HZ = 1000
_EEG_RANGE_UV, _ECG_RANGE_UV, _EMG_RANGE_UV = 800.0, 5000.0, 5000.0


@dataclass(frozen=True, slots=True, eq=False)
class Samples:
    """The signals of one recording in uV: `eeg` of shape (4, n), `ecg` and `emg` of shape (n,)."""

    eeg: NDArray[np.float64]
    ecg: NDArray[np.float64]
    emg: NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Rates:
    """Sampling rates in Hz."""

    eeg: int
    ecg: int
    emg: int


_EDF_RATES = Rates(_EEG_RATE_HZ, _ECG_RATE_HZ, _EMG_RATE_HZ)
_DELIMITED_RATES = Rates(_DELIMITED_RATE_HZ, _DELIMITED_RATE_HZ, _DELIMITED_RATE_HZ)


def write_demo(folder: Path, seed: int = 20, progress: Callable[[int, int], None] | None = None) -> None:
    """Write the study of a night watch at a harbour that never was: 12 people, each by day and by night.

    Parameters
    ----------
    folder : Path
        Made if it does not exist; must be empty.
    seed : int
        Equal seeds give equal bytes. With the default none of the planted null effects comes out as
        significant; with about one seed in four chance makes one do so, as in any study.
    progress : callable, optional
        Called after each recording with the number written and the number of all.

    Raises
    ------
    StudyError
        If `folder` is a file or holds anything.
    """
    _refuse_occupied(folder)
    folder.mkdir(parents=True, exist_ok=True)
    # Written beside its place and moved there whole: who interrupts it finds the folder empty, and starts again.
    with tempfile.TemporaryDirectory(prefix=".demo-", dir=folder.resolve().parent) as unfinished:
        _write_study(Path(unfinished), seed, progress)
        for part in Path(unfinished).iterdir():
            part.rename(folder / part.name)


def _write_study(folder: Path, seed: int, progress: Callable[[int, int], None] | None) -> None:
    visits = tuple(people.visits(seed))
    (folder / "raw").mkdir()
    (folder / "study.yaml").write_bytes(files("bandcairn.demo").joinpath("study.yaml").read_bytes())
    _write_recordings_table(folder / "recordings.csv", visits)
    _write_segments_table(folder / "segments.csv", visits)
    _write_truth(folder / "ground_truth.json", seed, visits)
    for done, visit in enumerate(visits, start=1):
        write_recording(folder / file_of(visit), seed, visit, LENGTH_S, WORK)
        if progress is not None:
            progress(done, len(visits))


def file_of(visit: Visit) -> str:
    """Return the path of a recording's raw file relative to the study folder."""
    suffix = "csv" if visit.recording in faults.DELIMITED else "edf"
    return f"raw/{visit.recording}.{suffix}"


def write_recording(path: Path, seed: int, visit: Visit, length_s: int, work: muscle.Contraction) -> None:
    """Write one raw file, delimited text or EDF+ by the suffix of `path`, with the faults planted in it.

    Parameters
    ----------
    path : Path
        Overwritten if it exists.
    seed : int
        Of the study.
    visit : Visit
        What to draw from.
    length_s : int
        Length of the recording.
    work : Contraction
        When the muscle works.
    """
    if path.suffix == ".csv":
        _write_text(path, simulate(seed, visit, length_s, work, _DELIMITED_RATES))
    else:
        samples = simulate(seed, visit, length_s, work, _EDF_RATES)
        write_edf(path, _channels(visit.recording, samples), record_s=1)


def simulate(seed: int, visit: Visit, length_s: int, work: muscle.Contraction, rates: Rates) -> Samples:
    """Return the signals of a recording with artefacts and a flat channel, before they are stored.

    Each signal has a stream of its own, so that one may change without the others.
    """
    parent = people.generator(seed, visit.person.number, visit.condition)
    # The first child drew the models.
    _, muscle_rng, heart_rng, brain_rng = parent.spawn(4)
    eeg = brain.eeg(brain_rng, visit.eeg, length_s, rates.eeg)
    brain.add_blinks(brain_rng, eeg, rates.eeg, visit.blinks)
    brain.add_movements(brain_rng, eeg, rates.eeg, visit.movements)
    for row, channel in enumerate(brain.CHANNELS):
        if faults.has_fault(visit.recording, channel, faults.FLAT):
            eeg[row] = 0
    return Samples(
        eeg=eeg,
        ecg=heart.ecg(heart_rng, visit.heart, length_s, rates.ecg),
        emg=muscle.emg(muscle_rng, visit.muscle, work, length_s, rates.emg),
    )


def _channels(recording: str, samples: Samples) -> list[ExportChannel]:
    """Return the channels of an EDF file; what lies beyond a channel's range is stored as its limit."""
    in_millivolt = faults.has_fault(recording, "EEG", faults.MILLIVOLT)
    clipped = faults.has_fault(recording, "EMG", faults.CLIPPED)
    eeg = [
        _channel(name, _EEG_RATE_HZ, row, _EEG_RANGE_UV, in_millivolt=in_millivolt)
        for name, row in zip(brain.CHANNELS, samples.eeg, strict=True)
    ]
    emg_range_uv = faults.CLIP_LIMIT_UV if clipped else _EMG_RANGE_UV
    return [
        *eeg,
        _channel("ECG", _ECG_RATE_HZ, samples.ecg, _ECG_RANGE_UV),
        _channel("EMG", _EMG_RATE_HZ, samples.emg, emg_range_uv),
    ]


def _channel(
    label: str, rate_hz: int, samples_uv: NDArray[np.float64], range_uv: float, *, in_millivolt: bool = False
) -> ExportChannel:
    unit, per_uv = ("mV", 1e-3) if in_millivolt else ("uV", 1.0)
    limit = range_uv * per_uv
    return ExportChannel(
        label=label,
        unit=unit,
        rate_hz=rate_hz,
        samples=np.clip(samples_uv * per_uv, -limit, limit),
        physical_range=(-limit, limit),
    )


def _write_text(path: Path, samples: Samples) -> None:
    time_s = np.arange(samples.ecg.size) / _DELIMITED_RATE_HZ
    names = ("time_s", *brain.CHANNELS, "ECG", "EMG")
    write_delimited(path, names, (time_s, *samples.eeg, samples.ecg, samples.emg), decimals=3)


def _write_recordings_table(path: Path, visits: Sequence[Visit]) -> None:
    rows = (
        (
            visit.recording,
            visit.person.name,
            file_of(visit),
            visit.condition,
            visit.person.group,
            visit.person.age,
        )
        for visit in visits
    )
    _write_table(path, ("recording", "participant", "file", "condition", "group", "age"), rows)


def _write_segments_table(path: Path, visits: Sequence[Visit]) -> None:
    rows = ((visit.recording, SEGMENT, WORK.start_s, WORK.stop_s) for visit in visits)
    _write_table(path, ("recording", "segment", "start_s", "stop_s"), rows)


def _write_table(path: Path, header: tuple[str, ...], rows: Iterable[tuple[object, ...]]) -> None:
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(header)
        writer.writerows(rows)


def _write_truth(path: Path, seed: int, visits: Sequence[Visit]) -> None:
    content = {
        "about": "Computed from the planted models and the settings of study.yaml, before any file was "
        "written. planted: of the population; realised: of the people drawn, whose channels are not "
        "excluded; low, high: four standard errors of measurement either side.",
        "seed": seed,
        "expectations": [asdict(each) for each in truth.expectations(visits, LENGTH_S, WORK)],
        "recordings": [_truth_of(visit) for visit in visits],
        "faults": [asdict(each) for each in faults.FAULTS],
    }
    path.write_text(json.dumps(_rounded(content), indent=1) + "\n", encoding="utf-8")


def _truth_of(visit: Visit) -> dict[str, object]:
    """Return the planted values of one recording, before any filter."""
    alpha_uv2 = brain.band_power(visit.eeg, *truth.ALPHA_HZ)
    return {
        "recording": visit.recording,
        "file": file_of(visit),
        "alpha_power_uv2": dict(zip(brain.CHANNELS, alpha_uv2.tolist(), strict=True)),
        "aperiodic_exponent": visit.eeg.exponent,
        "heart_rate_per_min": visit.heart.rate_per_min,
        "sdnn_ms": visit.heart.sdnn_ms,
        "rmssd_ms": heart.expected_rmssd_ms(visit.heart),
        "lf_hf_ratio": visit.heart.lf_hf_ratio,
        "emg_median_frequency_start_hz": visit.muscle.median_start_hz,
        "emg_median_frequency_slope_hz_per_s": visit.muscle.median_slope_hz_per_s,
        "blinks": visit.blinks,
        "movements": visit.movements,
    }


def _rounded(value: object) -> object:
    """Return `value` with every float at six significant digits: the last bits differ between processors."""
    if isinstance(value, float):
        return float(f"{value:.6g}")
    if isinstance(value, dict):
        return {key: _rounded(each) for key, each in value.items()}
    if isinstance(value, list):
        return [_rounded(each) for each in value]
    return value


def _refuse_occupied(folder: Path) -> None:
    if not folder.exists() or (folder.is_dir() and not any(folder.iterdir())):
        return
    found = "files in it" if folder.is_dir() else "a file of this name"
    remedy = "Name another folder, or empty this one yourself."
    raise StudyError((Problem(str(folder), "", "folder", found, "a new or an empty folder", remedy),))
