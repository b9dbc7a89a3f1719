"""The study that is processed by both sides: its recordings, and a description with the settings of the script."""

from __future__ import annotations

import json
import shutil
import subprocess
import sys
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

YARDSTICK = Path(__file__).parent / "yardstick"
LOW_EDGE_HZ, EDITED_LOW_EDGE_HZ = 0.5, 1.0

# What the script tests between the conditions, as far as bandcairn has the feature: signal, feature, its bands.
_ASKED: tuple[tuple[str, str, tuple[str | None, ...]], ...] = (
    ("eeg", "band_power", ("delta", "theta", "alpha", "beta", "gamma")),
    ("eeg", "relative_band_power", ("delta", "theta", "alpha", "beta", "gamma")),
    ("eeg", "spectral_edge_95", (None,)),
    ("heart", "heart_rate", (None,)),
    ("heart", "sdnn", (None,)),
    ("heart", "rmssd", (None,)),
    ("heart", "beats", (None,)),
    ("heart", "band_power", ("lf", "hf")),
    ("heart", "lf_hf_ratio", (None,)),
    ("muscle", "median_frequency", (None,)),
    ("muscle", "mean_frequency", (None,)),
    ("muscle", "median_frequency_slope", (None,)),
    ("muscle", "median_frequency_slope_percent", (None,)),
    ("muscle", "rms", (None,)),
)


@dataclass(frozen=True, slots=True)
class HeartSettings:
    """The settings that must fit the length of the recordings; the defaults are those of the script.

    Attributes
    ----------
    epoch_s, segment_s : float
        Length of an epoch and of a segment of its spectrum.
    bands_hz : dict of str to (low, high)
        Each at least 1 / segment_s wide.
    """

    epoch_s: float = 300
    segment_s: float = 64
    bands_hz: dict[str, tuple[float, float]] = field(
        default_factory=lambda: {"vlf": (0.003, 0.04), "lf": (0.04, 0.15), "hf": (0.15, 0.4)}
    )

    @classmethod
    def for_minutes(cls, minutes: float) -> HeartSettings:
        """Return the script's settings, in a short trial with one epoch of a recording's length."""
        return cls() if minutes >= 5 else cls(60 * minutes, 30 * minutes)


@dataclass(frozen=True, slots=True)
class BenchStudy:
    """A study folder that both sides read.

    Attributes
    ----------
    folder : Path
        Raw files and tables, made once; study.yaml and everything computed from it come and go.
    recordings : int
        Number of raw files.
    minutes : float
        Length of each.
    heart : HeartSettings
        What depends on it.
    """

    folder: Path
    recordings: int
    minutes: float
    heart: HeartSettings

    def describe(self, low_edge_hz: float = LOW_EDGE_HZ) -> None:
        """Write study.yaml; `low_edge_hz` is the one parameter that is edited."""
        text = json.dumps(_description(self.heart, low_edge_hz), indent=1)
        (self.folder / "study.yaml").write_text(text, "utf-8")

    def clear(self) -> None:
        """Remove all that bandcairn has computed and remembered, so that the next run starts cold."""
        for name in ("nodes", "results", ".snakemake"):
            shutil.rmtree(self.folder / name, ignore_errors=True)

    @property
    def raw_bytes(self) -> int:
        """Bytes of the raw files."""
        return sum(path.stat().st_size for path in self.folder.glob("*.edf"))

    @property
    def node_bytes(self) -> int:
        """Bytes of everything in the store."""
        return sum(path.stat().st_size for path in (self.folder / "nodes").rglob("*") if path.is_file())


def make_bench_study(folder: Path, recordings: int, minutes: float, heart: HeartSettings) -> BenchStudy:
    """Make the recordings, or take those that an earlier call has finished.

    Parameters
    ----------
    folder : Path
        Made if missing; the study gets a folder of its own inside, named by its size.
    recordings : int
        Two a person: conditions A and B.
    minutes : float
        Length of each recording.
    heart : HeartSettings
        Must fit the length.

    Returns
    -------
    BenchStudy
    """
    study = BenchStudy(folder / f"study-{recordings}x{minutes:g}min", recordings, minutes, heart)
    # The table of the truth is written last: where it is, the recordings are whole.
    if not (study.folder / "truth.csv").is_file():
        command = [sys.executable, str(YARDSTICK / "make_study.py"), str(recordings), str(study.folder)]
        subprocess.run([*command, "--minutes", str(minutes)], check=True)
    study.describe()
    return study


def _description(heart: HeartSettings, low_edge_hz: float) -> dict[str, Any]:
    """Return the study with the script's settings."""
    return {
        "study": "Side by side with a script",
        "mains_hz": 50,
        "signals": {
            "eeg": {
                "kind": "eeg",
                "channels": ["EEG Fz", "EEG Cz", "EEG Pz", "EEG Oz"],
                "resample": {"rate_hz": 128},
                "filter": _filter(low_edge_hz, 40),
                "epoch": {
                    "length_s": 4,
                    "overlap": 0.5,
                    "reject": {"peak_to_peak_uv": 150, "scope": "epoch"},
                },
                "spectrum": {"method": "welch", "window": "hann", "segment_s": 4, "overlap": 0.5},
                "features": {
                    "bands_hz": {
                        "delta": [1, 4],
                        "theta": [4, 8],
                        "alpha": [8, 13],
                        "beta": [13, 30],
                        "gamma": [30, 40],
                    }
                },
            },
            "heart": {
                "kind": "ecg",
                "channels": ["ECG"],
                "resample": {"rate_hz": 250},
                "filter": _filter(0.5, 40),
                "epoch": {"length_s": heart.epoch_s},
                "spectrum": {
                    "method": "welch",
                    "interpolation_hz": 4,
                    "segment_s": heart.segment_s,
                    "overlap": 0.5,
                },
                "features": {"bands_hz": heart.bands_hz},
            },
            "muscle": {
                "kind": "emg",
                "channels": ["EMG"],
                "resample": {"rate_hz": 1000},
                "filter": _filter(20, 450),
                "epoch": {"length_s": 1},
                "spectrum": {"method": "periodogram", "window": "hann"},
            },
        },
        "questions": _questions(),
    }


def _filter(low_hz: float, high_hz: float) -> list[dict[str, Any]]:
    """Return the script's two stages."""
    return [
        {
            "type": "bandpass",
            "cutoff_hz": [low_hz, high_hz],
            "design": "butterworth",
            "order": 4,
            "phase": "zero",
        },
        {"type": "bandstop", "cutoff_hz": [48, 52], "design": "butterworth", "order": 2, "phase": "zero"},
    ]


def _questions() -> list[dict[str, Any]]:
    """Return a paired t test of every feature and band, for each channel."""
    return [
        {
            "name": " ".join(filter(None, (signal, feature, band))),
            "signal": signal,
            "feature": feature,
            **({} if band is None else {"band": band}),
            "within": "condition",
            "contrast": ["B", "A"],
            "test": "paired_t",
            "family": "all",
        }
        for signal, feature, bands in _ASKED
        for band in bands
    ]
