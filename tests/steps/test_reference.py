"""Re-referencing: what channels become, and what is refused. Closed forms stand in reference_checks."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest

from bandcairn.errors import StepError
from bandcairn.signal import Run, Signal
from bandcairn.steps.reference import (
    Derivation,
    Pair,
    against_average,
    against_channels,
    as_pairs,
    rereference,
)

CHANNELS = ("F3", "F4", "M1", "M2")
RUNS = (Run(0, 60, Fraction(0)), Run(60, 100, Fraction(9)))


def signal() -> Signal:
    """Return four channels of noise that share an offset, in two runs."""
    samples = np.random.default_rng(1).normal(50, 20, size=(4, 100))
    return Signal(samples, Fraction(250), CHANNELS, RUNS)


DERIVATIONS = [
    against_average(CHANNELS),
    against_channels(CHANNELS, ("M1", "M2")),
    as_pairs(CHANNELS, (Pair("F3-F4", "F3", "F4"), Pair("F4-M1", "F4", "M1"))),
]


def test_the_channels_add_up_to_nothing_after_an_average() -> None:
    """At every moment, to the last digits; so one of them follows from the others."""
    derivation = against_average(CHANNELS)

    result = rereference(signal(), derivation)

    np.testing.assert_allclose(result.samples.sum(axis=0), 0, atol=1e-12)
    np.testing.assert_allclose(result.samples, signal().samples - signal().samples.mean(axis=0), atol=1e-12)
    assert (result.channels, derivation.rank) == (CHANNELS, 3)


def test_named_channels_leave_and_their_mean_is_taken_from_the_others() -> None:
    """Linked mastoids, say: what is left of them would be nothing but half their difference."""
    result = rereference(signal(), against_channels(CHANNELS, ("M1", "M2")))

    f3, f4, m1, m2 = signal().samples
    assert result.channels == ("F3", "F4")
    np.testing.assert_allclose(result.samples, [f3 - (m1 + m2) / 2, f4 - (m1 + m2) / 2], atol=1e-12)


def test_pairs_are_exact_differences_under_new_names() -> None:
    """The first minus the second, to the last bit, in the order declared."""
    result = rereference(signal(), as_pairs(CHANNELS, (Pair("b", "M1", "F3"), Pair("a", "F3", "F4"))))

    f3, f4, m1, _ = signal().samples
    assert result.channels == ("b", "a")
    np.testing.assert_array_equal(result.samples, [m1 - f3, f3 - f4])


@pytest.mark.parametrize("derivation", DERIVATIONS, ids=("average", "named", "pairs"))
def test_what_all_channels_share_is_gone(derivation: Derivation) -> None:
    """The old reference does not matter: anything added to every channel leaves no trace."""
    shared = np.random.default_rng(2).normal(0, 500, size=100)
    moved = Signal(signal().samples + shared, Fraction(250), CHANNELS, RUNS)

    before, after = (rereference(one, derivation) for one in (signal(), moved))

    np.testing.assert_allclose(after.samples, before.samples, atol=1e-10)


@pytest.mark.parametrize("derivation", DERIVATIONS, ids=("average", "named", "pairs"))
def test_rate_runs_and_input_stay_as_they_are(derivation: Derivation) -> None:
    """A moment is computed from that moment alone: no gap matters."""
    given = signal()
    before = given.samples.copy()

    result = rereference(given, derivation)

    assert (result.rate_hz, result.runs) == (given.rate_hz, given.runs)
    np.testing.assert_array_equal(given.samples, before)


def test_the_rank_counts_independent_channels() -> None:
    """Three pairs round a triangle add up to nothing."""
    ring = as_pairs(CHANNELS, (Pair("a", "F3", "F4"), Pair("b", "F4", "M1"), Pair("c", "M1", "F3")))

    assert (ring.rank, against_channels(CHANNELS, ("M1",)).rank) == (2, 3)


def test_what_cannot_be_derived_is_refused() -> None:
    """Unknown names, a channel against itself, nothing left, one name twice."""
    with pytest.raises(StepError, match="average of 1 channel"):
        against_average(("Cz",))
    with pytest.raises(StepError, match="found A1; allowed: F3, F4, M1, M2"):
        against_channels(CHANNELS, ("A1",))
    with pytest.raises(StepError, match="found 4 of 4 channels"):
        against_channels(CHANNELS, CHANNELS)
    with pytest.raises(StepError, match="found Oz"):
        as_pairs(CHANNELS, (Pair("a", "F3", "Oz"),))
    with pytest.raises(StepError, match="two different channels"):
        as_pairs(CHANNELS, (Pair("a", "F3", "F3"),))
    with pytest.raises(StepError, match="its own name"):
        as_pairs(CHANNELS, (Pair("a", "F3", "F4"), Pair("a", "F4", "M1")))
