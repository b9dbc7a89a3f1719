"""results/descriptives: a row for every cell of every answer, whoever is in it."""

from __future__ import annotations

import shutil
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pandas as pd
import pytest

from bandcairn.execution.descriptives import DESCRIPTIVES_SCHEMA, descriptives_rows
from bandcairn.execution.project import open_project
from bandcairn.execution.publish import publish, published
from bandcairn.execution.worker import Worker
from bandcairn.nodes.key import canonical_json
from bandcairn.nodes.node import make_node

if TYPE_CHECKING:
    from collections.abc import Callable

_TABLE = "0" * 64
_QUESTION = {
    "name": "alpha",
    "signal": "eeg",
    "feature": "band_power",
    "band": "alpha",
    "channels": "each",
    "channel_names": ["Fz", "Cz"],
    "scale": "log10",
    "confidence": 0.95,
    "within": "condition",
    "contrast": ["night", "day"],
    "test": "paired_t",
}


def _row(person: str, level: str, channel: str, value: float | None) -> dict[str, Any]:
    place = {"recording": person + level, "participant": person, "channel": channel, "segment": None}
    told = {"feature": "band_power", "band": "alpha", "value": value, "unit": "uV^2", "epochs_used": 9}
    return {**place, **told, "design/condition": level}


def test_every_channel_has_its_cells_and_an_empty_one_has_nobody_in_it() -> None:
    """Fz has two pairs, Cz no value by day: its cells are there all the same, and name the table they come from."""
    node = make_node(
        "statistics",
        parameters=canonical_json({"family": "alpha", "adjustment": "holm", "questions": [_QUESTION]}),
        parents=(("table/eeg", _TABLE),),
    )
    rows = [
        _row(person, level, channel, None if (channel, level) == ("Cz", "day") else value)
        for channel in ("Fz", "Cz")
        for person in ("p1", "p2")
        for level, value in (("night", 100.0), ("day", 10.0))
    ]

    found = list(descriptives_rows([node], {_TABLE: rows}))

    assert all(set(row) == set(DESCRIPTIVES_SCHEMA) for row in found)
    assert [(row["channel"], row["level"], row["scale"], row["n"], row["n_available"]) for row in found] == [
        (channel, level, scale, n, available)
        for channel, n, by_day in (("Fz", 2, 2), ("Cz", 0, 0))
        for scale in ("identity", "log10")
        for level, available in (("night", 2), ("day", by_day), ("night - day", n))
    ]
    assert {row["node"] for row in found} == {_TABLE}
    assert [row["mean"] for row in found][:6] == [100.0, 10.0, 90.0, 2.0, 1.0, 1.0]


def _published(folder: Path) -> int:
    """Bring a study up to date in this process; return how many nodes were missing."""
    project = open_project(folder)
    worker = Worker(project)
    missing = project.missing()
    done = worker.work(missing)
    assert done.failures == []
    publish(project, worker.plan_study_nodes(), worker.store, {r["key"]: r for r in done.records}, [])
    assert published(project)
    return len(missing)


def _table(folder: Path, name: str) -> pd.DataFrame:
    return pd.read_parquet(folder / "results" / f"{name}.parquet")


@pytest.fixture
def study(finished_study: Path, tmp_path: Path) -> Path:
    """Return a finished study of one's own."""
    return Path(shutil.copytree(finished_study, tmp_path / "own"))


def test_the_descriptives_of_a_study_agree_with_its_answers(study: Path) -> None:
    """The mean of the differences is the estimate of the paired t test, in the order of the questions."""
    answers, cells = _table(study, "statistics"), _table(study, "descriptives")

    assert cells["question"].unique().tolist() == answers["question"].unique().tolist()
    for answer in answers.itertuples():
        mine = cells[(cells["question"] == answer.question) & (cells["channel"] == answer.channel)]
        last = mine[mine["level"] == answer.term].iloc[-1]
        assert (last["mean"], last["unit"]) == (answer.estimate, answer.estimate_unit)
        assert last["n"] == answer.n_participants


def test_a_role_is_told_beside_the_answer_and_computes_nothing(
    study: Path, edit_study: Callable[[Path, str, str], None]
) -> None:
    """The numbers stay; the results are written anew, for they tell more."""
    before = _table(study, "statistics")
    edit_study(study, "feature: median_frequency\n", "feature: median_frequency\n    role: primary\n")
    assert not published(open_project(study))

    assert _published(study) == 0

    after = _table(study, "statistics")
    assert after["role"].fillna("").tolist() == [
        "primary" if name == "fatigue by shift" else "" for name in after["question"]
    ]
    assert "role" not in before.columns, "a study that tells no role has the columns of the contract alone"
    pd.testing.assert_frame_equal(before, after.drop(columns="role"))


def test_results_of_an_earlier_version_are_not_those_of_the_study(study: Path) -> None:
    """A run that has written no descriptives is not up to date, although its nodes are."""
    run = study / "results" / "run.json"
    run.write_text(run.read_text("utf-8").replace("descriptives", "other"), "utf-8")
    for suffix in ("csv", "parquet"):
        (study / "results" / f"descriptives.{suffix}").rename(study / "results" / f"other.{suffix}")

    assert not published(open_project(study))
    assert _published(study) == 0
    assert not _table(study, "descriptives").empty


def test_new_tests_and_equivalence_run_through_a_whole_study(
    study: Path, edit_study: Callable[[Path, str, str], None]
) -> None:
    """Keys of study.yaml reach the results."""
    bounds = "feature: median_frequency\n    equivalence: [-50, 50]\n    adjustment: none\n"
    edit_study(study, "feature: median_frequency\n", bounds)
    text = (study / "study.yaml").read_text("utf-8")
    (study / "study.yaml").write_text(
        text.replace("test: paired_t\n    family: watch", "test: wilcoxon\n    family: watch", 1), "utf-8"
    )

    assert _published(study) == 2

    answers = _table(study, "statistics")
    assert answers["test"].tolist()[-2:] == ["paired_t", "tost"]
    assert answers["adjustment"].tolist()[-2:] == ["none", "none"]
    ranked = answers[answers["question"] == "alpha by shift"]
    assert set(ranked["test"]) == {"wilcoxon"}
    assert set(ranked["p"]) <= {0.5, 1.0}
