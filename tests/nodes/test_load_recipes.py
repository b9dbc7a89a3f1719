"""The recipe of a load: what a file is not plain in stands there, and a plain file's key does not move."""

from __future__ import annotations

import json
import time
from dataclasses import replace
from fractions import Fraction
from typing import TYPE_CHECKING, Any

import pytest

from bandcairn.nodes.plan import build_plan
from bandcairn.recordings import RawIndex
from bandcairn.recordings.export import ExportChannel, write_edf
from bandcairn.signal import FileDetails, Gap, Repair

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    import numpy as np
    from numpy.typing import NDArray

    from bandcairn.nodes.survey import RawContent
    from bandcairn.study.description import LoadedStudy
    from bandcairn.study.tables import RecordingRow

    Content = Callable[..., RawContent]
    Load = Callable[..., LoadedStudy]


@pytest.fixture
def recipe(
    load: Load, study_text: str, rows: tuple[RecordingRow, ...], content: Content
) -> Callable[..., dict[str, Any]]:
    """Return the parameters of a load: `recipe(above="", labels={}, unit="uV", **facts)`."""

    def planned(
        above: str = "",
        labels: dict[str, str] | None = None,
        unit: str | None = "uV",
        **facts: Any,  # noqa: ANN401
    ) -> dict[str, Any]:
        study = load(study_text.replace("signals:\n", above + "signals:\n", 1), rows[:1])
        found = content(rows[0].recording, unit=unit)
        renamed = {channel.label: channel for channel in found.facts.channels}
        for name, label in (labels or {}).items():
            renamed[name] = replace(renamed[name], label=label)
        found = replace(
            found,
            facts=replace(found.facts, channels=tuple(renamed.values()), **facts),
            labels=labels or {},
            digests={label: found.digests[name] for name, label in {n: n for n in renamed}.items()}
            | {label: found.digests[name] for name, label in (labels or {}).items()},
        )
        plan = build_plan(study, {rows[0].recording: found})
        parameters: dict[str, Any] = json.loads(
            plan.nodes[plan.slots[rows[0].recording, "eeg", "load"]].parameters
        )
        return parameters

    return planned


EDF = FileDetails("EDF")


def test_a_plain_file_has_a_plain_recipe_whatever_is_declared(recipe: Callable[..., dict[str, Any]]) -> None:
    """Limits, reasons, aliases and times of day that do not concern it leave its key alone."""
    above = (
        "load: {unit: mV, unit_reason: none written, missing: gap, max_missing_share: 0.2}\n"
        "aliases: {Cz: [EEG Cz]}\n"
    )
    details = replace(EDF, start="24.12.25 20.00.00", encoding="Latin-1", start_offset_s=Fraction(1, 4))
    gaps = (Gap(Fraction(5), Fraction(9)),)
    assert recipe(above, details=details, gaps=gaps) == recipe() == {"channels": ["Fz", "Cz"]}


def test_p6_a_repair_stands_in_the_recipe_with_the_share_that_allowed_it(
    recipe: Callable[..., dict[str, Any]],
) -> None:
    """So a mended file is never taken for a sound one."""
    assert recipe(details=EDF, repair=Repair(100, 99, 12)) == {
        "channels": ["Fz", "Cz"],
        "max_missing_share": 0.01,
        "repair": {"n_records_header": 100, "n_records_found": 99, "bytes_dropped": 12},
    }


def test_p1_a_declared_unit_stands_in_the_recipe_with_its_reason(
    recipe: Callable[..., dict[str, Any]],
) -> None:
    """Of an EDF file with a blank unit; a table needs no reason."""
    above = "load: {unit: mV, unit_reason: none written}\n"
    assert recipe(above, unit=None, details=EDF) == {
        "channels": ["Fz", "Cz"],
        "unit": "mV",
        "unit_reason": "none written",
    }
    assert recipe(above, unit=None, details=FileDetails("delimited")) == {
        "channels": ["Fz", "Cz"],
        "unit": "mV",
    }


def test_p14_the_original_label_stands_in_the_recipe(recipe: Callable[..., dict[str, Any]]) -> None:
    """Beside the name that the study gives it."""
    aliases = "aliases: {Cz: [EEG Cz]}\n"
    assert recipe(aliases, labels={"Cz": "EEG Cz"}, details=EDF) == {
        "channels": ["Fz", "Cz"],
        "labels": ["Fz", "EEG Cz"],
    }


def test_p24_missing_samples_as_gaps_stand_in_the_recipe_of_a_table(
    recipe: Callable[..., dict[str, Any]],
) -> None:
    """Whether samples were left out is part of what they are."""
    above = "load: {unit: uV, missing: gap}\n"
    found = recipe(above, unit=None, details=FileDetails("Parquet"))
    assert found == {"channels": ["Fz", "Cz"], "unit": "uV", "missing": "gap"}


def test_a_thousand_known_files_are_looked_up_in_a_moment(tmp_path: Path) -> None:
    """Facts and digests of files in a known state: 60 ms on an idle core; six times that is allowed here."""
    rows: NDArray[np.float64] = pytest.importorskip("numpy").arange(256.0)
    paths = [tmp_path / f"r{index}.edf" for index in range(1000)]
    write_edf(paths[0], [ExportChannel(f"E{i}", "uV", 256, rows, (-500, 500)) for i in range(4)])
    whole = paths[0].read_bytes()
    for index, path in enumerate(paths):
        hour = f"{index // 60:02d}.{index % 60:02d}.00"
        path.write_bytes(whole[:176] + hour.encode() + whole[184:])
    time.sleep(0.15)
    memory = RawIndex.load(tmp_path / "index.json")
    for path in paths:
        memory.facts(path, tmp_path)
        memory.content(path, tmp_path)
    started = time.process_time()
    assert all(memory.recall(path, tmp_path) for path in paths)
    assert time.process_time() - started < 0.36
