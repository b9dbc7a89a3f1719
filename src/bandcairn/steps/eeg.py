"""EEG features of an averaged spectrum."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bandcairn.steps.band import band_power, spectral_edge
from bandcairn.steps.features import FeatureValue, notes_where_null

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray


def eeg_features(
    frequencies_hz: NDArray[np.float64],
    density: NDArray[np.float64],
    bands_hz: Mapping[str, tuple[float, float]],
    total_hz: tuple[float, float],
) -> tuple[FeatureValue, ...]:
    """Return absolute and relative band powers, total power and the spectral edge of each channel.

    Parameters
    ----------
    frequencies_hz : ndarray, shape (n_freq,)
        Evenly spaced from 0 Hz to Nyquist.
    density : ndarray, shape (n_channels, n_freq)
        One-sided density averaged over the kept epochs, uV^2/Hz. NaN for a channel without a kept epoch.
    bands_hz : mapping of str to (float, float)
        Named bands, each half open: [low, high).
    total_hz : (float, float)
        Range of the total power, which is the whole for relative power and for the spectral edge.

    Returns
    -------
    tuple of FeatureValue
        ``band_power`` (uV^2) and ``relative_band_power`` (1) per band, ``total_power`` (uV^2) and
        ``spectral_edge_95`` (Hz).

    Raises
    ------
    StepError
        If a band or the total reaches beyond the spectrum.
    """
    total = band_power(frequencies_hz, density, *total_hz)
    edge_hz = spectral_edge(frequencies_hz, density, *total_hz)
    per_band = (
        value
        for name, edges_hz in bands_hz.items()
        for value in _powers_of_band(name, band_power(frequencies_hz, density, *edges_hz), total, total_hz)
    )
    return (
        *per_band,
        FeatureValue("total_power", "", "uV^2", total, notes_where_null(total, _NO_EPOCH)),
        FeatureValue("spectral_edge_95", "", "Hz", edge_hz, _notes(edge_hz, total, total_hz)),
    )


_NO_EPOCH = "no epoch was kept"


def _powers_of_band(
    name: str, power: NDArray[np.float64], total: NDArray[np.float64], total_hz: tuple[float, float]
) -> tuple[FeatureValue, FeatureValue]:
    """Return the power of one band and its share of the total."""
    relative = np.divide(power, total, out=np.full(total.shape, np.nan), where=total > 0)
    return (
        FeatureValue("band_power", name, "uV^2", power, notes_where_null(power, _NO_EPOCH)),
        FeatureValue("relative_band_power", name, "1", relative, _notes(relative, total, total_hz)),
    )


def _notes(
    values: NDArray[np.float64], total: NDArray[np.float64], total_hz: tuple[float, float]
) -> tuple[str, ...]:
    """Say why a value that needs a total is missing: no epoch, or no power."""
    no_power = f"no power between {total_hz[0]:g} and {total_hz[1]:g} Hz"
    return tuple(
        "" if not np.isnan(value) else _NO_EPOCH if np.isnan(whole) else no_power
        for value, whole in zip(values, total, strict=True)
    )
