"""Promises of steps/recorder.py: the filters of a recorder read from its file, and bands held against them."""

from __future__ import annotations

import math

import pytest

from bandcairn.steps.recorder import RecorderBand, loss_db, read_prefilter, share_beyond, strictest


@pytest.mark.parametrize(
    ("text", "highpass_hz", "lowpass_hz", "notch_hz"),
    [
        ("HP:0.1Hz LP:70Hz N:50Hz", 0.1, 70, (50,)),
        ("HP:0.1Hz LP:70Hz", 0.1, 70, ()),
        ("HP:0.1Hz,LP:70Hz", 0.1, 70, ()),
        ("HP: 0,16 Hz; LP: 35 Hz", 0.16, 35, ()),
        ("HP:1,LP:70", 1, 70, ()),
        ("hp .5 hz / lp 100 hz / notch 60 hz", 0.5, 100, (60,)),
        ("Highpass 0.5 Hz, Low-pass 100 Hz", 0.5, 100, ()),
        ("LP:0.2kHz", None, 200, ()),
        ("HP:DC LP:113 Hz", 0, 113, ()),
        ("HP:DC", 0, None, ()),
        ("", None, None, ()),
        ("no filter", None, None, ()),
        ("none", None, None, ()),
    ],
)
def test_p11_filters_are_read_as_recorders_write_them(
    text: str, highpass_hz: float | None, lowpass_hz: float | None, notch_hz: tuple[float, ...]
) -> None:
    """P11: commas, decimal commas, blanks, DC and absent units."""
    assert read_prefilter(text) == RecorderBand(highpass_hz, lowpass_hz, notch_hz)


@pytest.mark.parametrize("text", ["TC:0.3s", "HP:0.3s", "TC 300ms", "HP: 0,3 sec", "TC:0.3"])
def test_p11_a_time_constant_is_no_frequency(text: str) -> None:
    """P11: 0.3 s are 0.53 Hz, not 0.3 Hz."""
    assert read_prefilter(text).highpass_hz == pytest.approx(1 / (2 * math.pi * 0.3))


def test_p11_high_pass_and_low_pass_exchanged_are_told_and_not_believed() -> None:
    """P11: a high-pass above the low-pass is a mistake, and which of the two is meant cannot be told."""
    assert read_prefilter("HP:70Hz LP:0.1Hz") == RecorderBand(unclear=("HP:70Hz LP:0.1Hz",))


@pytest.mark.parametrize(
    ("text", "unclear"),
    [
        ("0.1-100Hz", ("0.1-100hz",)),
        ("LP:0Hz", ("lp:0hz",)),
        ("LP:DC", ("lp:dc",)),
        ("LP:3s", ("lp:3s",)),
        ("TC:3Hz", ("tc:3hz",)),
    ],
)
def test_p11_what_is_not_understood_is_told_and_never_guessed(text: str, unclear: tuple[str, ...]) -> None:
    """P11: no edge comes of it."""
    assert read_prefilter(text) == RecorderBand(unclear=unclear)


def test_p11_of_header_and_declaration_the_stricter_counts() -> None:
    """P11: the higher high-pass and the lower low-pass; what only one of them says holds."""
    header = RecorderBand(0.1, 70)
    assert strictest(header, 0.5, 100) == (0.5, 70)
    assert strictest(header, None, None) == (0.1, 70)
    assert strictest(RecorderBand(), None, 30) == (None, 30)


def test_c3_share_of_a_band_beyond_the_recorder() -> None:
    """C3: 25 of 40 Hz lie above a low-pass of 70 Hz, half of 1 to 2 Hz below a high-pass of 1.5 Hz."""
    assert share_beyond(55, 95, None, 70) == 0.625
    assert share_beyond(1, 2, 1.5, None) == 0.5
    assert share_beyond(8, 13, 0.1, 70) == 0
    assert share_beyond(80, 95, 0.1, 70) == 1
    assert share_beyond(0, 400, 10, None) == 0, "from 0 Hz means from wherever the recorder starts"


def test_c3_a_band_well_inside_loses_nothing_and_one_beyond_loses_more_the_farther_it_lies() -> None:
    """C3: the loss grows with the distance."""
    assert loss_db(8, 13, 0.01, 5000) == pytest.approx(0, abs=1e-4)
    losses = [loss_db(low, low + 40, 0.1, 70) for low in (15, 55, 95)]
    assert losses == sorted(losses)
    assert loss_db(1, 2, 0, None) == 0
