"""One-sided power density by Welch's averaged periodograms, or by a single one.

References
----------
.. [1] Welch P.D. (1967) The use of fast Fourier transform for the estimation of power spectra.
   IEEE Trans. Audio Electroacoust. 15, 70-73.
.. [2] Harris F.J. (1978) On the use of windows for harmonic analysis with the discrete Fourier transform.
   Proc. IEEE 66, 51-83.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING, Literal

import numpy as np

from bandcairn.errors import StepError

if TYPE_CHECKING:
    from numpy.typing import NDArray

Method = Literal["periodogram", "welch"]
Window = Literal["hann", "hamming", "blackman", "boxcar"]
Detrend = Literal["none", "constant", "linear"]

# Coefficients of sums of cosines with alternating sign [2]_.
_COSINES: dict[str, tuple[float, ...]] = {
    "hann": (0.5, 0.5),
    "hamming": (0.54, 0.46),
    "blackman": (0.42, 0.5, 0.08),
    "boxcar": (1.0,),
}
# Samples transformed at once: 256 kB and as much again for the result, so that a core's own cache holds both.
_SAMPLES_AT_ONCE = 32_768


@dataclass(frozen=True, slots=True)
class Spectrum:
    """Power densities on one grid of frequencies.

    Attributes
    ----------
    frequencies_hz : ndarray, shape (n_freq,)
        From 0 in steps of one over the segment's length.
    density : ndarray, shape (..., n_freq)
        Unit of the samples squared per Hz, one-sided: it integrates to the variance over 0 .. Nyquist.
    """

    frequencies_hz: NDArray[np.float64]
    density: NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class _Segments:
    """How the samples are cut: `count` segments of `length` samples, `step` apart."""

    length: int
    step: int
    count: int


def power_density(
    samples: NDArray[np.float64],
    rate_hz: float,
    *,
    method: Method,
    window: Window,
    segment_s: float | None = None,
    overlap: float | None = None,
    detrend: Detrend = "constant",
) -> Spectrum:
    """Estimate the one-sided power density of stretches of samples.

    Parameters
    ----------
    samples : ndarray, shape (..., n)
        Finite; not modified.
    rate_hz : float
        Sampling rate.
    method : {"periodogram", "welch"}
        One segment as long as the stretch, or the mean over overlapping segments [1]_.
    window : {"hann", "hamming", "blackman", "boxcar"}
        Taper of each segment.
    segment_s, overlap : float or None
        Length of a segment in seconds, rounded to whole samples, and the share that neighbours have in
        common; both are required by welch and refused by periodogram. Samples after the last whole segment
        are not used.
    detrend : {"none", "constant", "linear"}
        What is taken off each segment: nothing, its mean, or its least-squares line.

    Returns
    -------
    Spectrum
        Frequency 0 and, in segments of an even length, Nyquist are not doubled: they have no mirror image.

    Raises
    ------
    StepError
        If a segment is longer than the stretch (it is never shortened: the resolution of a study would differ
        from stretch to stretch), shorter than 2 samples, or a parameter does not fit the method.
    """
    cut = _segments(samples.shape[-1], rate_hz, method, segment_s, overlap)
    return _averaged(samples, rate_hz, cut, window, detrend)


def window(name: Window, n: int) -> NDArray[np.float64]:
    """Return a window of n samples in its periodic (DFT-even) form, without the sample that would close it.

    Parameters
    ----------
    name : {"hann", "hamming", "blackman", "boxcar"}
        Kind of window.
    n : int
        Number of samples, at least 1.

    Returns
    -------
    ndarray, shape (n,)
        Sum over k of (-1)^k a_k cos(2 pi k i / n) with the coefficients of [2]_.
    """
    turns = 2 * np.pi / n * np.arange(n)
    return sum(
        ((-1) ** k * share * np.cos(k * turns) for k, share in enumerate(_COSINES[name])), start=np.zeros(n)
    )


def segment_count(n: int, segment: int, step: int) -> int:
    """Return how many whole segments of `segment` samples, `step` apart, fit into n samples."""
    return (n - segment) // step + 1 if n >= segment else 0


def _segments(
    n: int, rate_hz: float, method: Method, segment_s: float | None, overlap: float | None
) -> _Segments:
    """Turn seconds and shares into samples, or refuse what does not fit."""
    if method == "periodogram":
        if segment_s is not None or overlap is not None:
            raise StepError(
                "spectrum: a periodogram is one segment; remove segment_s and overlap, or choose welch."
            )
        length, step = n, n
    else:
        if segment_s is None or overlap is None or not 0 <= overlap < 1:
            raise StepError(
                f"spectrum: found segment_s {segment_s} and overlap {overlap}; welch needs a segment in "
                "seconds and an overlap of 0 up to, but below, 1."
            )
        length, step = _samples(segment_s, rate_hz, overlap)
    if not 2 <= length <= n:
        raise StepError(
            f"spectrum: found a segment of {length} samples ({length / rate_hz:g} s) in a stretch of {n} "
            f"({n / rate_hz:g} s); allowed: 2 samples up to the stretch. Choose longer epochs or shorter "
            "segments."
        )
    return _Segments(length, step, segment_count(n, length, step))


def _samples(segment_s: float, rate_hz: float, overlap: float) -> tuple[int, int]:
    """Return a segment's length and the step to the next one in samples, by the rounding rule of epochs."""
    length = round(Fraction(str(segment_s)) * Fraction(rate_hz).limit_denominator(10**9))
    return length, max(1, round(length * (1 - Fraction(str(overlap)))))


def _averaged(
    samples: NDArray[np.float64], rate_hz: float, cut: _Segments, taper: Window, detrend: Detrend
) -> Spectrum:
    """Average the periodograms of the segments of every stretch."""
    weights = window(taper, cut.length)
    leading, n_freq = samples.shape[:-1], cut.length // 2 + 1
    density = np.zeros((*leading, n_freq))
    sheets, sums = np.atleast_2d(samples), np.atleast_2d(density)
    # Sheet by sheet, for to flatten the leading axes would copy a view of overlapping epochs.
    for sheet in np.ndindex(sheets.shape[:-2]):
        _add_power(sheets[sheet], cut, weights, detrend, sums[sheet])
    density *= 1 / (rate_hz * np.dot(weights, weights) * cut.count)
    # An even length puts its last bin on Nyquist; an odd one has none there.
    density[..., 1 : (cut.length + 1) // 2] *= 2
    return Spectrum(np.arange(n_freq, dtype=np.float64) * (rate_hz / cut.length), density)


def _add_power(
    stretches: NDArray[np.float64],
    cut: _Segments,
    weights: NDArray[np.float64],
    detrend: Detrend,
    power: NDArray[np.float64],
) -> None:
    """Add to `power`, shape (n_stretches, n_freq), the squared spectra of all segments of each stretch."""
    segments = np.lib.stride_tricks.sliding_window_view(stretches, cut.length, axis=-1)[:, :: cut.step]
    rows = max(1, _SAMPLES_AT_ONCE // (cut.count * cut.length))
    columns = min(cut.count, max(1, _SAMPLES_AT_ONCE // cut.length))
    # Both are used again for every block: fresh memory costs more than the transform.
    tapered = np.empty((rows, columns, cut.length))
    spectra = np.empty((rows, columns, cut.length // 2 + 1), np.complex128)
    for row in range(0, len(stretches), rows):
        for column in range(0, cut.count, columns):
            block = segments[row : row + rows, column : column + columns]
            here = np.s_[: block.shape[0], : block.shape[1]]
            _taper(block, weights, detrend, tapered[here])
            np.fft.rfft(tapered[here], out=spectra[here])
            # Real and imaginary parts lie side by side: squared and summed without a temporary array.
            parts = spectra[here].view(np.float64)
            squares = np.einsum("rsf,rsf->rf", parts, parts)
            power[row : row + rows] += squares[:, ::2] + squares[:, 1::2]


def _taper(
    segments: NDArray[np.float64],
    weights: NDArray[np.float64],
    detrend: Detrend,
    tapered: NDArray[np.float64],
) -> None:
    """Fill `tapered` with the segments, without their trend, times the window."""
    if detrend == "none":
        np.multiply(segments, weights, out=tapered)
        return
    np.subtract(segments, segments.mean(axis=-1, keepdims=True), out=tapered)
    if detrend == "linear":
        # About the middle, offset and slope of the least-squares line are found apart.
        time = np.arange(segments.shape[-1]) - (segments.shape[-1] - 1) / 2
        slope = tapered @ (time / np.dot(time, time))
        tapered -= slope[..., np.newaxis] * time
    tapered *= weights
