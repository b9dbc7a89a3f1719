"""Promises of steps/heart.py."""

from __future__ import annotations

import numpy as np
import pytest

from bandcairn.steps.features import FeatureValue, stack_channels
from bandcairn.steps.heart import heart_band_features, heart_features, tachogram

BANDS_HZ = {"vlf": (0.003, 0.04), "lf": (0.04, 0.15), "hf": (0.15, 0.4)}
FREQUENCIES_HZ = np.arange(0, 2.0001, 1 / 120)


def beats(n: int = 100) -> np.ndarray:
    """Return beats 790 and 810 ms apart in turn, the first at 1 s."""
    return np.cumsum(np.append(1.0, np.tile([0.79, 0.81], n)))


def time_features(beat_times_s: np.ndarray, start_s: list[float], length_s: float) -> dict[str, FeatureValue]:
    """Return the time-domain features by name."""
    found = heart_features(beat_times_s, np.array(start_s, dtype=float), length_s)
    return {value.feature: value for value in found}


def band_features(density: np.ndarray, length_s: float) -> dict[str, FeatureValue]:
    """Return the features of the spectrum by band or name."""
    found = heart_band_features(FREQUENCIES_HZ, density, BANDS_HZ, length_s)
    return {value.band or value.feature: value for value in found}


def test_names_and_units_are_those_of_the_contract() -> None:
    """Time domain and spectrum, each feature in its unit."""
    found = heart_features(beats(), np.array([0.0]), 60)
    assert {value.feature: value.unit for value in found} == {
        "heart_rate": "1/min",
        "mean_nn": "ms",
        "sdnn": "ms",
        "rmssd": "ms",
        "pnn50": "%",
        "beats": "1",
    }
    found = heart_band_features(FREQUENCIES_HZ, np.ones((1, FREQUENCIES_HZ.size)), BANDS_HZ, 300)
    assert [(value.feature, value.band, value.unit) for value in found] == [
        ("band_power", "vlf", "ms^2"),
        ("band_power", "lf", "ms^2"),
        ("band_power", "hf", "ms^2"),
        ("total_power", "", "ms^2"),
        ("lf_nu", "", "%"),
        ("hf_nu", "", "%"),
        ("lf_hf_ratio", "", "1"),
    ]


def test_alternating_intervals_have_their_closed_form() -> None:
    """790 and 810 ms in turn: successive differences of 20 ms throughout, a rate of 75 1/min."""
    found = time_features(beats(), [0.0], 160)
    assert found["rmssd"].values[0] == pytest.approx(20)
    assert found["heart_rate"].values[0] == pytest.approx(75, abs=0.01)
    assert found["sdnn"].values[0] == pytest.approx(10, abs=0.1)
    assert found["pnn50"].values[0] == 0


def test_features_are_the_mean_over_the_epochs() -> None:
    """One epoch at 60 1/min, one at 120: 90 1/min on average, though the mean interval says 80."""
    two_rates = np.r_[np.arange(0, 30, 1.0), np.arange(30, 60, 0.5)]
    found = time_features(two_rates, [0.0, 30.0], 30)
    assert found["heart_rate"].values[0] == pytest.approx(90)
    assert found["mean_nn"].values[0] == pytest.approx(750)


def test_beats_of_overlapping_epochs_count_once() -> None:
    """Two epochs that share half of their time hold the beats of their union."""
    every_second = np.arange(0.5, 100, 1.0)
    assert time_features(every_second, [0.0, 10.0], 20)["beats"].values[0] == 30


def test_a_missed_beat_leaves_rmssd_as_it_was() -> None:
    """Only valid successive pairs count."""
    found = time_features(np.delete(beats(), 51), [0.0], 160)
    assert found["rmssd"].values[0] == pytest.approx(20)
    assert found["heart_rate"].values[0] == pytest.approx(75, abs=0.02)


def test_too_few_intervals_give_nulls_with_their_reason() -> None:
    """Three beats are two intervals; their number is still known."""
    found = time_features(np.array([1.0, 1.8, 2.6]), [0.0], 10)
    assert found["beats"].values[0] == 3
    assert np.isnan(found["heart_rate"].values[0])
    assert found["heart_rate"].note == ("fewer than 3 valid intervals in every kept epoch",)


def test_an_epoch_without_beats_is_told_beside_the_value() -> None:
    """The mean stands on the other epoch, and the note says so."""
    found = time_features(beats(20), [0.0, 100.0], 30)
    assert found["heart_rate"].values[0] == pytest.approx(75, abs=0.1)
    assert found["heart_rate"].note == ("1 of 2 epochs left out: fewer than 3 valid intervals",)


@pytest.mark.parametrize("beat_times_s", [np.empty(0), np.array([5.0]), beats()])
def test_no_kept_epoch_gives_nulls(beat_times_s: np.ndarray) -> None:
    """Every feature is null for the same reason, beats or none."""
    found = time_features(beat_times_s, [], 30)
    assert all(np.isnan(value.values[0]) for value in found.values())
    assert {value.note for value in found.values()} == {("no epoch was kept",)}


def test_no_beats_in_a_kept_epoch_are_zero_beats() -> None:
    """Zero is a number of beats; no rate follows from it."""
    found = time_features(np.empty(0), [0.0], 30)
    assert found["beats"].values[0] == 0
    assert np.isnan(found["heart_rate"].values[0])


def test_a_stretch_within_the_beats_is_sampled_in_full() -> None:
    """Beats on both sides: as many samples as were asked for, from its start."""
    sampled = tachogram(beats(), 20, 80, 4)
    assert (sampled.nn_ms.size, sampled.start_s, sampled.rate_hz, sampled.note) == (240, 20, 4, "")
    assert sampled.covered_share == pytest.approx(1)


def test_a_stretch_beyond_the_beats_is_shortened() -> None:
    """Nothing is made up before the first or after the last interval."""
    sampled = tachogram(beats(), 0, 200, 4)
    assert sampled.start_s == 2.0
    assert sampled.start_s + (sampled.nn_ms.size - 1) / 4 == 161.0


def test_beats_beyond_a_gap_of_the_recording_are_not_used() -> None:
    """The tachogram ends with the last beat before the gap, and begins with the first interval after it."""
    recorded = beats(400)
    both = np.concatenate([recorded[:101], 300 + recorded])
    assert (tachogram(both, 21, 85, 4).start_s, tachogram(both, 300, 360, 4).start_s) == (21, 302)
    ended = tachogram(both, 21, 85, 4)
    assert ended.start_s + (ended.nn_ms.size - 1) / 4 == 81
    np.testing.assert_array_equal(ended.nn_ms, tachogram(recorded[:101], 21, 85, 4).nn_ms)


def test_far_beats_change_nothing() -> None:
    """Twenty beats beyond either end are as good as all: within 1e-6 ms."""
    irregular = np.cumsum(np.random.default_rng(8).normal(0.8, 0.04, 400))
    near = irregular[(irregular > 100) & (irregular < 220)]
    np.testing.assert_allclose(
        tachogram(irregular, 130, 190, 4).nn_ms, tachogram(near, 130, 190, 4).nn_ms, atol=1e-6, rtol=0
    )


def test_a_slow_change_is_followed_by_the_spline() -> None:
    """Intervals of 800 ms plus a wave of 50 ms at 0.02 Hz come back within 0.5 ms, knots or not."""
    times = [0.0]
    while times[-1] < 200:
        times.append(times[-1] + 0.8 + 0.05 * np.sin(2 * np.pi * 0.02 * times[-1]))
    later = np.array(times[1:])
    sampled = tachogram(np.array(times), 50, 150, 4)
    wave = np.interp(50 + np.arange(400) / 4, later, 1000 * np.diff(times))
    np.testing.assert_allclose(sampled.nn_ms, wave, atol=0.5)


def test_mostly_invalid_intervals_give_no_tachogram() -> None:
    """Where less than 80 % is covered by valid intervals, the reason is told instead."""
    holes = np.r_[beats()[:30], beats()[60:]]
    sampled = tachogram(holes, 2, 62, 4)
    assert sampled.nn_ms.size == 0
    assert sampled.note.startswith("valid intervals cover")


def test_too_few_beats_give_no_tachogram() -> None:
    """A cubic needs four intervals."""
    sampled = tachogram(np.array([1.0, 1.8, 2.6]), 0, 60, 4)
    assert (sampled.nn_ms.size, sampled.note) == (0, "fewer than 4 valid intervals")


def test_a_flat_density_divides_by_width() -> None:
    """1 ms^2/Hz: each band holds its width, and LF and HF make the whole of the normalised units."""
    found = band_features(np.ones((1, FREQUENCIES_HZ.size)), 300)
    for name, (low, high) in BANDS_HZ.items():
        # The cell at 0 Hz is half as wide and twice as dense.
        assert found[name].values[0] == pytest.approx(high - low, abs=1 / 240)
    assert found["lf_nu"].values[0] == pytest.approx(100 * 0.11 / 0.36)
    assert found["lf_nu"].values[0] + found["hf_nu"].values[0] == pytest.approx(100)
    assert found["lf_hf_ratio"].values[0] == pytest.approx(0.11 / 0.25)


@pytest.mark.parametrize(
    ("length_s", "given"),
    [
        (59, set()),
        (60, {"hf"}),
        (120, {"lf", "hf", "lf_nu", "hf_nu", "lf_hf_ratio"}),
        (300, {"vlf", "lf", "hf", "total_power", "lf_nu", "hf_nu", "lf_hf_ratio"}),
    ],
)
def test_a_band_slower_than_the_epoch_is_null(length_s: float, given: set[str]) -> None:
    """HF needs 60 s, LF 120 s, VLF and the total that holds it 300 s."""
    found = band_features(np.ones((1, FREQUENCIES_HZ.size)), length_s)
    assert {name for name, value in found.items() if not np.isnan(value.values[0])} == given


def test_the_reason_names_both_lengths() -> None:
    """A ratio passes on the reason of its band."""
    found = band_features(np.ones((1, FREQUENCIES_HZ.size)), 60)
    assert found["lf"].note == ("epoch of 60 s is shorter than 120 s",)
    assert found["lf_hf_ratio"].note == ("epoch of 60 s is shorter than 120 s",)


def test_a_channel_without_a_tachogram_is_null_by_itself() -> None:
    """The other channel keeps its values."""
    density = np.stack([np.full(FREQUENCIES_HZ.size, np.nan), np.ones(FREQUENCIES_HZ.size)])
    found = band_features(density, 300)
    assert found["hf"].note == ("no tachogram in any kept epoch", "")
    assert found["lf_nu"].note == ("no tachogram in any kept epoch", "")


def test_ratios_need_bands_of_their_names() -> None:
    """Own bands give powers; without lf and hf there is no balance."""
    found = heart_band_features(FREQUENCIES_HZ, np.ones((1, FREQUENCIES_HZ.size)), {"slow": (0.04, 0.1)}, 300)
    assert {value.note for value in found if value.feature == "lf_hf_ratio"} == {
        ("no band is named lf or hf",)
    }


def test_constant_intervals_have_no_balance() -> None:
    """Zero power is a power; zero over zero is nothing."""
    found = band_features(np.zeros((1, FREQUENCIES_HZ.size)), 300)
    assert found["lf"].values[0] == 0
    assert found["lf_nu"].note == ("no power in the divisor",)


def test_channels_are_stacked_in_order() -> None:
    """Features of single channels become features of all, notes beside their values."""
    parts = [heart_features(times, np.array([0.0]), 60) for times in (beats(), np.empty(0))]
    rate = stack_channels(parts)[0]
    assert rate.feature == "heart_rate"
    assert np.isnan(rate.values).tolist() == [False, True]
    assert rate.note[0] == ""
    assert rate.note[1]
