"""An analysis that shares no code with the package finds what was planted, inside the stated intervals."""

from __future__ import annotations

import csv
import json
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import pytest
from scipy import interpolate, signal

from bandcairn.demo import faults, write_demo
from bandcairn.recordings import Declared, read

if TYPE_CHECKING:
    from pathlib import Path

    from numpy.typing import NDArray

    Array = NDArray[np.float64]

EEG = ("Fz", "Cz", "Pz", "Oz")


@dataclass(frozen=True)
class Row:
    """One recording: its design and one value for each question and channel, on the question's scale."""

    participant: str
    condition: str
    group: str
    values: dict[tuple[str, str], float]


def zero_phase(samples: Array, rate_hz: float, band_hz: tuple[float, float], order: int) -> Array:
    """Take out the mains, then keep a band, forward and backward."""
    stop = signal.butter(2, (48, 52), "bandstop", fs=rate_hz, output="sos")
    keep = signal.butter(order, band_hz, "bandpass", fs=rate_hz, output="sos")
    return np.asarray(signal.sosfiltfilt(keep, signal.sosfiltfilt(stop, samples)))


def log10_band_powers(samples: Array, rate_hz: int) -> dict[tuple[str, str], float]:
    """Return alpha and beta power at each electrode, from the seconds in which it keeps below 150 uV."""
    filtered = zero_phase(samples, rate_hz, (0.5, 45), 4)
    values: dict[tuple[str, str], float] = {}
    for name, row in zip(EEG, filtered, strict=True):
        epochs = row.reshape(-1, 4 * rate_hz)
        kept = epochs[np.ptp(epochs, axis=1) < 150]
        if len(kept) == 0:
            continue
        frequency_hz, density = signal.welch(kept, float(rate_hz), nperseg=2 * rate_hz)
        for band, low_hz, high_hz in (("alpha", 8, 13), ("beta", 13, 30)):
            inside = (frequency_hz >= low_hz) & (frequency_hz < high_hz)
            power = np.mean(density, axis=0)[inside].sum() * 0.5
            values[f"{band} power, night against day", name] = float(np.log10(power))
    return values


def heart_values(samples: Array, rate_hz: int) -> dict[tuple[str, str], float]:
    """Return heart rate, ln RMSSD and ln LF/HF from the tops of parabolas through the R waves."""
    ecg = zero_phase(samples, rate_hz, (0.5, 40), 2)
    peaks, _ = signal.find_peaks(ecg, height=0.5 * np.percentile(ecg, 99.5), distance=rate_hz // 3)
    before, top, after = ecg[peaks - 1], ecg[peaks], ecg[peaks + 1]
    beat_s = (peaks + 0.5 * (before - after) / (before - 2 * top + after)) / rate_hz
    nn_ms = 1e3 * np.diff(beat_s)
    time_s = np.arange(beat_s[1], beat_s[-1], 0.25)
    tachogram = interpolate.CubicSpline(beat_s[1:], nn_ms)(time_s)
    frequency_hz, density = signal.welch(tachogram, 4, nperseg=480, detrend=signal.detrend)
    low = density[(frequency_hz >= 0.04) & (frequency_hz < 0.15)].sum()
    high = density[(frequency_hz >= 0.15) & (frequency_hz < 0.4)].sum()
    return {
        ("heart rate, night against day", "ECG"): float(60e3 / nn_ms.mean()),
        ("beat-to-beat variability, night against day", "ECG"): float(
            np.log(np.sqrt(np.mean(np.diff(nn_ms) ** 2)))
        ),
        ("LF/HF ratio, night against day", "ECG"): float(np.log(low / high)),
    }


def muscle_values(samples: Array, rate_hz: int) -> dict[tuple[str, str], float]:
    """Return slope and start of the line through the median frequency of each second of the contraction."""
    emg = zero_phase(samples, rate_hz, (20, 400), 4)[20 * rate_hz : 220 * rate_hz].reshape(200, -1)
    frequency_hz, density = signal.periodogram(emg, rate_hz, "hann")
    area = np.cumsum(density, axis=1)
    medians_hz = [np.interp(row[-1] / 2, row, frequency_hz + 0.5) for row in area]
    slope, start_hz = np.polyfit(np.arange(200) + 0.5, medians_hz, 1)
    return {
        ("fatigue, boat against quay", "EMG"): float(slope),
        ("fatigue, night against day", "EMG"): float(slope),
        ("starting frequency, night against day", "EMG"): float(start_hz),
    }


def analysed(folder: Path) -> list[Row]:
    """Return one row a recording, without the values of excluded channels."""
    with (folder / "recordings.csv").open(encoding="utf-8", newline="") as file:
        table = list(csv.DictReader(file))
    rows = []
    for line in table:
        values: dict[tuple[str, str], float] = {}
        for labels, analyse in (
            (EEG, log10_band_powers),
            (("ECG",), heart_values),
            (("EMG",), muscle_values),
        ):
            found = read(folder / line["file"], labels, Declared(unit="uV"), None, None).to_signal()
            samples = found.samples if labels == EEG else found.samples[0]
            values |= analyse(samples, int(found.rate_hz))
        kept = {
            key: each for key, each in values.items() if not faults.is_excluded(line["recording"], key[1])
        }
        rows.append(Row(line["participant"], line["condition"], line["group"], kept))
    return rows


def estimate(rows: list[Row], key: tuple[str, str]) -> float:
    """Return night minus day over complete pairs, or boat minus quay over the means of people."""
    have = [row for row in rows if key in row.values]
    people = {row.participant: [each for each in have if each.participant == row.participant] for row in have}
    if key[0] == "fatigue, boat against quay":
        means = {name: np.mean([row.values[key] for row in own]) for name, own in people.items()}
        boat, quay = (
            np.mean([means[name] for name, own in people.items() if own[0].group == group])
            for group in ("boat", "quay")
        )
        return float(boat - quay)
    pairs = [own for own in people.values() if len(own) == 2]
    return float(np.mean([night.values[key] - day.values[key] for day, night in pairs]))


@pytest.mark.slow
@pytest.mark.parametrize("seed", [20, 7])
def test_independent_analysis_finds_every_planted_value(tmp_path: Path, seed: int) -> None:
    """Every estimate of an analysis in plain scipy lies inside its interval."""
    write_demo(tmp_path, seed)
    rows = analysed(tmp_path)
    content = json.loads((tmp_path / "ground_truth.json").read_text(encoding="utf-8"))
    found = {
        (each["question"], each["channel"]): (
            each["low"],
            estimate(rows, (each["question"], each["channel"])),
            each["high"],
        )
        for each in content["expectations"]
    }

    assert len(found) == 14
    assert {key: each for key, each in found.items() if not each[0] < each[1] < each[2]} == {}
