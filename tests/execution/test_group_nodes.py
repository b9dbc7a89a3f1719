"""Nodes of the study: what a question asks reaches the statistics, and its answer the table."""

from __future__ import annotations

from typing import Any, get_args

import numpy as np
import pytest

from bandcairn.execution.group_nodes import frame_rows, rows_to_frame, statistics_node
from bandcairn.statistics import available_adjustments, available_tests
from bandcairn.statistics.registry import designs_of
from bandcairn.study.models import TESTS_OF, Question


@pytest.mark.parametrize("design", ["within", "between"])
def test_the_study_allows_the_tests_that_there_are(design: str) -> None:
    """The models cannot ask the statistics; what they list is what can be computed, neither less nor more."""
    assert set(TESTS_OF[design]) == {test for test in available_tests() if design in designs_of(test)}


def test_the_study_allows_the_adjustments_that_there_are() -> None:
    """Likewise for what is done to the p values of a family."""
    annotation = Question.model_fields["adjustment"].annotation
    literal = next(part for part in get_args(annotation) if get_args(part))

    assert get_args(literal) == available_adjustments()


_QUESTION: dict[str, Any] = {
    "name": "alpha",
    "signal": "eeg",
    "feature": "total_power",
    "channels": "each",
    "channel_names": ["Fz", "Cz"],
    "scale": "identity",
    "confidence": 0.95,
    "within": "condition",
    "contrast": ["night", "day"],
    "test": "paired_t",
}


def _answered(n_people: int = 12, **changes: Any) -> list[dict[str, Any]]:  # noqa: ANN401 - keys of a question
    """Return the answers about two channels of some people."""
    rng = np.random.default_rng(1)
    rows = [
        {"recording": f"p{person}-{level}", "participant": f"p{person}", "channel": channel, "segment": None}
        | {"feature": "total_power", "band": None, "value": float(rng.normal(10, 1)), "unit": "uV^2"}
        | {"epochs_used": 9, "design/condition": level}
        for person in range(n_people)
        for level in ("night", "day")
        for channel in ("Fz", "Cz")
    ]
    kinds = {"value": "number", "epochs_used": "count"}
    table = rows_to_frame(rows, {name: kinds.get(name, "text") for name in rows[0]})
    parameters = {"family": "alpha", "adjustment": "bonferroni", "questions": [_QUESTION | changes]}
    return frame_rows(statistics_node(parameters, {"table/eeg": table}))


def test_equivalence_has_rows_of_its_own_and_leaves_the_other_answers_as_they_are() -> None:
    """A difference that is there and one that is negligible are two families."""
    plain, both = _answered(), _answered(equivalence=[-2, 2])

    assert [(row["channel"], row["test"]) for row in both] == [
        ("Fz", "paired_t"), ("Fz", "tost"), ("Cz", "paired_t"), ("Cz", "tost"),
    ]  # fmt: skip
    assert both[::2] == plain
    for row in both:
        assert (row["family_size"], row["adjustment"]) == (2, "bonferroni")
        assert row["p_adjusted"] == min(1, 2 * row["p"])


def test_the_seed_of_a_question_reaches_its_test() -> None:
    """Sixteen pairs have more sign patterns than are made: another seed draws others, and the note names it."""
    one, other = (_answered(16, test="permutation", seed=seed)[0] for seed in (1, 2))

    assert one["p"] != other["p"]
    assert one["note"] == "p of the mean difference from the observed and 32767 random sign flips, seed 1"
