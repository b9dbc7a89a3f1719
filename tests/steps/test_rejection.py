"""Rejection: planted artefacts found, clean epochs kept, edges and decisions honoured (F2, F3, F4, P18, P19)."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING

import numpy as np
import pytest

from bandcairn.signal import Run, Signal
from bandcairn.steps.epoch import BadStretch, EdgeZone, LeftOut, Reject, cut_epochs
from bandcairn.steps.rejection import (
    AT_EDGE,
    BY_DECISION,
    KEPT,
    MAD_TO_SD,
    OUTLYING,
    REASONS,
    TOO_FLAT,
    TOO_LARGE,
    TOO_STEEP,
    robust_z,
)

if TYPE_CHECKING:
    from numpy.typing import NDArray

RATE_HZ = 128
LENGTH = 2 * RATE_HZ
LIMITS = Reject(peak_to_peak_uv=200, flat_uv=0.5, step_uv=70, robust_z=5)


def eeg(seed: int, n_epochs: int, n_channels: int = 2) -> NDArray[np.float64]:
    """Return smooth noise with a rhythm, about 10 uV in size: an EEG without artefact."""
    rng = np.random.default_rng(seed)
    white = rng.standard_normal((n_channels, n_epochs * LENGTH + 8))
    smooth = np.lib.stride_tricks.sliding_window_view(white, 9, axis=1).mean(axis=-1) * 24
    time_s = np.arange(smooth.shape[1]) / RATE_HZ
    return np.asarray(smooth + 6 * np.sin(2 * np.pi * 10 * time_s))


def signal_of(samples: NDArray[np.float64], *lengths: int) -> Signal:
    """Return a signal of channels a, b, …; in runs of these lengths with gaps of 10 s, or in one."""
    runs, first = [], 0
    for index, length in enumerate(lengths or (samples.shape[1],)):
        runs.append(Run(first, first + length, Fraction(first, RATE_HZ) + 10 * index))
        first += length
    return Signal(samples.copy(), Fraction(RATE_HZ), tuple("abcd"[: len(samples)]), tuple(runs))


def planted(kind: str, window: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return an epoch of one channel with an artefact."""
    time = np.arange(LENGTH)
    if kind == "blink":
        return np.asarray(window + 300 * np.exp(-0.5 * ((time - 100) / 12) ** 2))
    if kind == "electrode pop":
        return window + 90 * (time >= 130)
    if kind == "flat line":
        return np.full(LENGTH, 3.2)
    return window * 2.6  # a burst: unusual, though below the limit of the range


ARTEFACTS = {"blink": TOO_LARGE, "electrode pop": TOO_STEEP, "flat line": TOO_FLAT, "burst": OUTLYING}


@pytest.mark.parametrize("seed", range(5))
def test_f3_every_planted_artefact_is_found_in_its_channel_alone(seed: int) -> None:
    """Recall is 100 %, each under its own reason, and the other channel keeps the epoch."""
    samples = eeg(seed, 100)
    where = np.random.default_rng(100 + seed).choice(100, 20, replace=False)
    expected = np.zeros((2, 100), np.int8)
    for index, epoch in enumerate(where):
        kind = list(ARTEFACTS)[index % 4]
        here = slice(epoch * LENGTH, (epoch + 1) * LENGTH)
        samples[0, here] = planted(kind, samples[0, here])
        expected[0, epoch] = ARTEFACTS[kind]

    epochs = cut_epochs(signal_of(samples), 2, 0, reject=LIMITS)

    np.testing.assert_array_equal(epochs.reason[expected > 0], expected[expected > 0])
    assert np.count_nonzero(epochs.reason[expected == 0]) <= 0.01 * 180


def test_f3_clean_epochs_are_kept() -> None:
    """Of 4000 clean epochs less than 1 % is dropped, by all rules together."""
    epochs = cut_epochs(signal_of(eeg(7, 2000)), 2, 0, reject=LIMITS)

    assert np.count_nonzero(epochs.reason) < 0.01 * 4000


def test_a_step_on_the_limit_is_kept_and_one_beyond_is_not() -> None:
    """The limit itself is allowed."""
    samples = np.zeros((1, 2 * LENGTH))
    samples[0, 10:LENGTH] = 50.0
    samples[0, LENGTH:] = 50.0
    samples[0, LENGTH + 30 :] = 100.5

    epochs = cut_epochs(signal_of(samples), 2, 0, reject=Reject(step_uv=50))

    np.testing.assert_array_equal(epochs.reason, [[KEPT, TOO_STEEP]])
    np.testing.assert_array_equal(epochs.step_uv, [[50, 50.5]])


def test_a_step_between_two_epochs_belongs_to_neither() -> None:
    """The difference of the last sample of a window to the next is not in the window; overlapping ones hold it."""
    samples = np.zeros((1, 2 * LENGTH))
    samples[0, LENGTH:] = 80.0

    apart = cut_epochs(signal_of(samples), 2, 0, reject=Reject(step_uv=50))
    overlapping = cut_epochs(signal_of(samples), 2, 0.5, reject=Reject(step_uv=50))

    np.testing.assert_array_equal(apart.step_uv, [[0, 0]])
    np.testing.assert_array_equal(overlapping.reason, [[KEPT, TOO_STEEP, KEPT]])


@pytest.mark.parametrize(
    ("length_s", "overlap"), [(2, 0.5), (1, 0.25), (0.5, 0.9), (1, 0), (Fraction(1, 128), 0)]
)
def test_steps_equal_those_of_the_windows_themselves(length_s: float, overlap: float) -> None:
    """What blocks find is what window by window would."""
    samples = eeg(3, 6)
    epochs = cut_epochs(signal_of(samples), float(length_s), overlap, reject=Reject(step_uv=1))

    for window, first in enumerate(epochs.first):
        steps = np.abs(np.diff(samples[:, first : first + epochs.length], axis=1))
        assert epochs.step_uv is not None
        np.testing.assert_array_equal(epochs.step_uv[:, window], steps.max(axis=1, initial=0))


def test_robust_z_is_the_distance_from_the_median_in_mads_of_the_logarithm() -> None:
    """By hand: ranges e^0 … e^10, the median is 5 and the median absolute deviation 3."""
    ranges = np.exp(np.arange(11.0))[np.newaxis]

    z = robust_z(ranges, np.ones((1, 11), dtype=bool))

    np.testing.assert_allclose(z, [np.abs(np.arange(11.0) - 5) / (MAD_TO_SD * 3)])


def test_what_another_rule_drops_is_no_standard_of_what_is_usual() -> None:
    """Six of twelve epochs are too large: the others are judged among themselves."""
    samples = np.random.default_rng(1).uniform(-10, 10, (1, 18 * LENGTH))
    samples[0, : 6 * LENGTH] *= 100
    samples[0, 6 * LENGTH : 7 * LENGTH] *= 3

    epochs = cut_epochs(signal_of(samples), 2, 0, reject=Reject(peak_to_peak_uv=100, robust_z=6))

    np.testing.assert_array_equal(epochs.reason[0, :8], [TOO_LARGE] * 6 + [OUTLYING, KEPT])


def test_too_few_epochs_are_not_called_outlying() -> None:
    """Nine epochs do not tell what is usual; ten do."""
    samples = np.random.default_rng(2).uniform(-10, 10, (1, 10 * LENGTH))
    samples[0, :LENGTH] *= 50
    limit = Reject(robust_z=6)

    assert cut_epochs(signal_of(samples[:, : 9 * LENGTH]), 2, 0, reject=limit).kept.all()
    assert cut_epochs(signal_of(samples), 2, 0, reject=limit).reason[0, 0] == OUTLYING


def test_epochs_alike_but_for_rounding_are_kept() -> None:
    """A pure sine has ranges that differ in the last bit: no spread to measure by, and no outlier."""
    time_s = np.arange(40 * LENGTH) / RATE_HZ
    samples = 20 * np.sin(2 * np.pi * 10 * time_s)[np.newaxis]

    assert cut_epochs(signal_of(samples), 2, 0, reject=Reject(robust_z=3)).kept.all()


def test_f2_epochs_at_a_gap_are_dropped_as_far_as_the_filter_has_not_settled() -> None:
    """Zones of 100 samples: of windows of 256 that is one on either side of the gap, and none at the ends."""
    edges = EdgeZone(start_samples=100, stop_samples=100)
    epochs = cut_epochs(signal_of(eeg(4, 8), 4 * LENGTH, 4 * LENGTH), 2, 0, left_out=LeftOut(edges))

    np.testing.assert_array_equal(epochs.reason[0], [0, 0, 0, AT_EDGE, AT_EDGE, 0, 0, 0])


def test_p19_every_end_is_left_out_on_demand() -> None:
    """At the start and the end of the recording too."""
    edges = EdgeZone(start_samples=100, stop_samples=300, at_start=True, at_stop=True)
    epochs = cut_epochs(signal_of(eeg(4, 8), 4 * LENGTH, 4 * LENGTH), 2, 0, left_out=LeftOut(edges))

    np.testing.assert_array_equal(epochs.reason[0] == AT_EDGE, [1, 0, 1, 1, 1, 0, 1, 1])


def test_f2_an_epoch_that_touches_the_zone_without_entering_is_kept() -> None:
    """A zone of exactly one window takes that window alone."""
    edges = EdgeZone(start_samples=LENGTH, stop_samples=LENGTH + 1, at_start=True, at_stop=True)
    epochs = cut_epochs(signal_of(eeg(4, 6)), 2, 0, left_out=LeftOut(edges))

    np.testing.assert_array_equal(epochs.reason[0] == AT_EDGE, [1, 0, 0, 0, 1, 1])


def test_p18_a_run_shorter_than_its_zones_keeps_nothing() -> None:
    """Zones longer than the run overlap within it, and never reach into its neighbour."""
    edges = EdgeZone(start_samples=5 * LENGTH, stop_samples=5 * LENGTH)
    lengths = (4 * LENGTH, 2 * LENGTH, 8 * LENGTH)
    epochs = cut_epochs(signal_of(eeg(5, 14), *lengths), 2, 0, left_out=LeftOut(edges))

    np.testing.assert_array_equal(epochs.reason[0] == AT_EDGE, [1] * 4 + [1] * 2 + [1] * 5 + [0] * 3)


def test_f4_an_epoch_that_holds_a_sample_of_a_bad_stretch_is_dropped() -> None:
    """From the first sample at or after its start up to its stop: 4 to 6 s is the third epoch of 2 s alone."""
    left_out = LeftOut(stretches=(BadStretch(4, 6, ("a", "b")),))
    epochs = cut_epochs(signal_of(eeg(6, 6)), 2, 0, left_out=left_out)

    np.testing.assert_array_equal(epochs.reason == BY_DECISION, [[0, 0, 1, 0, 0, 0]] * 2)


def test_f4_a_bad_stretch_of_one_channel_leaves_the_other() -> None:
    """Even when what a channel fails in is dropped for all: a decision says itself what it is about."""
    left_out = LeftOut(stretches=(BadStretch(3.9, 4.01, ("b",)),))
    reject = Reject(peak_to_peak_uv=1000, scope="epoch")
    epochs = cut_epochs(signal_of(eeg(6, 6)), 2, 0, reject=reject, left_out=left_out)

    np.testing.assert_array_equal(epochs.reason == BY_DECISION, [[0] * 6, [0, 1, 1, 0, 0, 0]])


def test_f4_a_bad_channel_drops_no_epoch_of_the_others() -> None:
    """What is left out has no say."""
    samples = eeg(8, 6)
    samples[1] *= 100
    reject = Reject(peak_to_peak_uv=150, scope="epoch")

    with_it = cut_epochs(signal_of(samples), 2, 0, reject=reject)
    without = cut_epochs(signal_of(samples), 2, 0, reject=reject, left_out=LeftOut(channels=("b",)))

    assert not with_it.kept.any()
    np.testing.assert_array_equal(without.reason, [[KEPT] * 6, [BY_DECISION] * 6])


def test_f4_a_bad_stretch_is_found_by_true_time_behind_a_gap() -> None:
    """Seconds are those of the file: the second run begins at 18 s."""
    left_out = LeftOut(stretches=(BadStretch(20, 21, ("a", "b")),))
    epochs = cut_epochs(signal_of(eeg(9, 8), 4 * LENGTH, 4 * LENGTH), 2, 0, left_out=left_out)

    np.testing.assert_array_equal(np.flatnonzero(epochs.reason[0]), [5])


def test_every_reason_is_counted_once() -> None:
    """An epoch has one reason, so that the counts add up to what is dropped."""
    assert sorted(REASONS.values()) == list(range(1, 7))
