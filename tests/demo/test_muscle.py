"""The EMG has the spectrum of its model, and it slides as planted."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import integrate, signal

from bandcairn.demo import muscle

RATE_HZ = 1000
WORK = muscle.Contraction(5, 105)


def medians_hz(samples: np.ndarray) -> np.ndarray:
    """Return the frequency that halves the power of each second, from Hann-windowed periodograms."""
    frequency_hz, density = signal.periodogram(samples.reshape(-1, RATE_HZ), RATE_HZ, "hann")
    area = np.cumsum(density, axis=1)
    return np.array([np.interp(row[-1] / 2, row, frequency_hz + 0.5) for row in area])


@pytest.mark.parametrize("median_hz", [60.0, 95.70789, 120.0])
def test_density_has_unit_power_and_the_stated_median(median_hz: float) -> None:
    """Area 1 over all frequencies and 1/2 below the median, by adaptive quadrature."""

    def density(frequency_hz: float) -> float:
        return float(muscle.density(np.array([median_hz]), np.array([frequency_hz]))[0, 0])

    below, _ = integrate.quad(density, 0, median_hz)
    above, _ = integrate.quad(density, median_hz, np.inf)

    # The median of the reference pair is known to seven digits.
    assert below == pytest.approx(0.5, abs=1e-7)
    assert above == pytest.approx(0.5, abs=1e-7)


def test_steady_contraction_has_the_planted_median_and_power() -> None:
    """Without fatigue every second scatters round one median and one root mean square."""
    model = muscle.MuscleModel(100.0, 0.0, 250.0, 0.0)
    samples = muscle.emg(np.random.default_rng(1), model, WORK, 110, RATE_HZ)[5000:105000]

    # One second's median varies by 7 Hz, so the mean of 100 by 0.7. What the model has beyond 500 Hz is
    # lost: 0.3 % of the power, which lowers median by a third of a hertz.
    assert medians_hz(samples).mean() == pytest.approx(100, abs=2.5)
    assert samples.std() == pytest.approx(250, rel=0.02)


def test_fatigue_lowers_the_median_linearly() -> None:
    """The mean slope of many contractions is the planted one, and no curvature remains."""
    model = muscle.MuscleModel(100.0, -0.2, 250.0, 0.15)
    rng = np.random.default_rng(2)
    drawn = [medians_hz(muscle.emg(rng, model, WORK, 110, RATE_HZ)[5000:105000]) for _ in range(30)]
    time_s = np.arange(100) + 0.5
    curvature, slope, start_hz = np.polyfit(time_s - 50, np.mean(drawn, axis=0), 2)

    # Standard errors over 30 contractions: slope 7 / (sqrt(3000) 29) = 0.0045, median 0.2 Hz.
    assert slope == pytest.approx(-0.2, abs=0.018)
    assert start_hz == pytest.approx(90, abs=1.2)
    assert curvature == pytest.approx(0, abs=0.0008)


def test_muscle_is_quiet_outside_the_contraction_and_at_work_from_its_first_sample() -> None:
    """Rest is noise and hum of a few microvolt; the first and last tenth of a second have full power."""
    model = muscle.MuscleModel(100.0, -0.1, 250.0, 0.0)
    samples = muscle.emg(np.random.default_rng(3), model, WORK, 110, RATE_HZ)

    assert samples[:4000].std() < 10
    assert samples[106000:].std() < 10
    assert samples[5000:5100].std() > 150
    assert samples[104900:105000].std() > 150
