"""A comparison refuses what cannot be asked."""

from __future__ import annotations

import dataclasses
from typing import Any

import pytest

from bandcairn.errors import StepError
from bandcairn.statistics import Comparison, available_tests

_SOUND: dict[str, Any] = {
    "design": "within",
    "factor": "condition",
    "first": "night",
    "second": "day",
    "test": "paired_t",
}


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"test": "paired"}, "test: found 'paired'; allowed: paired_t, welch_t"),
        ({"design": "between"}, "design of the test paired_t: found 'between'; allowed: within"),
        ({"test": "welch_t"}, "design of the test welch_t: found 'within'; allowed: between"),
        ({"scale": "log2"}, "scale: found 'log2'; allowed: identity, log10, ln, logit"),
        ({"second": "night"}, "contrast: found 'night' twice"),
        ({"confidence": 0.5}, r"confidence: found 0\.5; allowed: above 0\.5 and below 1"),
        ({"seed": -1}, "seed: found -1; allowed: a whole number, 0 or above"),
        ({"confidence": 95}, "confidence: found 95"),
        ({"confidence": float("nan")}, "confidence: found nan"),
    ],
)
def test_an_unsound_comparison_is_refused_with_what_is_allowed(change: dict[str, Any], message: str) -> None:
    """Every refusal says what was found and what may stand there."""
    with pytest.raises(StepError, match=message):
        Comparison(**(_SOUND | change))


def test_a_comparison_is_frozen_and_names_its_term() -> None:
    """The estimate's direction is readable, and nobody can turn it later."""
    comparison = Comparison(**_SOUND)

    assert comparison.term == "night - day"
    assert (comparison.scale, comparison.confidence, comparison.unit) == ("identity", 0.95, "")
    with pytest.raises(dataclasses.FrozenInstanceError):
        comparison.first = "day"  # type: ignore[misc]


def test_available_tests_are_those_that_can_be_declared() -> None:
    """The list is complete and in a fixed order."""
    assert available_tests() == ("paired_t", "welch_t", "wilcoxon", "mann_whitney", "permutation")
