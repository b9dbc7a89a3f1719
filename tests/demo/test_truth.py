"""The truth is computed from the settings that study.yaml declares, and its filters are those of scipy."""

from __future__ import annotations

from importlib.resources import files
from typing import Literal

import numpy as np
import pytest
import yaml
from scipy import integrate, signal

from bandcairn.demo import muscle, people, truth
from bandcairn.demo.write import LENGTH_S, WORK

DECLARED = yaml.safe_load(files("bandcairn.demo").joinpath("study.yaml").read_text(encoding="utf-8"))


def test_settings_of_the_truth_are_those_declared() -> None:
    """Whoever changes study.yaml is told to change the truth."""
    biceps, bands_hz = DECLARED["signals"]["biceps"], DECLARED["signals"]["eeg"]["features"]["bands_hz"]
    stop, keep = biceps["filter"]

    assert biceps["resample"]["rate_hz"] == truth.EMG_RATE_HZ
    assert (tuple(keep["cutoff_hz"]), keep["order"]) == (truth.EMG_BAND_HZ, truth.EMG_BAND_ORDER)
    assert (tuple(stop["cutoff_hz"]), stop["order"]) == (truth.MAINS_BAND_HZ, truth.MAINS_BAND_ORDER)
    assert (tuple(bands_hz["alpha"]), tuple(bands_hz["beta"])) == (truth.ALPHA_HZ, truth.BETA_HZ)


def test_every_question_has_an_expectation_and_every_expectation_a_question() -> None:
    """Questions and truth are the same list, in the same order."""
    expected = truth.expectations(tuple(people.visits(20)), LENGTH_S, WORK)

    named = list(dict.fromkeys(each.question for each in expected))
    assert named == [question["name"] for question in DECLARED["questions"]]


@pytest.mark.parametrize("kind", ["bandpass", "bandstop"])
def test_closed_form_of_the_filters_equals_the_designed_response(
    kind: Literal["bandpass", "bandstop"],
) -> None:
    """The squared gain by formula is that of second-order sections, evaluated by scipy."""
    band_hz, order = ((20.0, 400.0), 4) if kind == "bandpass" else ((48.0, 52.0), 2)
    grid_hz = np.linspace(1, 499, 997)
    sections = signal.butter(order, band_hz, btype=kind, fs=truth.EMG_RATE_HZ, output="sos")
    _, response = signal.freqz_sos(sections, grid_hz, fs=truth.EMG_RATE_HZ)
    power = truth.butterworth_power(grid_hz, band_hz, order)

    assert (power if kind == "bandpass" else 1 - power) == pytest.approx(np.abs(response) ** 2, abs=1e-9)


@pytest.mark.parametrize("median_hz", [70.0, 95.70789, 110.0])
def test_recovered_median_halves_the_filtered_spectrum(median_hz: float) -> None:
    """Adaptive quadrature of the spectrum times scipy's response, twice applied, is equal on both sides."""
    stop = signal.butter(2, (48, 52), "bandstop", fs=1000, output="sos")
    keep = signal.butter(4, (20, 400), "bandpass", fs=1000, output="sos")

    def density(frequency_hz: float) -> float:
        at = np.array([frequency_hz])
        gains = [np.abs(signal.freqz_sos(each, at, fs=1000)[1][0]) for each in (stop, keep)]
        return float(muscle.density(np.array([median_hz]), at)[0, 0] * (gains[0] * gains[1]) ** 4)

    (recovered_hz,) = truth.recovered_median_hz(np.array([median_hz]))
    below, _ = integrate.quad(density, 1, recovered_hz, points=[48, 50, 52], limit=200)
    above, _ = integrate.quad(density, recovered_hz, 499, limit=200)

    # The median's grid of 0.1 Hz leaves 1e-4 of the power.
    assert below / (below + above) == pytest.approx(0.5, abs=1e-4)


def test_contrasts_leave_out_the_excluded_channels() -> None:
    """One person less at Cz (flat by day) and for the EMG within people (clipped by night)."""
    expected = truth.expectations(tuple(people.visits(20)), LENGTH_S, WORK)
    counted = {(each.question, each.channel): each.n_participants for each in expected}

    assert counted["alpha power, night against day", "Cz"] == 11
    assert counted["alpha power, night against day", "Fz"] == 12
    assert counted["fatigue, night against day", "EMG"] == 11
    assert counted["fatigue, boat against quay", "EMG"] == 12


def test_stated_scatter_of_a_slope_is_that_of_repeated_contractions() -> None:
    """First-order error propagation agrees with the scatter of many drawn contractions."""
    rng = np.random.default_rng(6)
    model, work = muscle.MuscleModel(90.0, 0.0, 250.0, 0.0), muscle.Contraction(0, 100)
    _, density = signal.periodogram(muscle.emg(rng, model, work, 100, 1000).reshape(-1, 1000), 1000, "hann")
    area = np.cumsum(density, axis=1)
    medians_hz = [np.interp(row[-1] / 2, row, np.arange(501) + 0.5) for row in area]

    # 100 seconds give a standard deviation to 7 %.
    assert np.std(medians_hz) == pytest.approx(truth._epoch_median_sd_hz(90.0), rel=0.25)
