"""Surface EMG: a contraction whose spectrum slides down as the muscle tires."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.demo.noise import frequencies, gaussian_noise, mains

if TYPE_CHECKING:
    from numpy.typing import NDArray

# Shwedyk et al. (1977) with f_h = 2 f_l: f_l 60 Hz gives a median of 95.70789 Hz, and all scales alike.
_LOW_CORNER_PER_MEDIAN = 60 / 95.70789
_REST_UV = 3.0
_MAINS_UV = 8.0


@dataclass(frozen=True, slots=True)
class MuscleModel:
    """The expected contraction of one recording.

    Attributes
    ----------
    median_start_hz : float
        Median frequency of the unfiltered spectrum where the contraction starts.
    median_slope_hz_per_s : float
        Its change a second.
    rms_uv : float
        Root mean square at the start.
    rms_rise : float
        Relative growth of the root mean square to the end.
    """

    median_start_hz: float
    median_slope_hz_per_s: float
    rms_uv: float
    rms_rise: float


@dataclass(frozen=True, slots=True)
class Contraction:
    """When the muscle works, in seconds from the start of the recording."""

    start_s: float
    stop_s: float


def density(median_hz: NDArray[np.float64], frequency_hz: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return spectra of unit power with the given medians in 1/Hz, shape (n_medians, n_frequencies).

    P(f) = k f_h^4 f^2 / ((f^2 + f_l^2) (f^2 + f_h^2)^2), whose integral without k f_h^4 is
    pi / (4 f_h (f_l + f_h)^2). Fibres that conduct more slowly scale f_l and f_h, hence the median, alike.

    References
    ----------
    Shwedyk E, Balasubramanian R, Scott RN (1977) A nonstationary model for the electromyogram.
    IEEE Trans Biomed Eng 24:417-424.
    Stulen FB, De Luca CJ (1981) Frequency parameters of the myoelectric signal as a measure of muscle
    conduction velocity. IEEE Trans Biomed Eng 28:515-523.
    """
    low_hz = _LOW_CORNER_PER_MEDIAN * median_hz[:, None]
    high_hz = 2 * low_hz
    squared = frequency_hz**2
    scale = 4 * high_hz * (low_hz + high_hz) ** 2 / np.pi
    return scale * squared / ((squared + low_hz**2) * (squared + high_hz**2) ** 2)


def emg(
    rng: np.random.Generator, model: MuscleModel, work: Contraction, length_s: int, rate_hz: int
) -> NDArray[np.float64]:
    """Return an EMG at rest, contracting during `work` and at rest again, in uV, shape (length_s * rate_hz,).

    Overlapping half-second frames of Gaussian noise, each with the spectrum of its own centre; sine windows,
    whose squares add up to one, blend them. The median falls linearly with time (common practice for a
    sustained contraction), and the root mean square grows linearly.
    """
    n_samples = length_s * rate_hz
    hop = rate_hz // 4
    centre_s = np.arange(n_samples // hop + 1) * hop / rate_hz
    frames = _frames(rng, _frame_density(model, work, centre_s, 2 * hop, rate_hz), rate_hz)
    samples = np.zeros((len(centre_s) + 1) * hop)
    samples[:-hop] = frames[:, :hop].ravel()
    samples[hop:] += frames[:, hop:].ravel()
    rest = _REST_UV * rng.standard_normal(n_samples)
    return samples[hop : hop + n_samples] + rest + mains(rng, _MAINS_UV, n_samples, rate_hz)


def _frame_density(
    model: MuscleModel, work: Contraction, centre_s: NDArray[np.float64], width: int, rate_hz: int
) -> NDArray[np.float64]:
    """Return uV^2/Hz for each frame; one that reaches into the work is of it, so the work starts whole."""
    since_s = np.clip(centre_s - work.start_s, 0, work.stop_s - work.start_s)
    rms_uv = model.rms_uv * (1 + model.rms_rise * since_s / (work.stop_s - work.start_s))
    reach_s = width / rate_hz / 2
    rms_uv[(centre_s < work.start_s - reach_s) | (centre_s > work.stop_s + reach_s)] = 0
    median_hz = model.median_start_hz + model.median_slope_hz_per_s * since_s
    return np.asarray(rms_uv[:, None] ** 2 * density(median_hz, frequencies(width, rate_hz)))


def _frames(
    rng: np.random.Generator, frame_density: NDArray[np.float64], rate_hz: int
) -> NDArray[np.float64]:
    """Return one windowed stretch of noise a row, shape (n_frames, width)."""
    width = 2 * (frame_density.shape[1] - 1)
    window = np.sin(np.pi * (np.arange(width) + 0.5) / width)
    return np.asarray(window * gaussian_noise(rng, frame_density, width, rate_hz))
