"""People differ round the planted values, reproducibly and independently."""

from __future__ import annotations

import numpy as np
import pytest

from bandcairn.demo import brain, people


def test_twelve_people_in_two_equal_groups_each_by_day_and_by_night() -> None:
    """The design is complete and balanced."""
    visits = list(people.visits(20))

    assert len({visit.recording for visit in visits}) == 24
    groups = [visit.person.group for visit in visits if visit.condition == "day"]
    assert (groups.count("boat"), groups.count("quay")) == (6, 6)


def test_equal_seeds_draw_equal_people_and_others_do_not() -> None:
    """The seed alone decides."""
    assert list(people.visits(20)) == list(people.visits(20))
    assert people.draw_person(20, 1) != people.draw_person(21, 1)
    assert people.draw_person(20, 1).heart != people.draw_person(20, 2).heart


def test_streams_of_a_person_and_of_their_recordings_differ() -> None:
    """A list of seeds with a trailing zero names the same stream: the numbering must avoid it."""
    streams = [people.generator(20, 1), *(people.generator(20, 1, each) for each in people.CONDITIONS)]

    assert len({stream.standard_normal() for stream in streams}) == 3


def test_many_people_average_to_the_planted_values() -> None:
    """The population holds what is planted, on the scale of each question."""
    drawn = [people.draw_person(20, number) for number in range(1, 401)]
    alpha = np.mean([np.log(person.alpha_ratio) for person in drawn], axis=0)
    change = np.mean([person.heart_rate_change_per_min for person in drawn])
    ratio = np.mean([np.log(person.lf_hf_ratio_ratio) for person in drawn])
    boat = np.mean([each.muscle.median_slope_hz_per_s for each in drawn if each.group == "boat"])

    # Four standard errors over 400 people, 200 in a group.
    assert alpha == pytest.approx(np.log(people.ALPHA_RATIO), abs=4 * 0.108 / 20)
    assert change == pytest.approx(-4, abs=4 * 1.5 / 20)
    assert ratio == pytest.approx(np.log(0.4), abs=4 * 0.15 / 20)
    assert boat == pytest.approx(-0.10, abs=4 * 0.015 / 14)


def test_night_differs_from_day_by_what_was_drawn_for_the_person() -> None:
    """Band power, heart rate and LF/HF of the two recordings stand in the person's own ratios."""
    person = people.draw_person(20, 3)
    day, night = (people.draw_visit(20, person, condition) for condition in people.CONDITIONS)

    # The chance of a watch moves beta, whose skirt reaches a little into the alpha band.
    alpha = brain.band_power(night.eeg, 8, 13) / brain.band_power(day.eeg, 8, 13)
    assert alpha == pytest.approx(person.alpha_ratio, rel=2e-3)
    assert night.heart.rate_per_min - day.heart.rate_per_min == pytest.approx(
        person.heart_rate_change_per_min
    )
    assert night.heart.lf_hf_ratio / day.heart.lf_hf_ratio == pytest.approx(person.lf_hf_ratio_ratio)
    assert night.muscle.median_slope_hz_per_s == day.muscle.median_slope_hz_per_s
