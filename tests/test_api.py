"""The Python side: a study is opened, planned and run, and its results are data frames."""

from __future__ import annotations

import shutil
from pathlib import Path
from typing import TYPE_CHECKING

import pandas as pd
import pytest

import bandcairn
from bandcairn.api import Study
from bandcairn.errors import StudyError

if TYPE_CHECKING:
    from collections.abc import Callable


@pytest.fixture
def study(finished_study: Path, tmp_path: Path) -> Path:
    """Return a finished study of one's own."""
    return Path(shutil.copytree(finished_study, tmp_path / "own"))


def test_study_is_the_name_of_the_package() -> None:
    """`from bandcairn import Study` is the promise of the contract."""
    assert bandcairn.Study is Study


def test_results_of_a_finished_study_are_data_frames(study: Path) -> None:
    """Each table of the results comes as a pandas frame; the folder may be given as text."""
    opened = Study(str(study))
    features = opened.features()
    assert isinstance(features, pd.DataFrame)
    assert set(features["signal"]) == {"eeg", "heart", "arm"}
    assert len(opened.statistics()) == 4
    assert {"clipped_share", "flat_share"} <= set(opened.quality()["measure"])
    assert list(opened.exclusions().columns)[:2] == ["recording", "signal"]
    assert len(opened.ledger()) == len(opened.open().plan.nodes)


def test_run_of_a_finished_study_reports_nothing_computed(study: Path) -> None:
    """A run tells how many nodes it computed, whether it wrote results, and the failures."""
    report = Study(study).run(cores=1)
    assert (report.computed, report.rewritten, report.outcome.failures) == (0, False, ())


@pytest.mark.parametrize(
    "name", ["features", "statistics", "descriptives", "quality", "epochs", "exclusions", "ledger"]
)
def test_results_older_than_the_study_are_refused(
    study: Path, edit_study: Callable[..., None], name: str
) -> None:
    """Nobody works with a stale table unawares: after an edit every table is refused until the study has run."""
    edit_study(study, "cutoff_hz: 20, design", "cutoff_hz: 25, design")
    with pytest.raises(StudyError, match=r"missing or older than the study.*study.run\(\)"):
        getattr(Study(study), name)()


def test_results_altered_by_hand_are_refused(study: Path) -> None:
    """A table that is not as it was written is not handed out."""
    with (study / "results" / "features.csv").open("a", encoding="utf-8") as file:
        file.write("by hand\n")
    with pytest.raises(StudyError, match="missing or older"):
        Study(study).features()


def test_plan_gives_each_node_with_its_reasons(study: Path, edit_study: Callable[..., None]) -> None:
    """`plan` names what would run, parents first, and why."""
    assert Study(study).plan() == []
    edit_study(study, "cutoff_hz: 20, design", "cutoff_hz: 25, design")
    reasons = Study(study).plan()
    assert reasons[0].why == ("stages[0].cutoff_hz changed from 20 to 25",)
    place = {reason.node.key: index for index, reason in enumerate(reasons)}
    for index, reason in enumerate(reasons):
        assert all(place.get(key, -1) < index for _, key in reason.node.parents)


def test_unsound_study_is_refused_with_its_problems(study: Path, edit_study: Callable[..., None]) -> None:
    """Opening a study raises the same problems that the command line tells."""
    edit_study(study, "mains_hz: 50", "mains_hz: 55")
    with pytest.raises(StudyError, match="50 or 60") as refused:
        Study(study).run()
    assert refused.value.problems[0].field == "mains_hz"


def test_study_shows_its_folder() -> None:
    """A study in a notebook says which it is."""
    assert repr(Study("demo-study")) == "Study('demo-study')"
