"""Adjusted p values: their order, their bounds, and those that are not there."""

from __future__ import annotations

import itertools

import numpy as np
import pytest

from bandcairn.errors import StepError
from bandcairn.statistics import adjust, available_adjustments


def test_holm_multiplies_by_what_is_left_and_never_falls() -> None:
    """Smallest first: 0.01 x 3, then max(0.03, 0.011 x 2), then max(0.03, 0.9)."""
    assert adjust([0.9, 0.01, 0.011]) == pytest.approx((0.9, 0.03, 0.03), rel=1e-15)


def test_none_stays_none_and_does_not_count() -> None:
    """A comparison without a test does not make the others stricter."""
    assert adjust([None, 0.02, None, 0.5]) == (None, 0.04, None, 0.5)


def test_nothing_exceeds_one() -> None:
    """0.6 x 2 is told as 1."""
    assert adjust([0.6, 0.7]) == (1.0, 1.0)


@pytest.mark.parametrize("p_values", [[], [None], [None, None]])
def test_a_family_without_a_test_is_answered(p_values: list[float | None]) -> None:
    """Nothing to adjust is no error."""
    assert adjust(p_values) == tuple(p_values)


def test_a_single_p_value_is_its_own_adjustment() -> None:
    """A family of one."""
    assert adjust([0.049]) == (0.049,)


def test_ties_are_adjusted_alike_in_any_order() -> None:
    """Equal p values have equal adjusted values, wherever they stand."""
    for p_values in itertools.permutations([0.01, 0.01, 0.01, 0.2]):
        adjusted = adjust(p_values)
        assert dict(zip(p_values, adjusted, strict=True)) == {0.01: 0.04, 0.2: 0.2}
        assert [found == 0.04 for found in adjusted] == [p == 0.01 for p in p_values]


@pytest.mark.parametrize("seed", range(5))
def test_adjusted_values_keep_the_order_and_lie_between_raw_and_bonferroni(seed: int) -> None:
    """Holm is never milder than no adjustment and never stricter than Bonferroni."""
    p_values = np.random.default_rng(seed).uniform(0, 0.2, 12)

    adjusted = np.array(adjust(list(p_values)), dtype=float)

    assert (adjusted >= p_values).all()
    assert (adjusted <= np.minimum(1, 12 * p_values)).all()
    assert (np.diff(adjusted[np.argsort(p_values)]) >= 0).all()


@pytest.mark.parametrize("wrong", [-0.1, 1.1, float("nan")])
def test_what_is_no_p_value_is_refused_with_its_place(wrong: float) -> None:
    """A NaN must not slip through as a p value that is never significant."""
    with pytest.raises(StepError, match=rf"p value 1: found {wrong}; allowed: 0 to 1, or None"):
        adjust([0.5, wrong])


def test_an_unknown_method_is_refused_with_the_known_ones() -> None:
    """What may stand there is told."""
    with pytest.raises(StepError, match="adjustment: found 'bonferoni'; allowed: holm"):
        adjust([0.5], "bonferoni")


def test_available_adjustments_are_those_that_can_be_declared() -> None:
    """The list is complete."""
    assert available_adjustments() == (
        "holm", "bonferroni", "benjamini_hochberg", "benjamini_yekutieli", "none",
    )  # fmt: skip


def test_false_discovery_steps_up_from_the_largest() -> None:
    """0.04 x 3/3, then min(0.04, 0.03 x 3/2), then min(0.04, 0.01 x 3); dependence costs 1 + 1/2 + 1/3 as much."""
    p_values = [0.03, 0.01, 0.04]

    assert adjust(p_values, "benjamini_hochberg") == pytest.approx((0.04, 0.03, 0.04), rel=1e-15)
    assert adjust(p_values, "benjamini_yekutieli") == pytest.approx((0.22 / 3, 0.055, 0.22 / 3), rel=1e-15)


def test_bonferroni_multiplies_and_none_leaves() -> None:
    """By the size of the family, which absent tests do not raise; or not at all."""
    assert adjust([0.2, None, 0.6], "bonferroni") == (0.4, None, 1.0)
    assert adjust([0.2, None, 0.6], "none") == (0.2, None, 0.6)


@pytest.mark.parametrize("method", available_adjustments())
@pytest.mark.parametrize("p_values", [[], [None], [0.3]])
def test_every_method_answers_a_family_of_one_or_none(method: str, p_values: list[float | None]) -> None:
    """Nothing to adjust for leaves what there is."""
    assert adjust(p_values, method) == tuple(p_values)


@pytest.mark.parametrize("method", available_adjustments())
def test_every_method_adjusts_ties_alike_keeps_the_order_and_stays_within_raw_and_one(method: str) -> None:
    """Whatever the order of the family."""
    p_values = [*np.random.default_rng(3).uniform(0, 0.3, 15).tolist(), 0.1, 0.1, 0.0, 1.0]
    adjusted = adjust(p_values, method)

    assert adjust(p_values[::-1], method) == adjusted[::-1]
    assert adjusted[15] == adjusted[16]
    assert all(found is not None and p <= found <= 1 for p, found in zip(p_values, adjusted, strict=True))
    assert [found for _, found in sorted(zip(p_values, adjusted, strict=True))] == sorted(adjusted)  # type: ignore[type-var]
