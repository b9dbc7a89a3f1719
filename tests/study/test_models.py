"""The models: frozen, complete when written out, and read back as they were."""

from __future__ import annotations

import subprocess
import sys
from typing import TYPE_CHECKING

import pytest
from pydantic import ValidationError

from bandcairn.study.catalogue import FEATURES, find_feature
from bandcairn.study.description import load_study
from bandcairn.study.epoch_blocks import Epoch
from bandcairn.study.filter_blocks import FilterStage
from bandcairn.study.models import EegSpectrum, Load, StudyDescription

if TYPE_CHECKING:
    from pathlib import Path


def test_a_description_written_out_reads_back_the_same(study_folder: Path) -> None:
    """What provenance records is a complete description of the study."""
    description = load_study(study_folder).description

    assert StudyDescription.model_validate_json(description.model_dump_json()) == description


def test_a_default_written_out_makes_no_difference() -> None:
    """A block with its defaults declared is the block without them."""
    short = EegSpectrum.model_validate({"method": "welch", "segment_s": 2})
    full = EegSpectrum.model_validate(
        {"method": "welch", "segment_s": 2.0, "window": "hann", "overlap": 0.5, "detrend": "constant"}
    )

    assert short == full
    assert short.model_dump(mode="json") == full.model_dump(mode="json")


def test_a_periodogram_is_written_out_without_overlap() -> None:
    """Its one segment overlaps with nothing, and what is written out says so."""
    written = EegSpectrum(method="periodogram").model_dump(mode="json")

    assert written["overlap"] == 0.0
    assert written["segment_s"] is None


def test_a_block_cannot_be_altered() -> None:
    """What was validated stays as it was."""
    with pytest.raises(ValidationError, match="frozen"):
        Epoch(length_s=4).length_s = 5  # type: ignore[misc]


@pytest.mark.parametrize("cutoff", [float("nan"), float("inf"), 0.0, -1.0, True, "4"])
def test_a_cutoff_that_is_no_positive_number_is_refused(cutoff: object) -> None:
    """Not a number, infinity, truth and text are no frequencies."""
    stage = {"type": "lowpass", "cutoff_hz": cutoff, "design": "butterworth", "order": 2}

    with pytest.raises(ValidationError, match="cutoff_hz"):
        FilterStage.model_validate(stage)


def test_the_load_of_a_signal_wins_over_that_of_the_study(study_folder: Path) -> None:
    """A signal without a load block has the study's."""
    text = (study_folder / "study.yaml").read_text(encoding="utf-8")
    text = text.replace("mains_hz: 50", "mains_hz: 50\nload: {rate_hz: 500, unit: uV}")
    text = text.replace("kind: emg", "kind: emg\n    load: {rate_hz: 1000, unit: mV}")
    (study_folder / "study.yaml").write_text(text, encoding="utf-8")
    description = load_study(study_folder).description

    assert description.load_of(description.signals["heart"]) == Load(rate_hz=500, unit="uV")
    assert description.load_of(description.signals["biceps"]) == Load(rate_hz=1000, unit="mV")


@pytest.mark.parametrize("kind", FEATURES)
def test_each_feature_is_found_by_its_name(kind: str) -> None:
    """The catalogue has each name once a kind."""
    for feature in FEATURES[kind]:
        assert find_feature(kind, feature.name) is feature
    assert find_feature(kind, "mood") is None


def test_reading_a_study_loads_no_numerics() -> None:
    """Planning stays light: no array library is imported to understand a study."""
    heavy = "numpy pandas scipy pyarrow mne"
    code = (
        "import sys, bandcairn.study.description, bandcairn.study.facts_check\n"
        f"sys.exit(', '.join(name for name in '{heavy}'.split() if name in sys.modules) or None)"
    )
    run = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)

    assert run.returncode == 0, run.stderr
