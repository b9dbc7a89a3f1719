"""What a filter has taken from a band is told beside the band."""

from __future__ import annotations

import numpy as np
import pytest

from bandcairn.steps.features import FeatureValue
from bandcairn.steps.stop_bands import note_stop_bands, stopped_share

BANDS = {"alpha": (8.0, 13.0), "gamma": (30.0, 70.0)}


def value(band: str, *notes: str, values: tuple[float, ...] = (1.0,)) -> FeatureValue:
    """Return a power of one channel or more."""
    return FeatureValue("band_power", band, "uV^2", np.array(values), notes or ("",))


def test_a_band_that_holds_a_stop_band_says_how_much_of_it_is_gone() -> None:
    """4 of 40 Hz are 10 %."""
    (noted,) = note_stop_bands((value("gamma"),), BANDS, (1.0, 45.0), ((48.0, 52.0),))

    assert noted.note == ("10 % of the band lies in the stop band 48-52 Hz",)


def test_a_band_beside_the_stop_band_says_nothing() -> None:
    """Nor one that only touches it."""
    values = (value("alpha"), value("edge"))

    assert note_stop_bands(values, {**BANDS, "edge": (40.0, 48.0)}, (1.0, 45.0), ((48.0, 52.0),)) == values


def test_several_stop_bands_are_told_in_one_sentence() -> None:
    """The share is of all of them together."""
    stops = ((49.0, 51.0), (59.0, 61.0), (99.0, 101.0))

    (noted,) = note_stop_bands((value("gamma"),), BANDS, (1.0, 45.0), stops)

    assert noted.note == ("10 % of the band lies in the stop bands 49-51, 59-61 Hz",)


def test_a_feature_without_a_band_is_judged_by_the_total_range() -> None:
    """What a notch takes from the total is told at the total."""
    (noted,) = note_stop_bands((value(""),), BANDS, (1.0, 101.0), ((49.0, 51.0),))

    assert noted.note == ("2 % of the total range lies in the stop band 49-51 Hz",)


def test_a_note_that_is_there_stays_and_a_missing_value_keeps_its_reason_alone() -> None:
    """Where there is no value, nothing of it can be gone."""
    many = value("gamma", "kept", "no epoch was kept", values=(1.0, float("nan")))

    (noted,) = note_stop_bands((many,), BANDS, (1.0, 45.0), ((48.0, 52.0),))

    assert noted.note == ("kept; 10 % of the band lies in the stop band 48-52 Hz", "no epoch was kept")


def test_without_a_stop_band_nothing_changes() -> None:
    """The very objects come back."""
    values = (value("gamma"), value(""))

    assert all(a is b for a, b in zip(note_stop_bands(values, BANDS, (1.0, 45.0), ()), values, strict=True))


@pytest.mark.parametrize(
    ("stops", "share"),
    [
        ((), 0),
        (((0, 100),), 1),
        (((20, 40), (35, 50)), 0.5),
        (((60, 90), (20, 40)), 0.5),
        (((48, 52),) * 2, 0.1),
    ],
)
def test_overlapping_stop_bands_count_once(stops: tuple[tuple[float, float], ...], share: float) -> None:
    """The union counts, whatever the order."""
    assert stopped_share((30.0, 70.0), stops) == pytest.approx(share)
