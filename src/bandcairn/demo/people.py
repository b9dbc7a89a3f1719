"""Who stood on watch, what was planted in them, and how they differ from one another."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.demo.brain import EegModel, Rhythm, scale_alpha_band
from bandcairn.demo.heart import HeartModel, expected_rmssd_ms
from bandcairn.demo.muscle import MuscleModel

if TYPE_CHECKING:
    from collections.abc import Iterator

CONDITIONS = ("day", "night")
GROUPS = ("boat", "quay")
N_PEOPLE = 12

# Planted, night against day (Fz, Cz, Pz, Oz) or boat against quay.
ALPHA_RATIO = (1.2, 1.2, 1.5, 1.5)
HEART_RATE_CHANGE_PER_MIN = -4.0
SDNN_RATIO = 1.0
LF_HF_RATIO_RATIO = 0.4
MEDIAN_SLOPE_HZ_PER_S = {"boat": -0.10, "quay": -0.16}

_DAY_HEART_RATE_PER_MIN = 68.0
_DAY_SDNN_MS = 45.0
_DAY_LF_HF_RATIO = 2.0
_MEDIAN_START_HZ = 105.0
# uV^2 at Fz, Cz, Pz, Oz by day; the scalp distribution and all spreads below are common practice.
_THETA_UV2 = (8.0, 7.0, 4.0, 3.0)
_ALPHA_UV2 = (9.0, 14.0, 38.0, 55.0)
_BETA_UV2 = (5.0, 5.0, 4.0, 4.0)
_BACKGROUND_UV2_PER_HZ = 18.0


@dataclass(frozen=True, slots=True)
class Person:
    """One participant and what stays the same in both recordings.

    Attributes
    ----------
    number : int
        From 1.
    group : str
        One of `GROUPS`.
    age : int
        Years.
    eeg, heart, muscle : EegModel, HeartModel, MuscleModel
        By day.
    alpha_ratio : tuple of float
        Band power from 8 to 13 Hz at night over that by day, one a channel.
    heart_rate_change_per_min, sdnn_ratio, lf_hf_ratio_ratio : float
        Night against day.
    """

    number: int
    group: str
    age: int
    eeg: EegModel
    heart: HeartModel
    muscle: MuscleModel
    alpha_ratio: tuple[float, ...]
    heart_rate_change_per_min: float
    sdnn_ratio: float
    lf_hf_ratio_ratio: float

    @property
    def name(self) -> str:
        """Participant as written in the tables."""
        return f"W{self.number:02d}"


@dataclass(frozen=True, slots=True)
class Visit:
    """One recording: a person in a condition, with the models its signals are drawn from.

    Attributes
    ----------
    person : Person
        Who.
    condition : str
        One of `CONDITIONS`.
    eeg, heart, muscle : EegModel, HeartModel, MuscleModel
        Of this recording.
    blinks, movements : int
        How many artefacts lie on the EEG.
    """

    person: Person
    condition: str
    eeg: EegModel
    heart: HeartModel
    muscle: MuscleModel
    blinks: int
    movements: int

    @property
    def recording(self) -> str:
        """Name of the recording."""
        return f"{self.person.name}_{self.condition}"


def typical_ln_rmssd_change() -> float:
    """Return ln RMSSD at night minus by day of a person who has the planted values and no spread."""
    day = HeartModel(_DAY_HEART_RATE_PER_MIN, _DAY_SDNN_MS, _DAY_LF_HF_RATIO)
    night = HeartModel(
        day.rate_per_min + HEART_RATE_CHANGE_PER_MIN,
        day.sdnn_ms * SDNN_RATIO,
        day.lf_hf_ratio * LF_HF_RATIO_RATIO,
    )
    return float(np.log(expected_rmssd_ms(night) / expected_rmssd_ms(day)))


def generator(seed: int, person_number: int, condition: str | None = None) -> np.random.Generator:
    """Return the stream of one person, or of one of their recordings: independent of all others."""
    # Person and condition count from 1: a trailing 0 would give the stream of the shorter list.
    visit_number = 0 if condition is None else 1 + CONDITIONS.index(condition)
    return np.random.default_rng([seed, person_number, visit_number])


def visits(seed: int) -> Iterator[Visit]:
    """Yield all recordings of the study, a person's day before their night."""
    for number in range(1, N_PEOPLE + 1):
        person = draw_person(seed, number)
        for condition in CONDITIONS:
            yield draw_visit(seed, person, condition)


def draw_person(seed: int, number: int) -> Person:
    """Draw a participant round the planted values; odd numbers serve on the boat, even ones on the quay."""
    rng = generator(seed, number)
    group = GROUPS[(number + 1) % 2]
    return Person(
        number=number,
        group=group,
        age=int(rng.integers(23, 59)),
        eeg=_draw_eeg(rng),
        heart=HeartModel(
            rate_per_min=_DAY_HEART_RATE_PER_MIN + 5 * rng.standard_normal(),
            sdnn_ms=_DAY_SDNN_MS * _spread(rng, 0.2),
            lf_hf_ratio=_DAY_LF_HF_RATIO * _spread(rng, 0.2),
        ),
        muscle=MuscleModel(
            median_start_hz=_MEDIAN_START_HZ + 6 * rng.standard_normal(),
            median_slope_hz_per_s=MEDIAN_SLOPE_HZ_PER_S[group] + 0.015 * rng.standard_normal(),
            rms_uv=240 * _spread(rng, 0.15),
            rms_rise=0.15,
        ),
        alpha_ratio=_draw_alpha_ratio(rng),
        heart_rate_change_per_min=HEART_RATE_CHANGE_PER_MIN + 1.5 * rng.standard_normal(),
        sdnn_ratio=SDNN_RATIO * _spread(rng, 0.06),
        lf_hf_ratio_ratio=LF_HF_RATIO_RATIO * _spread(rng, 0.15),
    )


def draw_visit(seed: int, person: Person, condition: str) -> Visit:
    """Draw a recording: the person, at night with what was planted, and some chance of that watch."""
    # spawn: the signals of the recording come from the parent stream, untouched by what is drawn here.
    (rng,) = generator(seed, person.number, condition).spawn(1)
    eeg, heart = (person.eeg, person.heart) if condition == "day" else _at_night(person)
    beta_gain = _spread(rng, 0.08)
    beta = replace(eeg.beta, power_uv2=tuple(beta_gain * power for power in eeg.beta.power_uv2))
    start_hz = person.muscle.median_start_hz + 2 * rng.standard_normal()
    return Visit(
        person=person,
        condition=condition,
        eeg=replace(eeg, beta=beta),
        heart=heart,
        muscle=replace(person.muscle, median_start_hz=start_hz),
        blinks=int(rng.integers(4, 10)),
        movements=int(rng.integers(1, 3)),
    )


def _at_night(person: Person) -> tuple[EegModel, HeartModel]:
    heart = HeartModel(
        rate_per_min=person.heart.rate_per_min + person.heart_rate_change_per_min,
        sdnn_ms=person.heart.sdnn_ms * person.sdnn_ratio,
        lf_hf_ratio=person.heart.lf_hf_ratio * person.lf_hf_ratio_ratio,
    )
    return scale_alpha_band(person.eeg, np.array(person.alpha_ratio)), heart


def _draw_eeg(rng: np.random.Generator) -> EegModel:
    gain = _spread(rng, 0.25)
    alpha_gain = gain * _spread(rng, 0.25)
    return EegModel(
        background_uv2_per_hz=_BACKGROUND_UV2_PER_HZ * gain,
        exponent=1.2 + 0.08 * rng.standard_normal(),
        theta=Rhythm(6.0, 0.8, tuple(gain * power for power in _THETA_UV2)),
        alpha=Rhythm(
            float(np.clip(10 + 0.4 * rng.standard_normal(), 9.2, 10.8)),
            0.7,
            tuple(alpha_gain * power for power in _ALPHA_UV2),
        ),
        beta=Rhythm(20.0, 2.5, tuple(gain * power for power in _BETA_UV2)),
    )


def _draw_alpha_ratio(rng: np.random.Generator) -> tuple[float, ...]:
    """Return the planted ratios with a spread of the person and a smaller one of each channel."""
    own = _spread(rng, 0.10)
    return tuple(ratio * own * _spread(rng, 0.04) for ratio in ALPHA_RATIO)


def _spread(rng: np.random.Generator, sd: float) -> float:
    """Return a log-normal factor round 1; `sd` is that of its natural logarithm."""
    return float(np.exp(sd * rng.standard_normal()))
