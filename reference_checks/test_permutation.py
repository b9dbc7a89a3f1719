"""Permutation tests against a published count, an independent library and simulation."""

from __future__ import annotations

import csv
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest
from numpy.testing import assert_allclose
from scipy import stats

from bandcairn.statistics.permutation import label_exchange, sign_flips
from reference import published

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from bandcairn.statistics.result import Outcome

_HERE = Path(__file__).parent
# Normal, and heavy-tailed (Student's t of 3 degrees of freedom).
_NOISE: dict[str, Callable[[np.random.Generator, int], NDArray[np.float64]]] = {
    "normal": lambda rng, n: rng.normal(0, 1, n),
    "heavy-tailed": lambda rng, n: rng.standard_t(3, n),
}


def test_darwin_maize_over_all_sign_flips() -> None:
    """Published example (Fisher 1935, section 21): a count, exact; p to the printed digits."""
    entry = published("statistics", "ST-ZEA-PERM")
    with (_HERE / entry.inputs["file"]).open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))

    found = sign_flips(
        [float(row["cross_in"]) for row in rows], [float(row["self_in"]) for row in rows], 0.95
    )

    assert found.p is not None
    assert found.estimate == pytest.approx(entry.expected["sum_eighths"] / 8 / len(rows), rel=1e-15)
    assert found.p * 2**15 == entry.expected["count_two_sided"]
    entry.assert_close(found.p, "p_two")


def _mean_difference(one: Any, other: Any, axis: int) -> Any:  # noqa: ANN401 - arrays of any shape
    return np.mean(one, axis=axis) - np.mean(other, axis=axis)


@pytest.mark.parametrize("sizes", [(3, 3), (6, 6), (4, 9)])
def test_exchanges_agree_with_an_independent_library(sizes: tuple[int, int]) -> None:
    """Independent library (scipy.stats.permutation_test over all exchanges): counts, a few roundings."""
    rng = np.random.default_rng(sum(sizes))
    first, second = rng.normal(0.5, 1, sizes[0]), rng.normal(0, 1, sizes[1])

    found = label_exchange(first.tolist(), second.tolist(), 0.95)

    expected = stats.permutation_test((first, second), _mean_difference, n_resamples=10_000)
    assert_allclose(float(found.p or 0), expected.pvalue, rtol=1e-12)


def test_random_arrangements_come_close_to_the_t_tests_of_many_normal_people() -> None:
    """Limiting case: for many normal values both p values approach those of the t tests (Fisher 1935, section 21).

    32768 arrangements have a standard error of 0.003 at the largest p, and the difference to t at 100 people is
    smaller still; 0.015 holds both.
    """
    first, second = np.random.default_rng(4).normal([[0.1], [0.0]], 1, (2, 100))

    paired, grouped = (
        test(first.tolist(), second.tolist(), 0.95, seed=1).p for test in (sign_flips, label_exchange)
    )

    assert_allclose(float(paired or 0), stats.ttest_rel(first, second).pvalue, atol=0.015)
    assert_allclose(float(grouped or 0), stats.ttest_ind(first, second).pvalue, atol=0.015)


@pytest.mark.slow
@pytest.mark.parametrize("shape", _NOISE)
@pytest.mark.parametrize(
    ("test", "n", "attainable"),
    [
        (sign_flips, 6, 2 / 64),
        (sign_flips, 20, 0.05),
        (label_exchange, 6, 46 / 924),
        (label_exchange, 20, 0.05),
    ],
)
def test_error_rate_and_coverage_of_permutations(
    test: Callable[..., Outcome], n: int, attainable: float, shape: str
) -> None:
    """Simulation, 6000 studies: the standard error of a share is 0.28 % at 5 %, so 1 % is three and a half of them.

    Counted p values come in steps: six pairs can err in 2 of 64 studies, or in none. The interval inverts the test
    and covers the rest.
    """
    n_studies, shift = 6000, 1.0
    rng = np.random.default_rng(200 + n)
    draw = _NOISE[shape]
    errors = covered = power = 0
    for _ in range(n_studies):
        first, second = draw(rng, n), (np.zeros(n) if test is sign_flips else draw(rng, n))
        real = test((first + shift).tolist(), second.tolist(), 0.95)
        null = test(first.tolist(), second.tolist(), 0.95).p
        assert null is not None
        assert real.p is not None
        assert real.interval is not None
        errors += null <= 0.05
        power += real.p <= 0.05
        covered += real.interval.low <= shift <= real.interval.high

    print(f"{test.__name__}, n {n}, {shape}: power {power / n_studies:.3f} for a shift of 1")
    assert abs(errors / n_studies - attainable) <= 0.01
    assert abs(covered / n_studies - (1 - attainable)) <= 0.015
