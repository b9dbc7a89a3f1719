"""Gaussian noise of a given power density, the raw material of every channel."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray


def frequencies(n_samples: int, rate_hz: float) -> NDArray[np.float64]:
    """Return the frequencies in Hz, shape (n_samples // 2 + 1,), at which `gaussian_noise` is shaped."""
    return np.asarray(np.fft.rfftfreq(n_samples, 1 / rate_hz), dtype=np.float64)


def gaussian_noise(
    rng: np.random.Generator,
    density: NDArray[np.float64],
    n_samples: int,
    rate_hz: float,
    mixing: NDArray[np.float64] | None = None,
) -> NDArray[np.float64]:
    """Return stationary Gaussian noise whose expected one-sided power density is `density`.

    Independent complex Gaussian Fourier coefficients are scaled by the density and transformed back; the
    noise is periodic in `n_samples`. It is not normalised to its own variance: a planted power holds in
    expectation, and a finite stretch scatters round it as a measured one does.

    Parameters
    ----------
    rng : Generator
        Source of randomness.
    density : ndarray, shape (n_rows, n_samples // 2 + 1)
        In uV^2/Hz at `frequencies(n_samples, rate_hz)`; the constant term is left out.
    n_samples : int
        Length.
    rate_hz : float
        Sampling rate.
    mixing : ndarray, shape (n_rows, n_rows), optional
        Rows of unit length: makes the rows alike, as volume conduction does, without changing their power.

    Returns
    -------
    ndarray, shape (n_rows, n_samples)
        In uV.
    """
    pairs = rng.standard_normal((2, *density.shape))
    coefficients = np.empty(density.shape, dtype=np.complex128)
    coefficients.real, coefficients.imag = pairs
    if mixing is not None:
        coefficients = mixing @ coefficients
    # E|X|^2 = density * rate * n / 2 in one-sided terms, and a pair of unit normals has E|z|^2 = 2.
    coefficients *= np.sqrt(density * (rate_hz * n_samples / 4))
    coefficients[:, 0] = 0
    return np.fft.irfft(coefficients, n_samples, axis=1)


def mains(
    rng: np.random.Generator, amplitude_uv: float, n_samples: int, rate_hz: float
) -> NDArray[np.float64]:
    """Return a 50 Hz sine in uV of random phase, shape (n_samples,)."""
    phase = rng.uniform(0, 2 * np.pi)
    turns = 50 / rate_hz * np.arange(n_samples)
    return np.asarray(amplitude_uv * np.sin(2 * np.pi * turns + phase))
