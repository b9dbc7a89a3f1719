"""Settings must fit rates and lengths, whatever they are."""

from __future__ import annotations

from fractions import Fraction

import pytest

from bandcairn.drafting.findings import FoundChannel
from bandcairn.drafting.grouping import Group
from bandcairn.drafting.settings import Lengths, settings_for, target_hz


def _group(kind: str, *rates_hz: float, low_hz: float | None = None, high_hz: float | None = None) -> Group:
    channels = tuple(
        FoundChannel(
            "X",
            kind,
            "",
            guessed=False,
            rate_hz=Fraction(str(rate)),
            unit="uV",
            n_samples=1000,
            low_hz=low_hz,
            high_hz=high_hz,
        )
        for rate in rates_hz
    )
    return Group(kind, kind, ("X",), (channels,), tuple(f"r{n}" for n in range(len(channels))))


LONG = Lengths(600.0, None)


@pytest.mark.parametrize(
    ("kind", "rates_hz", "expected"),
    [
        ("eeg", (256,), 128),
        ("eeg", (128,), None),
        ("eeg", (100,), None),
        ("eeg", (100, 256), 100),
        ("eeg", (5000,), 128),
        ("ecg", (500,), None),
        ("ecg", (500, 1000), 500),
        ("ecg", (256, 1000), 256),
        ("emg", (2000,), None),
        ("emg", (1000, 2000), 1000),
        ("emg", (4000,), 2000),
        ("eeg", (999.4121, 1000), None),
        ("eeg", (90.5, 100), None),
    ],
)
def test_a_new_rate_is_common_never_higher_and_reached_exactly(
    kind: str, rates_hz: tuple[float, ...], expected: int | None
) -> None:
    """None where nothing is gained, or nothing fits."""
    assert target_hz(kind, sorted(Fraction(str(rate)) for rate in rates_hz)) == expected


def test_rates_that_no_common_one_fits_are_a_persons_choice() -> None:
    """The signal is commented out rather than wrong."""
    assert "rates" in settings_for(_group("eeg", 999.4121, 1000), LONG).problem


@pytest.mark.parametrize("kind", ["eeg", "ecg", "emg"])
@pytest.mark.parametrize("rate_hz", [80, 100, 128, 250, 256, 500, 1000, 2000])
def test_the_filter_stays_below_nyquist_and_holds_every_band(kind: str, rate_hz: int) -> None:
    """Whatever the rate: a slow EMG is not used rather than wrong."""
    settings = settings_for(_group(kind, rate_hz), LONG)
    low_hz, high_hz = settings.filter_hz
    if settings.problem:
        assert (kind, rate_hz) == ("emg", 80)
        return
    assert low_hz < high_hz <= 0.45 * (settings.resample_hz or rate_hz)
    if kind == "eeg":
        assert all(low_hz <= low < high <= high_hz for low, high in settings.bands_hz.values())


def test_what_the_recorder_took_away_is_not_measured() -> None:
    """A stated pass-band narrows the filter and with it the bands."""
    settings = settings_for(_group("eeg", 256, low_hz=1.0, high_hz=35.0), LONG)
    assert settings.filter_hz == (1.0, 35.0)
    assert settings.bands_hz["delta"] == (1.0, 4)
    assert settings.bands_hz["gamma"] == (30, 35.0)


@pytest.mark.parametrize(
    ("length_s", "epoch_s", "bands"),
    [(600, 300, ["vlf", "lf", "hf"]), (240, 240, ["lf", "hf"]), (100, 60, ["hf"])],
)
def test_beats_have_the_bands_that_the_epoch_holds(length_s: float, epoch_s: float, bands: list[str]) -> None:
    """No band that would stay blank."""
    settings = settings_for(_group("ecg", 500), Lengths(length_s, None))
    assert settings.epoch_s == epoch_s
    assert list(settings.bands_hz) == bands


def test_short_segments_leave_the_heart_its_whole_recording() -> None:
    """Variability over minutes is not taken from seconds; the other kinds use the segments."""
    lengths = Lengths(600.0, 20.0)
    assert settings_for(_group("ecg", 500), lengths).whole
    assert settings_for(_group("ecg", 500), lengths).epoch_s == 300
    assert not settings_for(_group("eeg", 256), lengths).whole
    assert not settings_for(_group("ecg", 500), Lengths(600.0, 300.0)).whole


def test_epochs_fit_into_the_shortest_segment() -> None:
    """And a signal whose segments hold none says so."""
    assert settings_for(_group("eeg", 256), Lengths(60.0, 3.0)).epoch_s == 2
    assert "too short" in settings_for(_group("eeg", 256), Lengths(60.0, 0.5)).problem
