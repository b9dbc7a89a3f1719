"""What the study should find: computed from the planted models and the settings, never from a run."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from functools import partial
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.demo import brain, muscle, people
from bandcairn.demo.faults import is_excluded
from bandcairn.demo.heart import WIDTH_HZ, expected_rmssd_ms

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Sequence

    from numpy.typing import NDArray

    from bandcairn.demo.people import Visit

# The settings of study.yaml that move what is recovered.
EMG_RATE_HZ = 1000
EMG_BAND_HZ, EMG_BAND_ORDER = (20.0, 400.0), 4
MAINS_BAND_HZ, MAINS_BAND_ORDER = (48.0, 52.0), 2
ALPHA_HZ, BETA_HZ = (8.0, 13.0), (13.0, 30.0)

# An interval is this many standard errors of measurement either side: 1 in 16,000 falls out by chance.
_MARGIN = 4.0
# The share of an EEG that is left after blinks and movements, at least.
_KEPT_SHARE = 0.6
# Variance of a Hann-windowed periodogram's sums over that without a window: mean w^4 / (mean w^2)^2.
_HANN_EXCESS = 35 / 18


@dataclass(frozen=True, slots=True)
class Measure:
    """What one recording should give, on the question's scale, and the standard deviation of measuring it."""

    value: float
    sd: float


@dataclass(frozen=True, slots=True)
class Plant:
    """What was planted for one question at one channel.

    Attributes
    ----------
    question, channel : str
        As in study.yaml.
    planted : float
        The value of the population, on the question's scale.
    unit : str
        Of the question's estimate.
    planted_as : str
        The plant in plain words.
    """

    question: str
    channel: str
    planted: float
    unit: str
    planted_as: str


@dataclass(frozen=True, slots=True)
class Expectation(Plant):
    """What one question should give at one channel.

    Attributes
    ----------
    realised : float
        The value of the people drawn with this seed whose channels are not excluded: the estimate to expect.
    low, high : float
        Where the estimate must lie: measurement alone moves it from `realised`.
    n_participants : int
        People who count.
    """

    realised: float
    low: float
    high: float
    n_participants: int


def expectations(
    visits: Sequence[Visit], length_s: float, work: muscle.Contraction
) -> tuple[Expectation, ...]:
    """Return what every question of the demo study should give, in the order of study.yaml."""
    return (*_eeg(visits, length_s), *_heart(visits, length_s), *_muscle(visits, work))


def recovered_median_hz(median_hz: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return the median frequency that is left after the study's filters, shape (n_medians,).

    The model's spectrum times the response of both stages, applied forward and backward, halved by area.
    """
    grid_hz = np.arange(0.1, EMG_RATE_HZ / 2, 0.1)
    passed = 1 - butterworth_power(grid_hz, MAINS_BAND_HZ, MAINS_BAND_ORDER)
    passed *= butterworth_power(grid_hz, EMG_BAND_HZ, EMG_BAND_ORDER)
    area = np.cumsum(muscle.density(median_hz, grid_hz) * passed**2, axis=1)
    # A cumulative sum up to a bin reaches half a bin beyond its frequency.
    return np.array([np.interp(row[-1] / 2, row, grid_hz + 0.05) for row in area])


def butterworth_power(
    frequency_hz: NDArray[np.float64], cutoff_hz: tuple[float, float], order: int
) -> NDArray[np.float64]:
    """Return the squared gain of a digital Butterworth band-pass at `EMG_RATE_HZ`, one pass.

    1 / (1 + ((w^2 - w1 w2) / (w (w2 - w1)))^(2 order)) with w = tan(pi f / rate), the bilinear transform; a
    band-stop of the same cut-offs and order has what is left to 1.

    References
    ----------
    Oppenheim AV, Schafer RW, Discrete-Time Signal Processing, filter design (from memory).
    """
    w, w1, w2 = (np.tan(np.pi * np.asarray(f_hz) / EMG_RATE_HZ) for f_hz in (frequency_hz, *cutoff_hz))
    return np.asarray(1 / (1 + ((w**2 - w1 * w2) / (w * (w2 - w1))) ** (2 * order)))


def _eeg(visits: Sequence[Visit], length_s: float) -> Iterator[Expectation]:
    for band, band_hz, ratios in (
        ("alpha", ALPHA_HZ, people.ALPHA_RATIO),
        ("beta", BETA_HZ, (1.0,) * len(brain.CHANNELS)),
    ):
        for row, channel in enumerate(brain.CHANNELS):
            plant = Plant(
                question=f"{band} power, night against day",
                channel=channel,
                planted=float(np.log10(ratios[row])),
                unit="log10(uV^2)",
                planted_as=f"{band} band power at night is {ratios[row]:g} times that by day",
            )
            yield _within(visits, partial(_log10_power, row=row, band_hz=band_hz, length_s=length_s), plant)


def _log10_power(visit: Visit, row: int, band_hz: tuple[float, float], length_s: float) -> Measure:
    power = brain.band_power(visit.eeg, *band_hz)[row]
    variance = brain.relative_variance(visit.eeg, *band_hz, _KEPT_SHARE * length_s)[row]
    return Measure(float(np.log10(power)), float(np.sqrt(variance) / np.log(10)))


def _heart(visits: Sequence[Visit], length_s: float) -> Iterator[Expectation]:
    def rate(visit: Visit) -> Measure:
        # The time before the first and after the last beat is not measured. Intervals vary by about a tenth,
        # so each edge moves the count of beats by up to a twentieth: 0.1 of a beat over the length.
        return Measure(visit.heart.rate_per_min, 60 * 0.1 / length_s)

    def ln_rmssd(visit: Visit) -> Measure:
        # The power of the intervals is planted exactly; finding each beat to 2 ms adds 6 (2 ms)^2 to
        # (40 ms)^2, a hundredth.
        return Measure(float(np.log(expected_rmssd_ms(visit.heart))), 0.01)

    def ln_ratio(visit: Visit) -> Measure:
        # A Gaussian peak's measured power varies by 1 / (2 sqrt(pi) width length) of its square: two peaks.
        variance = 2 / (2 * np.sqrt(np.pi) * WIDTH_HZ * length_s)
        return Measure(float(np.log(visit.heart.lf_hf_ratio)), float(np.sqrt(variance)))

    for measure, plant in zip((rate, ln_rmssd, ln_ratio), _heart_plants(), strict=True):
        yield _within(visits, measure, plant)


def _heart_plants() -> tuple[Plant, Plant, Plant]:
    return (
        Plant(
            question="heart rate, night against day",
            channel="ECG",
            planted=people.HEART_RATE_CHANGE_PER_MIN,
            unit="1/min",
            planted_as=f"{-people.HEART_RATE_CHANGE_PER_MIN:g} beats a minute fewer at night",
        ),
        Plant(
            question="beat-to-beat variability, night against day",
            channel="ECG",
            planted=people.typical_ln_rmssd_change(),
            unit="ln(ms)",
            planted_as="follows from LF/HF and heart rate: power moves to the faster rhythm at night",
        ),
        Plant(
            question="LF/HF ratio, night against day",
            channel="ECG",
            planted=float(np.log(people.LF_HF_RATIO_RATIO)),
            unit="ln(1)",
            planted_as=f"LF/HF at night is {people.LF_HF_RATIO_RATIO:g} times that by day",
        ),
    )


def _muscle(visits: Sequence[Visit], work: muscle.Contraction) -> Iterator[Expectation]:
    trends = {visit.recording: _recovered_trend(visit, work) for visit in visits}
    by_group, within_slope, within_start = _muscle_plants()
    yield _between(visits, lambda visit: trends[visit.recording].slope, by_group)
    yield _within(visits, lambda visit: trends[visit.recording].slope, within_slope)
    yield _within(visits, lambda visit: trends[visit.recording].start, within_start)


def _muscle_plants() -> tuple[Plant, Plant, Plant]:
    slope = people.MEDIAN_SLOPE_HZ_PER_S
    return (
        Plant(
            question="fatigue, boat against quay",
            channel="EMG",
            planted=slope["boat"] - slope["quay"],
            unit="Hz/s",
            planted_as=f"boat {slope['boat']:.2f} Hz/s, quay {slope['quay']:.2f} Hz/s before filtering",
        ),
        Plant(
            question="fatigue, night against day",
            channel="EMG",
            planted=0.0,
            unit="Hz/s",
            planted_as="a person tires alike by day and by night",
        ),
        Plant(
            question="starting frequency, night against day",
            channel="EMG",
            planted=0.0,
            unit="Hz",
            planted_as="no difference but the chance of the watch",
        ),
    )


@dataclass(frozen=True, slots=True)
class _Trend:
    """Intercept in Hz and slope in Hz/s of the median frequency over the contraction."""

    start: Measure
    slope: Measure


def _recovered_trend(visit: Visit, work: muscle.Contraction) -> _Trend:
    """Return the least-squares line through the medians of epochs of 1 s, after the study's filters."""
    length_s = work.stop_s - work.start_s
    time_s = np.linspace(0, length_s, 21)
    median_hz = visit.muscle.median_start_hz + visit.muscle.median_slope_hz_per_s * time_s
    slope, start = np.polyfit(time_s, recovered_median_hz(median_hz), 1)
    # Of a line through many points evenly spread over a length, from one epoch a second.
    start_sd = 2 * _epoch_median_sd_hz(float(median_hz.mean())) / np.sqrt(length_s)
    slope_sd = start_sd * np.sqrt(3) / length_s
    return _Trend(Measure(float(start), float(start_sd)), Measure(float(slope), float(slope_sd)))


def _epoch_median_sd_hz(median_hz: float) -> float:
    """Return the standard deviation of the median of one Hann-windowed second.

    An error of the areas on both sides, each of variance integral P^2 over the length, moves the median by
    half their difference over P(median): first-order error propagation.
    """
    grid_hz = np.arange(0.0, EMG_RATE_HZ / 2, 0.1)
    spectrum = muscle.density(np.array([median_hz]), grid_hz)[0]
    at_median = np.interp(median_hz, grid_hz, spectrum)
    return float(np.sqrt(_HANN_EXCESS * np.trapezoid(spectrum**2, grid_hz)) / (2 * at_median))


def _within(visits: Sequence[Visit], measure: Callable[[Visit], Measure], plant: Plant) -> Expectation:
    """Return night minus day, averaged over the people who have both."""
    kept = [pair for pair in _by_person(visits, plant.channel) if len(pair) == len(people.CONDITIONS)]
    pairs = [(measure(day), measure(night)) for day, night in kept]
    realised = np.mean([night.value - day.value for day, night in pairs])
    variance = sum(day.sd**2 + night.sd**2 for day, night in pairs) / len(pairs) ** 2
    return _expectation(plant, float(realised), variance, len(pairs))


def _between(visits: Sequence[Visit], measure: Callable[[Visit], Measure], plant: Plant) -> Expectation:
    """Return the first group minus the second; a person counts once, with the mean of their recordings."""
    everyone = _by_person(visits, plant.channel)
    groups = [
        [_mean([measure(visit) for visit in own]) for own in everyone if own[0].person.group == group]
        for group in people.GROUPS
    ]
    first, second = (_mean(group) for group in groups)
    return _expectation(plant, first.value - second.value, first.sd**2 + second.sd**2, len(everyone))


def _mean(measures: Sequence[Measure]) -> Measure:
    variance = sum(each.sd**2 for each in measures) / len(measures) ** 2
    return Measure(float(np.mean([each.value for each in measures])), float(np.sqrt(variance)))


def _expectation(plant: Plant, realised: float, variance: float, n_participants: int) -> Expectation:
    margin = _MARGIN * float(np.sqrt(variance))
    return Expectation(
        **asdict(plant),
        realised=realised,
        low=realised - margin,
        high=realised + margin,
        n_participants=n_participants,
    )


def _by_person(visits: Sequence[Visit], channel: str) -> list[list[Visit]]:
    """Return each person's recordings in which the channel is not excluded, in the order of the visits."""
    own: dict[int, list[Visit]] = {}
    for visit in visits:
        if not is_excluded(visit.recording, channel):
            own.setdefault(visit.person.number, []).append(visit)
    return list(own.values())
