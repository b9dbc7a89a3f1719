"""Five minutes of a real ECG through the main job, as delimited text and as EDF, against beats marked by eye."""

from __future__ import annotations

import csv
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest
import yaml

from bandcairn.api import Study
from bandcairn.cli.app import exit_code_of
from bandcairn.recordings.export import ExportChannel, write_delimited, write_edf
from bandcairn.steps.beats import valid_intervals

if TYPE_CHECKING:
    from numpy.typing import NDArray

CHECKS = Path(__file__).parent.parent / "reference_checks"
RATE_HZ = 360
STUDY = """\
study: Record 208
mains_hz: 60
load: {rate_hz: 360, unit: mV}
signals:
  heart:
    kind: ecg
    channels: [MLII]
    filter:
      - {type: bandpass, cutoff_hz: [0.5, 40], design: butterworth, order: 2}
    epoch: {length_s: 300}
    spectrum: {method: welch, segment_s: 120}
"""


def _millivolt() -> NDArray[np.float64]:
    """Return the samples; reference_checks/data/SOURCES.md names their origin and scaling."""
    with np.load(CHECKS / "data" / "ecg.dat") as file:
        raw: NDArray[np.uint16] = file["ecg"]
    return (raw.astype(np.float64) - 1024) / 200


def _marked_beats() -> NDArray[np.float64]:
    """Return the times of the beats marked by eye, in seconds."""
    with (CHECKS / "data" / "ecg208_beats.csv").open(encoding="utf-8", newline="") as file:
        return np.array([float(row["time_s"]) for row in csv.DictReader(file)])


def _reference(name: str) -> Any:  # noqa: ANN401 - an entry of the published values
    entries = yaml.safe_load((CHECKS / "values" / "ecg.yaml").read_text("utf-8"))
    (entry,) = (entry for entry in entries if entry["id"] == name)
    return entry


@pytest.fixture(scope="module")
def values(tmp_path_factory: pytest.TempPathFactory) -> dict[str, dict[str, float]]:
    """Return the features of both files, by file format and feature, computed by the main job."""
    found = {}
    for suffix in ("csv", "edf"):
        folder = tmp_path_factory.mktemp(suffix)
        if suffix == "csv":
            write_delimited(folder / "record.csv", ("MLII",), (_millivolt(),), decimals=3)
        else:
            # 65 535 digital steps of 5 uV: the 200 steps a millivolt of the original, exactly.
            channel = ExportChannel("MLII", "mV", RATE_HZ, _millivolt(), (-163.84, 163.835))
            write_edf(folder / "record.edf", [channel])
        (folder / "study.yaml").write_text(STUDY, "utf-8")
        (folder / "recordings.csv").write_text(
            f"recording,participant,file\nr208,p208,record.{suffix}\n", "utf-8"
        )
        assert exit_code_of(["run", str(folder)]) == 0
        rows = Study(folder).features()
        found[suffix] = {
            " ".join(filter(None, (row["feature"], row["band"] or ""))): float(row["value"])
            for row in rows.astype(object).where(rows.notna(), None).to_dict("records")
        }
    return found


@pytest.mark.parametrize("suffix", ["csv", "edf"])
def test_beats_of_the_real_ecg_are_found(values: dict[str, dict[str, float]], suffix: str) -> None:
    """The main job counts the beats of record 208 within the tolerance of the reference marking."""
    reference = _reference("ECG208-BEATS")
    assert abs(values[suffix]["beats"] - reference["expected"]["n_beats"]) <= reference["tolerance"]["abs"]


@pytest.mark.parametrize("suffix", ["csv", "edf"])
def test_heart_rate_of_the_real_ecg_is_that_of_the_marked_beats(
    values: dict[str, dict[str, float]], suffix: str
) -> None:
    """Heart rate over valid intervals agrees with that of the marked beats, and with the rate of the whole excerpt.

    The rule of validity is applied to the marked beats too, so that detection alone makes the difference: at most
    1/min, the tolerance of the reference in its clean stretches. The rate of the whole excerpt counts stretches in
    which artefact hides the beats as time without beats, so ours must be higher, by no more than its tolerance of 5.
    """
    marked = valid_intervals(_marked_beats())
    marked_rate = 60_000 / float(np.mean(marked.interval_ms[marked.valid]))
    clean = _reference("ECG208-BEATS-120-200")["tolerance"]["abs_by_key"]["mean_rate_bpm"]
    assert abs(values[suffix]["heart_rate"] - marked_rate) <= clean
    whole = _reference("ECG208-BEATS")
    excess = values[suffix]["heart_rate"] - whole["expected"]["mean_rate_bpm"]
    assert 0 < excess <= whole["tolerance"]["abs"]


def test_text_and_edf_of_the_real_ecg_agree(values: dict[str, dict[str, float]]) -> None:
    """Both files hold the same 108 000 samples; only the last bits of their scaling to uV may differ."""
    assert values["csv"].keys() == values["edf"].keys()
    for feature, value in values["csv"].items():
        assert values["edf"][feature] == pytest.approx(value, rel=1e-9, nan_ok=True)


def test_band_that_the_excerpt_is_long_enough_for_is_given(values: dict[str, dict[str, float]]) -> None:
    """Five minutes carry every band of the Task Force: none of the values is null."""
    assert all(np.isfinite(value) for value in values["edf"].values())
