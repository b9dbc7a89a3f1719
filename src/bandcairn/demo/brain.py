"""EEG: a scale-free background with rhythms on it, and what spoils it."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.demo.noise import frequencies, gaussian_noise, mains

if TYPE_CHECKING:
    from numpy.typing import NDArray

CHANNELS = ("Fz", "Cz", "Pz", "Oz")

# Below this the background is level, as behind an amplifier coupled by a capacitor.
_LEVEL_BELOW_HZ = 0.5
_MAINS_UV = 3.0
# How much neighbours on the midline share, falling with each step between them: background, rhythm.
_BACKGROUND_SHARED, _ALPHA_SHARED = 0.6, 0.85
# Blinks fade from the forehead to the back of the head; a movement pulls at every electrode.
_BLINK_WEIGHTS = np.array([1.0, 0.5, 0.15, 0.08])
_MOVEMENT_WEIGHTS = np.array([0.9, 1.0, 1.1, 1.2])


@dataclass(frozen=True, slots=True)
class Rhythm:
    """Narrow-band Gaussian noise: a Gaussian peak in the spectrum.

    Attributes
    ----------
    centre_hz, width_hz : float
        Mean and standard deviation of the peak.
    power_uv2 : tuple of float
        Area of the peak in each of `CHANNELS`.
    """

    centre_hz: float
    width_hz: float
    power_uv2: tuple[float, ...]


@dataclass(frozen=True, slots=True)
class EegModel:
    """The expected spectrum of one recording's EEG.

    Attributes
    ----------
    background_uv2_per_hz : float
        Density of the background at 1 Hz.
    exponent : float
        The background falls as 1/f^exponent.
    theta, alpha, beta : Rhythm
        The peaks on it.
    """

    background_uv2_per_hz: float
    exponent: float
    theta: Rhythm
    alpha: Rhythm
    beta: Rhythm


def background_density(model: EegModel, frequency_hz: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the scale-free part in uV^2/Hz, shape of `frequency_hz`.

    References
    ----------
    He BJ (2014) Scale-free brain activity: past, present, and future. Trends Cogn Sci 18:480-487
    (from memory). The exponent near 1.2 is common practice for waking EEG.
    """
    return model.background_uv2_per_hz * np.maximum(frequency_hz, _LEVEL_BELOW_HZ) ** -model.exponent


def rhythm_density(rhythm: Rhythm, frequency_hz: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return one peak in uV^2/Hz, shape (n_channels, n_frequencies).

    References
    ----------
    Lopes da Silva FH, Hoeks A, Smits H, Zetterberg LH (1974) Model of brain rhythmic activity: the
    alpha-rhythm of the thalamus. Kybernetik 15:27-37 (from memory): alpha as filtered noise. The Gaussian
    shape of the peak is common practice.
    """
    distance = (frequency_hz - rhythm.centre_hz) / rhythm.width_hz
    peak = np.exp(-0.5 * distance**2) / (rhythm.width_hz * np.sqrt(2 * np.pi))
    return np.outer(rhythm.power_uv2, peak)


def density(model: EegModel, frequency_hz: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return background and rhythms together in uV^2/Hz, shape (n_channels, n_frequencies)."""
    peaks = sum(rhythm_density(rhythm, frequency_hz) for rhythm in (model.theta, model.alpha, model.beta))
    return background_density(model, frequency_hz) + peaks


def band_power(model: EegModel, low_hz: float, high_hz: float) -> NDArray[np.float64]:
    """Return the model's power in a band in uV^2, shape (n_channels,), by the trapezoid rule on 0.01 Hz."""
    grid_hz = np.linspace(low_hz, high_hz, round((high_hz - low_hz) * 100) + 1)
    return np.asarray(np.trapezoid(density(model, grid_hz), grid_hz, axis=1), dtype=np.float64)


def relative_variance(model: EegModel, low_hz: float, high_hz: float, length_s: float) -> NDArray[np.float64]:
    """Return the variance of a band power measured over `length_s`, relative to its square.

    For Gaussian noise it is the integral of the squared density, over the length and the squared integral;
    shape (n_channels,).

    References
    ----------
    Bendat JS, Piersol AG, Random Data, chapter on statistical errors (from memory).
    """
    grid_hz = np.linspace(low_hz, high_hz, round((high_hz - low_hz) * 100) + 1)
    squared = np.trapezoid(density(model, grid_hz) ** 2, grid_hz, axis=1)
    return squared / (length_s * band_power(model, low_hz, high_hz) ** 2)


def scale_alpha_band(model: EegModel, ratio: NDArray[np.float64]) -> EegModel:
    """Return the model with its power from 8 to 13 Hz multiplied by `ratio`, shape (n_channels,).

    Only the alpha rhythm changes: background and neighbours stay, so the rhythm itself changes by more.
    """
    whole = band_power(model, 8, 13)
    others = band_power(replace(model, alpha=replace(model.alpha, power_uv2=(0.0,) * len(CHANNELS))), 8, 13)
    factor = (ratio * whole - others) / (whole - others)
    power_uv2 = tuple(float(power) for power in np.array(model.alpha.power_uv2) * factor)
    return replace(model, alpha=replace(model.alpha, power_uv2=power_uv2))


def eeg(rng: np.random.Generator, model: EegModel, length_s: int, rate_hz: int) -> NDArray[np.float64]:
    """Return an EEG with mains hum and without artefacts, in uV, shape (n_channels, length_s * rate_hz)."""
    n_samples = length_s * rate_hz
    frequency_hz = frequencies(n_samples, rate_hz)
    alpha = rhythm_density(model.alpha, frequency_hz)
    rest = density(model, frequency_hz) - alpha
    samples = gaussian_noise(rng, rest, n_samples, rate_hz, _mixing(_BACKGROUND_SHARED))
    samples += gaussian_noise(rng, alpha, n_samples, rate_hz, _mixing(_ALPHA_SHARED))
    return samples + mains(rng, _MAINS_UV, n_samples, rate_hz)


def add_blinks(rng: np.random.Generator, samples: NDArray[np.float64], rate_hz: int, count: int) -> None:
    """Add `count` blinks of 180 to 280 uV at Fz to `samples`, shape (n_channels, n_samples), in place.

    A blink is a raised cosine of 0.4 s: smooth, so that it leaves the alpha band alone. Height, length and
    decay over the scalp are common practice.
    """
    _add_bumps(rng, samples, round(0.4 * rate_hz), rng.uniform(180, 280, count), _BLINK_WEIGHTS)


def add_movements(rng: np.random.Generator, samples: NDArray[np.float64], rate_hz: int, count: int) -> None:
    """Add `count` movements to all channels in place: raised cosines of 1.5 s, 200 to 320 uV either way."""
    heights = rng.uniform(200, 320, count) * rng.choice([-1.0, 1.0], count)
    _add_bumps(rng, samples, round(1.5 * rate_hz), heights, _MOVEMENT_WEIGHTS)


def _add_bumps(
    rng: np.random.Generator,
    samples: NDArray[np.float64],
    width: int,
    heights_uv: NDArray[np.float64],
    weights: NDArray[np.float64],
) -> None:
    bump = np.outer(weights, np.hanning(width))
    starts = rng.integers(0, samples.shape[1] - width, len(heights_uv))
    for start, height_uv in zip(starts, heights_uv, strict=True):
        samples[:, start : start + width] += height_uv * bump


def _mixing(shared: float) -> NDArray[np.float64]:
    """Return rows of unit length whose products are `shared` to the power of the electrodes' distance."""
    position = np.arange(len(CHANNELS))
    return np.linalg.cholesky(shared ** np.abs(position[:, None] - position))
