"""Epoch counts against their definition."""

from __future__ import annotations

from fractions import Fraction

import numpy as np

from bandcairn.signal import Run, Signal
from bandcairn.steps.epoch import cut_epochs, epoch_view
from reference import published


def test_number_of_whole_epochs() -> None:
    """Truth: definition floor((T fs - L) / step) + 1 with L = round(len fs), step = round(L (1 - overlap))."""
    entry = published("windows_spectra", "EEG-EPOCHS")
    counts = []
    for total_s, rate, length_s, overlap in entry.inputs["cases"]:
        samples = np.zeros((1, total_s * rate))
        signal = Signal(samples, Fraction(rate), ("c",), (Run(0, samples.shape[1], Fraction(0)),))
        counts.append(len(cut_epochs(signal, length_s, overlap).first))

    entry.assert_close(counts)


def test_windows_equal_those_of_numpy() -> None:
    """Truth: independent library. The same windows as a sliding view, every step-th one."""
    samples = np.random.default_rng(1).normal(size=(2, 10_000))
    signal = Signal(samples, Fraction(1000), ("a", "b"), (Run(0, 10_000, Fraction(0)),))
    epochs = cut_epochs(signal, 1.024, 0.25)
    expected = np.lib.stride_tricks.sliding_window_view(samples, 1024, axis=1)[:, ::768]

    np.testing.assert_array_equal(epoch_view(samples, epochs), expected)
    np.testing.assert_array_equal(epochs.peak_to_peak_uv, np.ptp(expected, axis=-1))
