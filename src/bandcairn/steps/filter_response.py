"""What a chain of filters does to each frequency: gain, -3.01 dB points, delay.

References
----------
.. [1] Gustafsson F. (1996) Determining the initial states in forward-backward filtering.
   IEEE Trans. Signal Process. 44, 988-992 (forward-backward filtering squares the gain).
.. [2] Oppenheim A.V., Schafer R.W. (1999) Discrete-Time Signal Processing, 2nd ed., Prentice Hall, section 5.1.1
   (group delay) and section 5.7 (linear phase).
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.steps.filter_design import band_sections, bands_of, sections, taps

if TYPE_CHECKING:
    from numpy.typing import ArrayLike, NDArray

    from bandcairn.steps.filter_design import Band
    from bandcairn.steps.filter_stage import FilterStage

_HALF_POWER = math.sqrt(0.5)
_EDGE_OF_PASSBAND = ("chebyshev1", "elliptic")
_EDGE_OF_STOPBAND = ("chebyshev2", "fir")


@dataclass(frozen=True, slots=True)
class EffectiveCutoff:
    """Where one edge of a stage falls to half power.

    Attributes
    ----------
    stage : int
        Index of the stage.
    requested_hz : float
        The cut-off as declared; of a notch, an edge of the width declared.
    effective_hz : float
        Half power (-3.01 dB) of the applied response, both passes of a zero-phase stage counted.
    single_pass_hz : float
        Half power of one pass.
    """

    stage: int
    requested_hz: float
    effective_hz: float
    single_pass_hz: float


def response(
    stages: tuple[FilterStage, ...], rate_hz: float, frequencies_hz: ArrayLike
) -> NDArray[np.float64]:
    """Return the amplitude gain of a chain as applied: |H|^2 of stages that run twice [1]_, |H| of the others.

    Parameters
    ----------
    stages : tuple of FilterStage
        The chain; none has gain 1.
    rate_hz : float
        Sampling rate.
    frequencies_hz : array_like
        Where to evaluate it, 0 up to Nyquist.

    Returns
    -------
    ndarray, same shape as frequencies_hz
        Amplitude out over amplitude in.
    """
    frequencies = np.asarray(frequencies_hz, np.float64)
    gain = np.ones(frequencies.shape)
    for stage in stages:
        if stage.design == "fir":
            gain *= _gain_of_taps(taps(stage, rate_hz), rate_hz, frequencies)
        else:
            gain *= _gain(sections(stage, rate_hz), rate_hz, frequencies) ** stage.passes
    return gain


@lru_cache(maxsize=64)
def effective_cutoffs(stages: tuple[FilterStage, ...], rate_hz: float) -> tuple[EffectiveCutoff, ...]:
    """Find the -3.01 dB points of each stage, in one pass and as applied.

    A second pass squares the gain [1]_, so half power moves into the pass-band: 40 Hz of an order 2 low-pass
    becomes about 32 Hz. Each stage, and each band-stop of a notch, is judged by itself; `response` gives the
    whole chain.

    Parameters
    ----------
    stages : tuple of FilterStage
        The chain.
    rate_hz : float
        Sampling rate.

    Returns
    -------
    tuple of EffectiveCutoff
        In the order of the stages and of their cut-offs.
    """
    return tuple(
        EffectiveCutoff(
            index,
            requested_hz,
            _half_power_hz(stage, band, rate_hz, bracket, stage.passes),
            _half_power_hz(stage, band, rate_hz, bracket, 1),
        )
        for index, stage in enumerate(stages)
        for band in bands_of(stage, rate_hz)
        for requested_hz, bracket in zip(band.requested_hz, _brackets(stage, band, rate_hz), strict=True)
    )


def group_delay_s(stage: FilterStage, rate_hz: float, frequency_hz: float) -> float:
    """Return the group delay of one forward pass at a frequency [2]_: half the length of a fir, less one tap."""
    if stage.design == "fir":
        return (len(taps(stage, rate_hz)) - 1) / 2 / rate_hz
    powers = np.exp(-2j * np.pi * frequency_hz / rate_hz * np.arange(3))
    delay = sum(
        _mean_lag(section[:3], powers) - _mean_lag(section[3:], powers)
        for section in sections(stage, rate_hz)
    )
    return float(delay) / rate_hz


def _mean_lag(polynomial: NDArray[np.float64], powers: NDArray[np.complex128]) -> float:
    """Return the delay of a polynomial in 1/z: its lags weighted by their terms."""
    return float((np.sum(np.arange(3) * polynomial * powers) / np.sum(polynomial * powers)).real)


def _gain(
    sos: NDArray[np.float64], rate_hz: float, frequencies_hz: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return |H| of one pass."""
    angle = 2 * np.pi * frequencies_hz / rate_hz
    gain = np.ones(angle.shape)
    for section in sos:
        gain *= np.sqrt(_squared(section[:3], angle) / _squared(section[3:], angle))
    return gain


def _squared(polynomial: NDArray[np.float64], angle: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return |c0 + c1 z + c2 z^2|^2 on the unit circle.

    Written about z = 1, where the zeros of a high-pass lie: near 0 Hz plain powers of z cancel to nothing.
    """
    c0, c1, c2 = polynomial
    in_phase = (c0 + c1 + c2) - 2 * (c0 + c2) * np.sin(angle / 2) ** 2
    return np.asarray(in_phase**2 + ((c0 - c2) * np.sin(angle)) ** 2)


def _gain_of_taps(
    impulse: NDArray[np.float64], rate_hz: float, frequencies_hz: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Return |H| of symmetric taps: the middle one and twice the cosines of the others."""
    middle = len(impulse) // 2
    lags = np.arange(1, middle + 1)
    angles = 2 * np.pi * frequencies_hz / rate_hz
    # Frequency by frequency: long taps and a fine grid together would fill the memory.
    gains = [impulse[middle] + 2 * np.sum(impulse[middle + 1 :] * np.cos(lags * a)) for a in angles.ravel()]
    return np.asarray(np.abs(np.array(gains)).reshape(angles.shape))


def _brackets(stage: FilterStage, band: Band, rate_hz: float) -> tuple[tuple[float, float], ...]:
    """Return a frequency that passes and one that is stopped for each cut-off; the gain falls between.

    The far ends are the middle of the band, 0 Hz and Nyquist. A cut-off that ends the pass-band, or begins the
    stop-band, takes their place on its own side, beyond which there is ripple.
    """
    brackets = _far_ends(stage, band, rate_hz)
    if stage.design in _EDGE_OF_PASSBAND:
        return tuple((edge, far[1]) for edge, far in zip(band.design_hz, brackets, strict=True))
    if stage.design in _EDGE_OF_STOPBAND:
        return tuple((far[0], edge) for edge, far in zip(band.design_hz, brackets, strict=True))
    return brackets


def _far_ends(stage: FilterStage, band: Band, rate_hz: float) -> tuple[tuple[float, float], ...]:
    nyquist_hz = rate_hz / 2
    if band.type == "lowpass":
        return ((0.0, nyquist_hz),)
    if band.type == "highpass":
        return ((nyquist_hz, 0.0),)
    middle_hz = _middle_hz(stage, band, rate_hz)
    if band.type == "bandpass":
        return ((middle_hz, 0.0), (middle_hz, nyquist_hz))
    return ((0.0, middle_hz), (nyquist_hz, middle_hz))


def _middle_hz(stage: FilterStage, band: Band, rate_hz: float) -> float:
    """Return the middle of a band: on the pre-warped, logarithmic axis of sections; on the plain one of taps."""
    if stage.design == "fir":
        return sum(band.design_hz) / 2
    low, high = (math.tan(math.pi * cutoff_hz / rate_hz) for cutoff_hz in band.design_hz)
    return math.atan(math.sqrt(low * high)) * rate_hz / math.pi


def _half_power_hz(
    stage: FilterStage, band: Band, rate_hz: float, bracket: tuple[float, float], passes: int
) -> float:
    """Halve the bracket until its ends are neighbours."""
    is_fir = stage.design == "fir"
    kernel = taps(stage, rate_hz) if is_fir else band_sections(stage, band, rate_hz)
    passed_hz, stopped_hz = bracket
    while True:
        middle_hz = (passed_hz + stopped_hz) / 2
        if middle_hz in (passed_hz, stopped_hz):
            return middle_hz
        gain = (_gain_of_taps if is_fir else _gain)(kernel, rate_hz, np.array(middle_hz))
        if gain**passes >= _HALF_POWER:
            passed_hz = middle_hz
        else:
            stopped_hz = middle_hz
