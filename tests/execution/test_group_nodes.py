"""Nodes of the study: what a question asks reaches the statistics, and its answer the table."""

from __future__ import annotations

import pytest

from bandcairn.statistics import available_tests
from bandcairn.statistics.registry import designs_of
from bandcairn.study.models import TESTS_OF


@pytest.mark.parametrize("design", ["within", "between"])
def test_the_study_allows_the_tests_that_there_are(design: str) -> None:
    """The models cannot ask the statistics; what they list is what can be computed, neither less nor more."""
    assert set(TESTS_OF[design]) == {test for test in available_tests() if design in designs_of(test)}
