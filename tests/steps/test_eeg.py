"""Promises of steps/eeg.py."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
import pytest

from bandcairn.steps.eeg import eeg_features

if TYPE_CHECKING:
    from bandcairn.steps.features import FeatureValue

FREQUENCIES_HZ = np.arange(0, 64.25, 0.5)
BANDS_HZ = {"theta": (4.0, 8.0), "alpha": (8.0, 13.0), "beta": (13.0, 30.0)}


def features(*rows: np.ndarray) -> dict[tuple[str, str], FeatureValue]:
    """Return the features of some densities by name and band."""
    found = eeg_features(FREQUENCIES_HZ, np.stack(rows), BANDS_HZ, (4.0, 30.0))
    return {(value.feature, value.band): value for value in found}


def test_names_bands_and_units_are_those_of_the_contract() -> None:
    """Two features per band, then two of the whole, each in its unit."""
    found = eeg_features(FREQUENCIES_HZ, np.ones((1, FREQUENCIES_HZ.size)), BANDS_HZ, (4.0, 30.0))
    assert [(value.feature, value.band, value.unit) for value in found] == [
        *(
            (feature, band, unit)
            for band in BANDS_HZ
            for feature, unit in (("band_power", "uV^2"), ("relative_band_power", "1"))
        ),
        ("total_power", "", "uV^2"),
        ("spectral_edge_95", "", "Hz"),
    ]


def test_a_flat_spectrum_divides_by_width() -> None:
    """Flat from 4 to 30 Hz: alpha holds 5 of 26 uV^2, the edge lies at 4 + 0.95 * 26 Hz."""
    found = features(np.ones(FREQUENCIES_HZ.size))
    assert found["band_power", "alpha"].values[0] == pytest.approx(5)
    assert found["relative_band_power", "alpha"].values[0] == pytest.approx(5 / 26)
    assert found["total_power", ""].values[0] == pytest.approx(26)
    assert found["spectral_edge_95", ""].values[0] == pytest.approx(4 + 0.95 * 26)


def test_shares_of_tiling_bands_add_up_to_one() -> None:
    """The bands tile the total here, so nothing is missing."""
    found = features(np.random.default_rng(2).exponential(size=FREQUENCIES_HZ.size))
    assert sum(found["relative_band_power", band].values[0] for band in BANDS_HZ) == pytest.approx(1)


def test_a_channel_without_power_has_powers_but_no_shares() -> None:
    """Zero is a power; its share and its edge do not exist, and the note says why."""
    found = features(np.zeros(FREQUENCIES_HZ.size), np.ones(FREQUENCIES_HZ.size))
    assert found["band_power", "alpha"].values[0] == 0
    for name in (("relative_band_power", "alpha"), ("spectral_edge_95", "")):
        assert np.isnan(found[name].values[0])
        assert found[name].note == ("no power between 4 and 30 Hz", "")


def test_a_channel_without_an_epoch_has_nothing() -> None:
    """Every value is null for the same reason."""
    found = features(np.full(FREQUENCIES_HZ.size, np.nan))
    assert all(np.isnan(value.values[0]) for value in found.values())
    assert {value.note for value in found.values()} == {("no epoch was kept",)}
