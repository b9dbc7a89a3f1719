"""Nodes of the study: what a question asks reaches the statistics, and its answer the table."""

from __future__ import annotations

from typing import get_args

import pytest

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
