"""Power of a band and the frequencies that divide it.

A density of bins at ``f`` with step ``df`` is taken as constant within the cell ``[f - df/2, f + df/2)`` of
each bin. The first cell starts at 0 Hz and the last one ends at the last frequency: both hold the power
``density * df`` of a whole bin within half its width, for a periodic spectrum has no negative frequency and
none above Nyquist. So the sum over all cells is the mean square of the signal (Parseval), and adjacent
bands add up to the whole.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.errors import StepError

if TYPE_CHECKING:
    from numpy.typing import NDArray


@dataclass(frozen=True, slots=True)
class _Cells:
    """The parts of the bins' cells that lie within a band.

    Attributes
    ----------
    bins : slice
        The bins that reach into the band.
    low_hz, high_hz : ndarray, shape (n_bins,)
        Where each part starts and ends.
    centre_hz : ndarray, shape (n_bins,)
        The bin's frequency, or the middle of what is left of a cell that the band cuts.
    weight_hz : ndarray, shape (n_bins,)
        Density times weight is the power of the part.
    """

    bins: slice
    low_hz: NDArray[np.float64]
    high_hz: NDArray[np.float64]
    centre_hz: NDArray[np.float64]
    weight_hz: NDArray[np.float64]


def band_power(
    frequencies_hz: NDArray[np.float64], density: NDArray[np.float64], low_hz: float, high_hz: float
) -> NDArray[np.float64]:
    """Integrate a one-sided density over ``[low_hz, high_hz)``.

    Parameters
    ----------
    frequencies_hz : ndarray, shape (n_freq,)
        Evenly spaced, increasing, from 0 Hz to Nyquist.
    density : ndarray, shape (..., n_freq)
        Unit squared per hertz.
    low_hz, high_hz : float
        Edges of the band; a bin counts by the share of its cell that lies within.

    Returns
    -------
    ndarray, shape (...)
        Power in unit squared.

    Raises
    ------
    StepError
        If the band is empty or reaches beyond the spectrum.

    Examples
    --------
    >>> import numpy as np
    >>> float(band_power(np.arange(0, 51, 0.5), np.ones(102), 8, 13))
    5.0
    """
    cells = _cells_within(frequencies_hz, low_hz, high_hz)
    power: NDArray[np.float64] = np.sum(density[..., cells.bins] * cells.weight_hz, axis=-1)
    return power


def mean_frequency(
    frequencies_hz: NDArray[np.float64], density: NDArray[np.float64], low_hz: float, high_hz: float
) -> NDArray[np.float64]:
    """Return the power-weighted mean frequency within ``[low_hz, high_hz)``: sum of f P over sum of P.

    Parameters and errors as for `band_power`; the result is in hertz, NaN where the range holds no power.

    References
    ----------
    Stulen FB, De Luca CJ (1981) Frequency parameters of the myoelectric signal as a measure of muscle
    conduction velocity. IEEE Trans Biomed Eng 28:515-523.
    """
    cells = _cells_within(frequencies_hz, low_hz, high_hz)
    power = density[..., cells.bins] * cells.weight_hz
    return _ratio(np.sum(power * cells.centre_hz, axis=-1), np.sum(power, axis=-1))


def median_frequency(
    frequencies_hz: NDArray[np.float64], density: NDArray[np.float64], low_hz: float, high_hz: float
) -> NDArray[np.float64]:
    """Return the frequency that halves the power within ``[low_hz, high_hz)``.

    Parameters and errors as for `band_power`; the result is in hertz, NaN where the range holds no power.

    References
    ----------
    Stulen FB, De Luca CJ (1981) Frequency parameters of the myoelectric signal as a measure of muscle
    conduction velocity. IEEE Trans Biomed Eng 28:515-523.
    """
    return spectral_edge(frequencies_hz, density, low_hz, high_hz, share=0.5)


def spectral_edge(
    frequencies_hz: NDArray[np.float64],
    density: NDArray[np.float64],
    low_hz: float,
    high_hz: float,
    share: float = 0.95,
) -> NDArray[np.float64]:
    """Return the frequency below which `share` of the power within ``[low_hz, high_hz)`` lies.

    The cumulative power grows linearly within a cell, so the edge falls between bins.

    Parameters
    ----------
    frequencies_hz : ndarray, shape (n_freq,)
        Evenly spaced, increasing, from 0 Hz to Nyquist.
    density : ndarray, shape (..., n_freq)
        Unit squared per hertz.
    low_hz, high_hz : float
        Range whose power counts as the whole.
    share : float
        Above 0, at most 1.

    Returns
    -------
    ndarray, shape (...)
        Hertz; NaN where the range holds no power.

    Raises
    ------
    StepError
        If the range is empty or reaches beyond the spectrum.

    References
    ----------
    Rampil IJ, Sasse FJ, Smith NT, Hoff BH, Flemming DC (1980) Spectral edge frequency: a new correlate of
    anesthetic depth. Anesthesiology 53:S12.
    """
    cells = _cells_within(frequencies_hz, low_hz, high_hz)
    cumulative = np.cumsum(density[..., cells.bins] * cells.weight_hz, axis=-1)
    wanted = share * cumulative[..., -1:]
    at = np.argmax(cumulative >= wanted, axis=-1)[..., np.newaxis]
    after = np.take_along_axis(cumulative, at, axis=-1)
    before = np.where(at > 0, np.take_along_axis(cumulative, np.maximum(at - 1, 0), axis=-1), 0.0)
    within = _ratio(wanted - before, after - before)[..., 0]
    cell = at[..., 0]
    edge_hz: NDArray[np.float64] = cells.low_hz[cell] + within * (cells.high_hz - cells.low_hz)[cell]
    return edge_hz


def _ratio(part: NDArray[np.float64], whole: NDArray[np.float64]) -> NDArray[np.float64]:
    """Divide; NaN where the whole is nothing."""
    result: NDArray[np.float64] = np.divide(
        part, whole, out=np.full(np.shape(whole), np.nan), where=whole > 0
    )
    return result


def _cells_within(frequencies_hz: NDArray[np.float64], low_hz: float, high_hz: float) -> _Cells:
    """Cut the bins' cells at the edges of a band."""
    step_hz = (frequencies_hz[-1] - frequencies_hz[0]) / (frequencies_hz.size - 1)
    _refuse_beyond_spectrum(float(frequencies_hz[-1] + step_hz / 2), low_hz, high_hz)
    edges_hz = np.append(frequencies_hz - step_hz / 2, frequencies_hz[-1])
    edges_hz[0] = max(edges_hz[0], 0.0)
    cut_hz = np.clip(edges_hz, low_hz, high_hz)
    share = np.diff(cut_hz) / np.diff(edges_hz)
    touched = np.flatnonzero(share)
    bins = slice(touched[0], touched[-1] + 1) if touched.size else slice(0, 1)
    low, high, share = cut_hz[:-1][bins], cut_hz[1:][bins], share[bins]
    centre_hz = np.where(share < 1, (low + high) / 2, frequencies_hz[bins])
    return _Cells(bins, low, high, centre_hz, share * step_hz)


def _refuse_beyond_spectrum(end_hz: float, low_hz: float, high_hz: float) -> None:
    # Half a step of grace: with an odd number of samples the last bin lies half a step below Nyquist.
    if not 0 <= low_hz < high_hz <= end_hz * (1 + 1e-12):
        raise StepError(
            f"found the band {low_hz:g} to {high_hz:g} Hz; allowed: 0 <= low < high up to "
            f"the end of the spectrum at {end_hz:g} Hz. Lower the band or keep a higher sampling rate."
        )
