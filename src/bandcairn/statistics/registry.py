"""From the name of a test to its function.

A new family of tests is one file of functions with the signature `Test` and one line here a test. A test that
serves both designs (a permutation test, say) has one function for each.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, TypeAlias

from bandcairn.errors import StepError
from bandcairn.statistics.rank_tests import mann_whitney, wilcoxon
from bandcairn.statistics.t_tests import paired_t, welch_t

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from bandcairn.statistics.result import Outcome

    # first, second, confidence; in the within design both sequences are in the same order of people.
    Test: TypeAlias = Callable[[Sequence[float], Sequence[float], float], Outcome]

_TESTS: dict[str, dict[str, Test]] = {
    "paired_t": {"within": paired_t},
    "welch_t": {"between": welch_t},
    "wilcoxon": {"within": wilcoxon},
    "mann_whitney": {"between": mann_whitney},
}


def available_tests() -> tuple[str, ...]:
    """Return the names of the tests that can be declared."""
    return tuple(_TESTS)


def designs_of(test: str) -> tuple[str, ...]:
    """Return the designs that a test serves.

    Raises
    ------
    StepError
        If there is no such test.
    """
    if test not in _TESTS:
        raise StepError(f"test: found {test!r}; allowed: {', '.join(_TESTS)}")
    return tuple(_TESTS[test])


def function_of(test: str, design: str) -> Test:
    """Return the function of a test for a design that `designs_of` lists."""
    return _TESTS[test][design]
