"""From a declared stage to second-order sections, or to taps.

References
----------
.. [1] Butterworth S. (1930) On the theory of filter amplifiers. Wireless Engineer 7, 536-541.
.. [2] Weinberg L. (1962) Network Analysis and Synthesis, McGraw-Hill (Chebyshev and elliptic prototypes).
.. [3] Robertson D.G.E., Dowling J.J. (2003) Design and responses of Butterworth and critically damped digital
   filters. J. Electromyogr. Kinesiol. 13, 569-573 (cut-offs moved for the second pass).
.. [4] Orfanidis S.J. (1996) Introduction to Signal Processing, Prentice Hall, sections 6.3 (time constant of the
   slowest pole: ln eps / ln rho samples) and 11.3 (notch of a stated -3 dB width).
.. [5] Ifeachor E.C., Jervis B.W. (2002) Digital Signal Processing: A Practical Approach, 2nd ed., table 7.3
   (transition width of a windowed filter times its length).
.. [6] Kaiser J.F. (1974) Nonrecursive digital filter design using the I0-sinh window function. Proc. IEEE Int.
   Symp. Circuits and Systems, 20-23.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache
from typing import TYPE_CHECKING, Any, Literal, cast

import numpy as np

from bandcairn.errors import StepError
from bandcairn.steps.filter_stage import (
    HARMONICS_SHARE_OF_NYQUIST,
    LARGEST_SHARE_OF_NYQUIST,
    FilterStage,
    check_stage,
)

if TYPE_CHECKING:
    from numpy.typing import NDArray

# Transition width times length, in sampling rates [5]_.
TRANSITION_TIMES_LENGTH = {"hann": 3.1, "hamming": 3.3, "blackman": 5.5}
_HAIR = 1e-9  # 3.1 x 250 / 5 is 155 taps, though a last bit makes it more
_FAMILIES = {
    "butterworth": "butter",
    "chebyshev1": "cheby1",
    "chebyshev2": "cheby2",
    "elliptic": "ellip",
    "bessel": "bessel_mag",
}


@dataclass(frozen=True, slots=True)
class Band:
    """One low-pass, high-pass, band-pass or band-stop that a stage is made of: a notch has several.

    Attributes
    ----------
    type : {"lowpass", "highpass", "bandpass", "bandstop"}
        What it does.
    requested_hz : tuple of float
        Its cut-offs as declared; of a notch, the two applied -3.01 dB points that its width asks for.
    design_hz : tuple of float
        Where the design puts its cut-offs: elsewhere if they are moved for the second pass.
    """

    type: Literal["lowpass", "highpass", "bandpass", "bandstop"]
    requested_hz: tuple[float, ...]
    design_hz: tuple[float, ...]


def bands_of(stage: FilterStage, rate_hz: float) -> tuple[Band, ...]:
    """Return what a stage is made of, with its cut-offs moved where that is declared.

    Parameters
    ----------
    stage : FilterStage
        What to design.
    rate_hz : float
        Sampling rate.

    Returns
    -------
    tuple of Band
        One; of a notch, one for the mains and one for each harmonic below 0.95 of Nyquist.

    Raises
    ------
    StepError
        If the stage cannot be designed at this rate, or a moved cut-off reaches 0.98 of Nyquist.
    """
    check_stage(stage, rate_hz)
    if stage.type == "notch":
        return tuple(_notch_band(stage, centre_hz, rate_hz) for centre_hz in notch_centres_hz(stage, rate_hz))
    band = Band(stage.type, stage.cutoff_hz, stage.cutoff_hz)
    return (_moved(stage, band, rate_hz) if stage.corrected else band,)


def notch_centres_hz(stage: FilterStage, rate_hz: float) -> tuple[float, ...]:
    """Return the mains, and its harmonics below 0.95 of Nyquist if the notch stops them too."""
    mains_hz = stage.mains_hz or 0.0
    count = math.ceil(HARMONICS_SHARE_OF_NYQUIST * rate_hz / 2 / mains_hz) - 1 if stage.harmonics else 1
    return tuple(mains_hz * multiple for multiple in range(1, count + 1))


def sections(stage: FilterStage, rate_hz: float) -> NDArray[np.float64]:
    """Design a stage at a sampling rate: its prototype [1]_ [2]_ by the pre-warped bilinear transform.

    Bessel's prototype is scaled to -3.01 dB at the cut-off, like Butterworth's; its delay is maximally flat only
    before the bilinear transform.

    Parameters
    ----------
    stage : FilterStage
        What to design; any design but fir.
    rate_hz : float
        Sampling rate.

    Returns
    -------
    ndarray, shape (n_sections, 6)
        Second-order sections b0 b1 b2 a0 a1 a2 with a0 = 1. A single polynomial of this order would lose its
        poles to rounding: 0.5-4 Hz of order 4 at 2048 Hz has one at radius 1.017 that way.

    Raises
    ------
    StepError
        If the stage is declared wrongly, has taps in place of sections, or a pole does not lie inside the unit
        circle.
    """
    bands = bands_of(stage, rate_hz)
    if stage.design == "fir":
        raise StepError(f"filter: {stage} is a fir filter, which has taps in place of sections.")
    sos = np.concatenate([band_sections(stage, band, rate_hz) for band in bands])
    radius = largest_radius(sos)
    if not radius < 1:
        raise StepError(
            f"filter: {stage} has a pole at radius {radius:.12g} at {rate_hz:g} Hz and is unstable; "
            "allowed: below 1. Choose a lower order, a higher cut-off, or resample to a lower rate first."
        )
    return sos


def band_sections(stage: FilterStage, band: Band, rate_hz: float) -> NDArray[np.float64]:
    """Return the sections of one band of a stage, shape (n_sections, 6)."""
    from scipy.signal import iirfilter

    options: dict[str, Any] = {
        "Wn": band.design_hz if len(band.design_hz) == 2 else band.design_hz[0],
        "rp": stage.ripple_db,
        "rs": stage.attenuation_db,
        "btype": band.type,
        "ftype": _FAMILIES[stage.design],
    }
    return np.asarray(iirfilter(stage.order or 0, **options, fs=rate_hz, output="sos"), np.float64)


def largest_radius(sos: NDArray[np.float64]) -> float:
    """Return the largest distance of a pole from 0."""
    return max(float(np.abs(np.roots(section[3:])).max()) for section in sos)


def settling_samples(sos: NDArray[np.float64]) -> int:
    """Return in how many samples the slowest pole decays to 1 % [4]_."""
    # A pole may lie at 0 itself (order 1 at a quarter of the rate): it has settled after one sample.
    return math.ceil(math.log(0.01) / math.log(max(largest_radius(sos), 1e-9)))


def n_taps(stage: FilterStage, rate_hz: float) -> int:
    """Return the length of a fir stage: what its window needs for its transition [5]_ [6]_, made odd.

    An odd length has its middle, and so its delay, on a sample; and it alone can pass Nyquist.
    """
    if stage.window is None:
        attenuation_db = stage.attenuation_db or 0.0
        width = 2 * math.pi * (stage.transition_hz or 0.0) / rate_hz
        length = math.ceil((attenuation_db - 7.95) / (2.285 * width) - _HAIR) + 1
    else:
        share = (stage.transition_hz or 0.0) / rate_hz
        length = math.ceil(TRANSITION_TIMES_LENGTH[stage.window] / share - _HAIR)
    return max(3, length | 1)


@lru_cache(maxsize=64)
def taps(stage: FilterStage, rate_hz: float) -> NDArray[np.float64]:
    """Design a fir stage at a sampling rate: a windowed sinc with gain 1 in the middle of its pass-band.

    Parameters
    ----------
    stage : FilterStage
        What to design; of design fir.
    rate_hz : float
        Sampling rate.

    Returns
    -------
    ndarray, shape (n_taps,)
        Impulse response, symmetric about its middle; odd length; read-only.

    Raises
    ------
    StepError
        If the stage is declared wrongly, or has sections in place of taps.
    """
    from scipy.signal import firwin, kaiser_beta

    check_stage(stage, rate_hz)
    if stage.design != "fir":
        raise StepError(f"filter: {stage} is no fir filter: it has sections in place of taps.")
    window: Any = stage.window or ("kaiser", kaiser_beta(stage.attenuation_db or 0.0))
    length, passed = n_taps(stage, rate_hz), cast("Any", stage.type)
    impulse = firwin(length, stage.cutoff_hz, window=window, pass_zero=passed, fs=rate_hz)
    impulse = np.asarray((impulse + impulse[::-1]) / 2, np.float64)
    impulse.flags.writeable = False
    return impulse


def half_power_ratio(stage: FilterStage) -> float:
    """Return where the prototype of cut-off 1 rad/s falls to half power, all passes of the stage counted.

    Butterworth's has a closed form [3]_: (2^(1/passes) - 1)^(1/(2 order)). Bessel's is searched for.
    """
    order = stage.order or 0
    if stage.design == "butterworth":
        return float((2 ** (1 / stage.passes) - 1) ** (1 / (2 * order)))
    return _bessel_ratio(order, stage.passes)


@lru_cache(maxsize=64)
def _bessel_ratio(order: int, passes: int) -> float:
    """Halve the bracket on Bessel's prototype, whose gain falls steadily, until its ends are neighbours."""
    from scipy.signal import besselap

    _, poles, gain = besselap(order, norm="mag")
    passed, stopped = 0.0, 2.0
    while passed < (middle := (passed + stopped) / 2) < stopped:
        power = (abs(gain) / float(np.prod(np.abs(1j * middle - poles)))) ** (2 * passes)
        passed, stopped = (middle, stopped) if power >= 0.5 else (passed, middle)
    return passed


def _moved(stage: FilterStage, band: Band, rate_hz: float) -> Band:
    """Move the cut-offs of a design so that the applied half power lies at the requested ones [3]_.

    On the pre-warped axis a low-pass moves by 1 / ratio, a high-pass by ratio; a band keeps its centre, and its
    width moves as its low-pass or, for a stopped band, as its high-pass does.
    """
    ratio = half_power_ratio(stage)
    warped = [math.tan(math.pi * edge_hz / rate_hz) for edge_hz in band.requested_hz]
    if band.type == "lowpass":
        moved = [warped[0] / ratio]
    elif band.type == "highpass":
        moved = [warped[0] * ratio]
    else:
        factor = ratio if band.type == "bandstop" else 1 / ratio
        moved = _edges_about(warped[0] * warped[1], factor * (warped[1] - warped[0]))
    design_hz = tuple(rate_hz / math.pi * math.atan(edge) for edge in moved)
    limit_hz = LARGEST_SHARE_OF_NYQUIST * rate_hz / 2
    if design_hz[-1] >= limit_hz:
        raise StepError(
            f"filter: {stage}, corrected for its second pass, needs a design cut-off of {design_hz[-1]:g} Hz; "
            f"allowed: below {limit_hz:g} Hz (0.98 of Nyquist). Lower the cut-off or keep a higher rate."
        )
    return Band(band.type, band.requested_hz, design_hz)


def _notch_band(stage: FilterStage, centre_hz: float, rate_hz: float) -> Band:
    """Return the band-stop whose zero lies at `centre_hz` and whose applied width is that of the notch [4]_.

    The bilinear transform keeps the zero at the square root of the product of the pre-warped edges, and a digital
    width d at a pre-warped one of (1 + centre^2) tan(pi d / rate).
    """
    square = math.tan(math.pi * centre_hz / rate_hz) ** 2
    width = (1 + square) * math.tan(math.pi * (stage.width_hz or 0.0) / rate_hz)
    requested_hz, design_hz = (
        tuple(rate_hz / math.pi * math.atan(edge) for edge in _edges_about(square, factor * width))
        for factor in (1.0, half_power_ratio(stage))
    )
    return Band("bandstop", requested_hz, design_hz)


def _edges_about(square: float, width: float) -> list[float]:
    """Return the two positive numbers whose product is `square` and whose difference is `width`."""
    upper = (math.sqrt(width**2 + 4 * square) + width) / 2
    return [square / upper, upper]
