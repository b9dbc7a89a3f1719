"""From the name of a test to its function.

A new family of tests is one file of functions with the signature `Test` and one line here a test. A test that
serves both designs (a permutation test, say) has one function for each.
"""

from __future__ import annotations

from functools import partial
from typing import TYPE_CHECKING, Protocol, TypeAlias

from bandcairn.errors import StepError
from bandcairn.statistics.permutation import label_exchange, sign_flips
from bandcairn.statistics.rank_tests import mann_whitney, wilcoxon
from bandcairn.statistics.t_tests import paired_t, welch_t

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from bandcairn.statistics.result import Outcome

    # first, second, confidence; in the within design both sequences are in the same order of people.
    Test: TypeAlias = Callable[[Sequence[float], Sequence[float], float], Outcome]

    class SeededTest(Protocol):
        """A test that draws random numbers."""

        def __call__(
            self, first: Sequence[float], second: Sequence[float], confidence: float, /, *, seed: int = 0
        ) -> Outcome:
            """Return the outcome, the same for the same seed."""
            ...


_TESTS: dict[str, dict[str, Test]] = {
    "paired_t": {"within": paired_t},
    "welch_t": {"between": welch_t},
    "wilcoxon": {"within": wilcoxon},
    "mann_whitney": {"between": mann_whitney},
    "permutation": {"within": sign_flips, "between": label_exchange},
}
# Tests that draw random numbers, and take a seed.
_SEEDED: dict[str, dict[str, SeededTest]] = {
    "permutation": {"within": sign_flips, "between": label_exchange},
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


def function_of(test: str, design: str, seed: int = 0) -> Test:
    """Return the function of a test for a design that `designs_of` lists; a test without chance ignores the seed."""
    if test in _SEEDED:
        return partial(_SEEDED[test][design], seed=seed)
    return _TESTS[test][design]
