"""config/: the table of keys is the models' own, and the example is a sound study."""

from __future__ import annotations

import re
import shutil
from pathlib import Path
from typing import TYPE_CHECKING

import pytest
from pydantic import BaseModel

from bandcairn.study import models, quality_blocks
from bandcairn.study.blocks import Block
from bandcairn.study.description import load_study
from bandcairn.study.epoch_blocks import Epoch, Reject
from bandcairn.study.filter_blocks import FilterStage
from bandcairn.study.reference_blocks import BipolarPairs

if TYPE_CHECKING:
    from collections.abc import Iterator

    from pydantic.fields import FieldInfo

CONFIG = Path(__file__).parents[2] / "config"

SECTIONS: dict[str, type[BaseModel]] = {
    "The study": models.StudyDescription,
    "segments, from annotations": models.AnnotationSegments,
    "load": models.Load,
    "A signal of any kind": models._Signal,
    "A signal of kind eeg": models.EegSignal,
    "A signal of kind ecg": models.EcgSignal,
    "A signal of kind emg": models.EmgSignal,
    "recorder": quality_blocks.Recorder,
    "quality": quality_blocks.QualityLimits,
    "quality of eeg": quality_blocks.EegQuality,
    "quality of ecg": quality_blocks.EcgQuality,
    "quality of emg": quality_blocks.EmgQuality,
    "resample": models.Resample,
    "reference, as pairs": BipolarPairs,
    "filter, each stage": FilterStage,
    "epoch": Epoch,
    "epoch.reject": Reject,
    "spectrum of eeg and emg": models._Spectrum,
    "spectrum of ecg": models.EcgSpectrum,
    "features of eeg": models.EegFeatures,
    "features of ecg": models.EcgFeatures,
    "A question": models.Question,
}
WITHOUT_KEYS_OF_THEIR_OWN = {Block, models.EegSpectrum, models.EmgSpectrum, models.EmgFeatures}


def own_fields(model: type[BaseModel]) -> dict[str, FieldInfo]:
    """Return the keys of a block that its base does not have already."""
    inherited = getattr(model.__mro__[1], "model_fields", {})
    return {name: field for name, field in model.model_fields.items() if name not in inherited}


def shown(value: object) -> str:
    """Return a default as the table of keys writes it."""
    if value is None:
        return "absent"
    if isinstance(value, BaseModel):
        return "the block's defaults"
    if isinstance(value, dict):
        return ", ".join(f"{name} [{low:g}, {high:g}]" for name, (low, high) in value.items())
    if isinstance(value, tuple):
        numbers = [f"{item:g}" for item in value if isinstance(item, float)]
        if numbers:
            return f"[{', '.join(numbers)}]"
        return "none" if not value else ", ".join(map(str, value))
    return f"{value:g}" if isinstance(value, float) else str(value)


def row(name: str, field: FieldInfo) -> str:
    """Return the line of the table that a key must have."""
    told = field.json_schema_extra
    assert isinstance(told, dict), f"{name} has no unit and range"
    default = "required" if field.is_required() else shown(field.default)
    return f"| `{name}` | {field.description} | {told['unit']} | {told['allowed']} | {default} |"


def section(title: str) -> str:
    """Return one section of the table of keys."""
    text = (CONFIG / "README.md").read_text(encoding="utf-8")
    return text.split(f"\n## {title}\n", maxsplit=1)[1].split("\n## ", maxsplit=1)[0]


@pytest.mark.parametrize("title", SECTIONS)
def test_every_key_of_a_block_stands_in_its_table_with_meaning_unit_range_and_default(title: str) -> None:
    """The table of keys says what the models say, key by key and in their order, and nothing else."""
    expected = [row(name, field) for name, field in own_fields(SECTIONS[title]).items()]

    found = [line for line in section(title).splitlines() if line.startswith("| `")]

    assert found == expected


def test_every_model_has_a_section() -> None:
    """A block that is added to the models must be added to the table of keys."""
    blocks = set(_subclasses(Block)) | {Block}

    assert blocks - WITHOUT_KEYS_OF_THEIR_OWN == set(SECTIONS.values())


def _subclasses(block: type[BaseModel]) -> Iterator[type[BaseModel]]:
    for below in block.__subclasses__():
        yield below
        yield from _subclasses(below)


def test_the_table_has_no_section_that_no_model_stands_behind() -> None:
    """A section whose block is gone must go too."""
    titles = re.findall(r"^## (.+)$", (CONFIG / "README.md").read_text(encoding="utf-8"), flags=re.MULTILINE)

    assert titles == list(SECTIONS)


def test_the_example_is_a_sound_study_once_its_files_exist(tmp_path: Path) -> None:
    """The example study passes every check that needs no signal file."""
    shutil.copy(CONFIG / "study.example.yaml", tmp_path / "study.yaml")
    table = shutil.copy(CONFIG / "recordings.example.csv", tmp_path / "recordings.csv")
    (tmp_path / "raw").mkdir()
    for line in Path(table).read_text(encoding="utf-8").splitlines()[1:]:
        (tmp_path / line.split(",")[2]).touch()

    study = load_study(tmp_path)

    assert list(study.description.signals) == ["eeg", "heart", "biceps"]
    assert len(study.recordings) == 8
    assert study.recordings[0].design == {"condition": "day", "group": "crew"}
