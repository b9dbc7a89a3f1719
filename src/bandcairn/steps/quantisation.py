"""The steps of voltage and time in which a recorder counts, and the noise that they leave."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from bandcairn.steps.band import band_power

if TYPE_CHECKING:
    from bandcairn.steps.spectrum import Spectrum


def noise_density(step_uv: float, rate_hz: float) -> float:
    """Return the density of quantisation noise, one-sided, in uV^2/Hz.

    Rounding to steps adds an error of variance step^2/12, spread evenly over 0 to Nyquist as long as the signal
    moves by more than a step from sample to sample.

    Parameters
    ----------
    step_uv : float
        Size of a step.
    rate_hz : float
        Sampling rate.

    Returns
    -------
    float

    References
    ----------
    Bennett WR (1948) Spectra of quantized signals. Bell Syst Tech J 27:446-472.
    """
    return step_uv**2 / (6 * rate_hz)


def margin_db(
    spectrum: Spectrum, low_hz: float, high_hz: float, step_uv: float, rate_hz: float
) -> float | None:
    """Return how far the mean density of a band lies above quantisation noise, in dB.

    Parameters
    ----------
    spectrum : Spectrum
        Density of the channel as recorded, shape (n_freq,), in uV^2/Hz.
    low_hz, high_hz : float
        The band; what lies beyond the spectrum is left out.
    step_uv, rate_hz : float
        As for `noise_density`, which they give.

    Returns
    -------
    float or None
        None where the band lies beyond the spectrum or holds no power.
    """
    high_hz = min(high_hz, float(spectrum.frequencies_hz[-1]))
    if low_hz >= high_hz:
        return None
    power = float(band_power(spectrum.frequencies_hz, spectrum.density, low_hz, high_hz))
    if power <= 0:
        return None
    return 10 * math.log10(power / (high_hz - low_hz) / noise_density(step_uv, rate_hz))


def rmssd_floor_ms(rate_hz: float) -> float:
    """Return what the grid of sampling times alone adds to RMSSD, in quadrature, in ms.

    A time that is rounded to the grid errs with a variance of 1/(12 rate^2). A difference of two successive intervals
    holds three times, the middle one twice: 1/(2 rate^2). Where peaks are placed between samples less remains.

    Parameters
    ----------
    rate_hz : float
        Sampling rate at which beats are found.

    Returns
    -------
    float
    """
    return 1000 / (rate_hz * math.sqrt(2))
