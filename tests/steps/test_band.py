"""Promises of steps/band.py."""

from __future__ import annotations

from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np
import pytest

from bandcairn.errors import StepError
from bandcairn.steps.band import band_power, mean_frequency, median_frequency, spectral_edge

if TYPE_CHECKING:
    from collections.abc import Callable

FREQUENCIES_HZ = np.arange(0, 64.25, 0.5)


def density(seed: int = 3) -> np.ndarray:
    """Return a reproducible ragged density, shape (2, 3, n_freq)."""
    return np.random.default_rng(seed).exponential(size=(2, 3, FREQUENCIES_HZ.size))


@pytest.mark.parametrize("cuts_hz", [(0, 4, 8, 13, 30, 64), (0, 0.1, 3.3, 3.4, 63.9, 64)])
def test_adjacent_bands_add_up_to_the_whole(cuts_hz: tuple[float, ...]) -> None:
    """No power is counted twice or lost at an edge, wherever it falls within a bin."""
    parts = [band_power(FREQUENCIES_HZ, density(), a, b) for a, b in pairwise(cuts_hz)]
    np.testing.assert_allclose(sum(parts), density().sum(axis=-1) * 0.5, rtol=1e-12)


def test_first_and_last_bin_hold_their_power_within_half_a_cell() -> None:
    """Half of the power at 0 Hz lies below a quarter of the step, for its cell ends at half of it."""
    only_ends = np.zeros(FREQUENCIES_HZ.size)
    only_ends[[0, -1]] = 2
    assert band_power(FREQUENCIES_HZ, only_ends, 0, 0.125) == pytest.approx(0.5)
    assert band_power(FREQUENCIES_HZ, only_ends, 63.75, 64) == pytest.approx(1.0)


def test_a_band_narrower_than_a_bin_holds_its_share() -> None:
    """A flat density of 1 over 0.2 Hz holds 0.2."""
    assert band_power(FREQUENCIES_HZ, np.ones(FREQUENCIES_HZ.size), 10.1, 10.3) == pytest.approx(0.2)


def test_leading_axes_are_kept() -> None:
    """One power for each channel and epoch."""
    assert band_power(FREQUENCIES_HZ, density(), 8, 13).shape == (2, 3)
    assert spectral_edge(FREQUENCIES_HZ, density(), 0, 64).shape == (2, 3)


def test_median_lies_where_both_sides_hold_equal_power() -> None:
    """The median frequency cuts the range into two bands of equal power."""
    spectrum = density()[0, 0]
    middle_hz = float(median_frequency(FREQUENCIES_HZ, spectrum, 3.3, 51.7))
    below = band_power(FREQUENCIES_HZ, spectrum, 3.3, middle_hz)
    assert below == pytest.approx(float(band_power(FREQUENCIES_HZ, spectrum, middle_hz, 51.7)))


def test_edge_at_the_whole_is_the_end_of_the_power() -> None:
    """All the power of one line lies below the upper end of its cell."""
    line = np.where(FREQUENCIES_HZ == 10, 1.0, 0.0)
    assert spectral_edge(FREQUENCIES_HZ, line, 0, 64, share=1.0) == pytest.approx(10.25)


def test_mean_frequency_is_the_weighted_sum_over_the_whole_spectrum() -> None:
    """Sum of f P over sum of P, to the letter."""
    spectrum = density()
    expected = (spectrum * FREQUENCIES_HZ).sum(axis=-1) / spectrum.sum(axis=-1)
    np.testing.assert_allclose(mean_frequency(FREQUENCIES_HZ, spectrum, 0, 64), expected, rtol=1e-12)


@pytest.mark.parametrize("measure", [median_frequency, mean_frequency, spectral_edge])
def test_no_power_gives_no_frequency(measure: Callable[..., np.ndarray]) -> None:
    """Zero power divides nothing: NaN, without a warning; another row is not touched."""
    spectra = np.stack([np.zeros(FREQUENCIES_HZ.size), np.ones(FREQUENCIES_HZ.size)])
    found = measure(FREQUENCIES_HZ, spectra, 8, 13)
    assert np.isnan(found[0])
    assert 8 < found[1] < 13


@pytest.mark.parametrize("band_hz", [(13.0, 8.0), (8.0, 8.0), (-1.0, 4.0), (30.0, 65.0)])
def test_a_band_beyond_the_spectrum_is_refused(band_hz: tuple[float, float]) -> None:
    """The refusal names the band and where the spectrum ends."""
    with pytest.raises(StepError, match=f"the band {band_hz[0]:g} to {band_hz[1]:g} Hz.*64.25 Hz"):
        band_power(FREQUENCIES_HZ, density(), *band_hz)


def test_a_spectrum_of_an_odd_number_of_samples_reaches_nyquist() -> None:
    """Its last bin lies half a step below Nyquist; a band up to Nyquist still holds all of it."""
    frequencies_hz = np.arange(63.0)
    spectrum = np.ones(frequencies_hz.size)
    assert band_power(frequencies_hz, spectrum, 0, 62.5) == pytest.approx(spectrum.size)
