"""ECG: intervals with two rhythms, and a wave that runs round a circle once a beat."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.demo.noise import frequencies, mains

if TYPE_CHECKING:
    from numpy.typing import NDArray

LF_HZ, HF_HZ, WIDTH_HZ = 0.1, 0.25, 0.01

# McSharry et al. (2003), Table 1: P, Q, R, S, T (from memory).
_ANGLE = np.array([-np.pi / 3, -np.pi / 12, 0, np.pi / 12, np.pi / 2])
_HEIGHT = np.array([1.2, -5.0, 30.0, -7.5, 0.75])
_WIDTH = np.array([0.25, 0.1, 0.1, 0.1, 0.4])
# The model's R wave is about 0.04 high at 65 beats a minute; a lead II shows about 1 mV (common practice).
_UV_PER_UNIT = 25_000.0
_BREATHING_UV = 80.0
_MAINS_UV = 25.0
_NOISE_UV = 8.0


@dataclass(frozen=True, slots=True)
class HeartModel:
    """The expected intervals of one recording's heart.

    Attributes
    ----------
    rate_per_min : float
        Beats over time.
    sdnn_ms : float
        Standard deviation of the intervals between beats.
    lf_hf_ratio : float
        Power of the intervals round 0.1 Hz over that round 0.25 Hz.
    """

    rate_per_min: float
    sdnn_ms: float
    lf_hf_ratio: float

    @property
    def mean_nn_s(self) -> float:
        """Mean interval in seconds."""
        return 60 / self.rate_per_min

    @property
    def lf_ms2(self) -> float:
        """Power of the intervals round 0.1 Hz."""
        return self.sdnn_ms**2 * self.lf_hf_ratio / (1 + self.lf_hf_ratio)

    @property
    def hf_ms2(self) -> float:
        """Power of the intervals round 0.25 Hz."""
        return self.sdnn_ms**2 / (1 + self.lf_hf_ratio)


def expected_rmssd_ms(model: HeartModel) -> float:
    """Return the root mean square of successive differences in ms.

    Two neighbours are one mean interval apart, so each frequency f adds 2 S(f) (1 - cos(2 pi f NN)); over a
    Gaussian peak the cosine keeps exp(-2 (pi width NN)^2) of itself.
    """
    kept = np.exp(-2 * (np.pi * WIDTH_HZ * model.mean_nn_s) ** 2)
    lf, hf = (2 * (1 - kept * np.cos(2 * np.pi * f_hz * model.mean_nn_s)) for f_hz in (LF_HZ, HF_HZ))
    return float(np.sqrt(lf * model.lf_ms2 + hf * model.hf_ms2))


def intervals(
    rng: np.random.Generator, model: HeartModel, length_s: int, rate_hz: int
) -> NDArray[np.float64]:
    """Return RR(t) in seconds, shape (length_s * rate_hz,): the mean with a low and a high rhythm.

    The power of each frequency is fixed and its phase is random, as in the source. Departures: the interval
    from beat to beat is the mean of RR(t) over it, which weakens a rhythm of f by sinc(f NN), so RR(t) is
    made stronger by as much; and RR(t) is scaled so that the beats over time are exactly the model's.

    References
    ----------
    McSharry PE, Clifford GD, Tarassenko L, Smith LA (2003) A dynamical model for generating synthetic
    electrocardiogram signals. IEEE Trans Biomed Eng 50:289-294: a bimodal spectrum of two Gaussians.
    """
    n_samples = length_s * rate_hz
    frequency_hz = frequencies(n_samples, rate_hz)
    peaks = sum(
        power * np.exp(-0.5 * ((frequency_hz - centre_hz) / WIDTH_HZ) ** 2)
        for power, centre_hz in ((model.lf_ms2, LF_HZ), (model.hf_ms2, HF_HZ))
    )
    density = 1e-6 * peaks / (WIDTH_HZ * np.sqrt(2 * np.pi)) / np.sinc(frequency_hz * model.mean_nn_s) ** 2
    amplitude = np.sqrt(2 * density / length_s)
    phase = rng.uniform(0, 2 * np.pi, frequency_hz.size)
    variation = np.fft.irfft(amplitude * np.exp(1j * phase) * n_samples / 2, n_samples)
    rr_s = model.mean_nn_s + variation - variation.mean()
    return np.asarray(rr_s * model.mean_nn_s * np.mean(1 / rr_s))


def phase_of(rr_s: NDArray[np.float64], rate_hz: int) -> NDArray[np.float64]:
    """Return the angle of the beat in radians, shape of `rr_s`, growing by 2 pi a beat; R waves at 2 pi k."""
    advance = 2 * np.pi / (rr_s * rate_hz)
    return np.cumsum(advance) - np.pi


def beat_times(rr_s: NDArray[np.float64], rate_hz: int) -> NDArray[np.float64]:
    """Return the seconds at which the phase passes multiples of 2 pi, shape (n_beats,)."""
    phase = phase_of(rr_s, rate_hz)
    turns = 2 * np.pi * np.arange(np.ceil(phase[0] / (2 * np.pi)), phase[-1] / (2 * np.pi))
    return np.interp(turns, phase, np.arange(len(phase)) / rate_hz)


def ecg(rng: np.random.Generator, model: HeartModel, length_s: int, rate_hz: int) -> NDArray[np.float64]:
    """Return an ECG with breathing, mains hum and noise in uV, shape (length_s * rate_hz,).

    On the limit cycle of the source the phase is known, and its third equation is linear in z,
    dz/dt = -sum a d exp(-d^2 / 2 b^2) - (z - z0), d being the distance from each wave's angle: a recursive
    filter with a time constant of 1 s solves it. The heart beats for 4 s before the recording starts.

    References
    ----------
    McSharry et al. (2003), equation 1 and Table 1 (see `intervals`). The height in uV, the breathing that
    moves the baseline, hum and noise are common practice.
    """
    from scipy.signal import lfilter

    n_samples = length_s * rate_hz
    rr_s = intervals(rng, model, length_s, rate_hz)
    # RR(t) is periodic: its own end leads up to its start without a step.
    lead = min(4 * rate_hz, n_samples)
    phase = np.concatenate([phase_of(rr_s[-lead:], rate_hz), phase_of(rr_s, rate_hz)])
    phase[:lead] += phase[lead] - phase[lead - 1] - 2 * np.pi / (rr_s[0] * rate_hz)
    keep = np.exp(-1 / rate_hz)
    wave = lfilter([1 - keep], [1, -keep], _push(phase))[lead:]
    breathing = _BREATHING_UV * np.sin(2 * np.pi * HF_HZ * np.arange(n_samples) / rate_hz + rng.uniform(0, 6))
    noise = _NOISE_UV * rng.standard_normal(n_samples)
    return _UV_PER_UNIT * wave + breathing + noise + mains(rng, _MAINS_UV, n_samples, rate_hz)


def _push(phase: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return what the five waves add to dz/dt, shape of `phase`."""
    total = np.zeros_like(phase)
    for angle, height, width in zip(_ANGLE, _HEIGHT, _WIDTH, strict=True):
        distance = np.mod(phase - angle + np.pi, 2 * np.pi) - np.pi
        total -= height * distance * np.exp(-0.5 * (distance / width) ** 2)
    return total
