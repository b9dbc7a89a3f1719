"""Power density: shapes, detrending, memory, refusals. Numbers against truth stand in reference_checks."""

from __future__ import annotations

import tracemalloc
from typing import Any

import numpy as np
import pytest

from bandcairn.errors import StepError
from bandcairn.steps.spectrum import power_density, segment_count, window


def test_leading_axes_are_kept() -> None:
    """One density for each stretch, whatever the axes before it."""
    samples = np.random.default_rng(1).normal(size=(2, 3, 5, 64))

    spectrum = power_density(samples, 64, method="periodogram", window="hann")

    assert spectrum.density.shape == (2, 3, 5, 33)
    np.testing.assert_array_equal(spectrum.frequencies_hz, np.arange(33.0))
    alone = power_density(samples[1, 2, 3], 64, method="periodogram", window="hann")
    np.testing.assert_allclose(alone.density, spectrum.density[1, 2, 3], rtol=1e-13)


def test_no_stretch_gives_no_density() -> None:
    """A signal without epochs has an empty spectrum on the usual grid."""
    spectrum = power_density(np.empty((4, 0, 128)), 64, method="periodogram", window="hann")

    assert spectrum.density.shape == (4, 0, 65)
    assert len(spectrum.frequencies_hz) == 65


def test_input_is_left_as_it_was() -> None:
    """A step never writes into what it was given, though its work space is used again and again."""
    samples = np.random.default_rng(2).normal(size=(3, 256))
    before = samples.copy()

    for detrend in ("none", "constant", "linear"):
        power_density(samples, 64, method="welch", window="hann", segment_s=1, overlap=0.5, detrend=detrend)

    np.testing.assert_array_equal(samples, before)


def test_overlapping_epochs_are_not_copied_as_a_whole() -> None:
    """A view with a thousandfold overlap is worked through in a few megabytes."""
    samples = np.random.default_rng(3).normal(size=20_000)
    view = np.lib.stride_tricks.sliding_window_view(samples, 1000)[:10_000]
    tracemalloc.start()

    spectrum = power_density(view, 1000, method="welch", window="hann", segment_s=0.1, overlap=0.5)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()

    assert peak - spectrum.density.nbytes < 4e6


def test_a_whole_night_is_not_copied_as_a_whole() -> None:
    """One long stretch of many segments is worked through in a few megabytes too."""
    samples = np.random.default_rng(7).normal(size=1_000_000)
    tracemalloc.start()

    power_density(samples, 1000, method="welch", window="hann", segment_s=1, overlap=0.5)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()

    assert peak < 4e6


def test_segments_beyond_one_block_are_all_counted() -> None:
    """A stretch with more segments than are transformed at once is the mean over all of them."""
    samples = np.random.default_rng(4).normal(size=100_000)
    spectrum = power_density(
        samples, 100, method="welch", window="hamming", segment_s=1, overlap=0, detrend="none"
    )
    one_by_one = power_density(
        samples.reshape(1000, 100), 100, method="periodogram", window="hamming", detrend="none"
    )

    np.testing.assert_allclose(spectrum.density, one_by_one.density.mean(axis=0), rtol=1e-12)


@pytest.mark.parametrize(("detrend", "left"), [("constant", "a slope"), ("linear", "nothing")])
def test_trend_is_taken_off_each_segment(detrend: Any, left: str) -> None:  # noqa: ANN401 - parametrised literal
    """A mean removes an offset, a line a drift as well."""
    drift = 50 + 3 * np.arange(1000) / 100
    spectrum = power_density(
        drift, 100, method="welch", window="boxcar", segment_s=2, overlap=0.5, detrend=detrend
    )

    assert (spectrum.density[1:].max() < 1e-20) == (left == "nothing")
    assert spectrum.density[0] < 1e-20


def test_samples_after_the_last_whole_segment_are_not_used() -> None:
    """Nothing is padded."""
    samples = np.random.default_rng(5).normal(size=299)
    changed = np.concatenate([samples[:250], np.full(49, 1e6)])

    one, other = (
        power_density(some, 100, method="welch", window="hann", segment_s=1, overlap=0.5).density
        for some in (samples, changed)
    )

    np.testing.assert_array_equal(one, other)


def test_segment_in_seconds_is_read_as_the_decimal_that_was_written() -> None:
    """0.155 s at 100 Hz is 15.5 samples, rounded to the even 16; the float 0.155 is a little less."""
    spectrum = power_density(
        np.ones(100), 100, method="welch", window="hann", segment_s=0.155, overlap=0, detrend="none"
    )

    assert spectrum.frequencies_hz[1] == pytest.approx(100 / 16)


def test_step_between_segments_is_rounded() -> None:
    """Three quarters of 7 samples leave a step of 1.75: two, so that 11 samples hold three segments."""
    samples = np.random.default_rng(6).normal(size=11)
    spectrum = power_density(
        samples, 1, method="welch", window="boxcar", segment_s=7, overlap=0.75, detrend="none"
    )
    stretches = np.lib.stride_tricks.sliding_window_view(samples, 7)[[0, 2, 4]]
    alone = power_density(stretches, 1, method="periodogram", window="boxcar", detrend="none")

    np.testing.assert_allclose(spectrum.density, alone.density.mean(axis=0), rtol=1e-12)


@pytest.mark.parametrize(
    ("options", "message"),
    [
        (
            {"method": "welch", "segment_s": 2, "overlap": 0.5},
            r"segment of 200 samples \(2 s\) in a stretch of 150",
        ),
        ({"method": "welch", "segment_s": 0.01, "overlap": 0.5}, "segment of 1 samples"),
        ({"method": "welch", "segment_s": 1}, "overlap None"),
        ({"method": "welch", "overlap": 0.5}, "segment_s None"),
        ({"method": "welch", "segment_s": 1, "overlap": 1.0}, "below, 1"),
        ({"method": "welch", "segment_s": 1, "overlap": -0.5}, "below, 1"),
        ({"method": "periodogram", "segment_s": 1}, "a periodogram is one segment"),
        ({"method": "periodogram", "overlap": 0.5}, "a periodogram is one segment"),
    ],
)
def test_what_does_not_fit_is_refused(options: dict[str, Any], message: str) -> None:
    """No segment is shortened and no parameter ignored."""
    with pytest.raises(StepError, match=message):
        power_density(np.zeros(150), 100, window="hann", **options)


@pytest.mark.parametrize(("n", "expected"), [(9, 0), (10, 1), (14, 1), (15, 2), (20, 3)])
def test_only_whole_segments_are_counted(n: int, expected: int) -> None:
    """Segments of 10 samples, 5 apart."""
    assert segment_count(n, 10, 5) == expected


def test_periodic_window_continues_into_itself() -> None:
    """The sample that would close the window is the first one of the next period."""
    even, odd = window("hann", 8), window("hann", 7)

    np.testing.assert_allclose(even[1:], even[:0:-1], atol=1e-15)
    np.testing.assert_allclose(odd[1:], odd[:0:-1], atol=1e-15)
    assert even[0] == 0
    assert even[4] == pytest.approx(1)
