"""What filters do to unwary studies, pain by pain, and that it cannot happen here."""

from __future__ import annotations

import math
from fractions import Fraction
from typing import TYPE_CHECKING

import numpy as np
import pytest

from bandcairn.errors import StepError
from bandcairn.signal import Run, Signal
from bandcairn.steps.filter import FilterStage, apply_stages, effective_cutoffs, response, sections, taps
from bandcairn.steps.filter_report import describe, report, stop_bands
from bandcairn.steps.stop_bands import stopped_share

if TYPE_CHECKING:
    from numpy.typing import NDArray

NOTCH = FilterStage(type="notch", mains_hz=50.0, width_hz=2.0, order=2)


def signal_of(
    samples: NDArray[np.float64], rate_hz: int = 250, runs: tuple[Run, ...] | None = None
) -> Signal:
    """Return one channel, in one run if none are given."""
    return Signal(
        samples[np.newaxis], Fraction(rate_hz), ("c",), runs or (Run(0, len(samples), Fraction(0)),)
    )


def noise(n_samples: int, seed: int = 1) -> NDArray[np.float64]:
    """Return white noise of variance 1."""
    return np.random.default_rng(seed).normal(size=n_samples)


def fir(transition_hz: float, phase: str = "zero") -> FilterStage:
    """Return a linear-phase low-pass at 30 Hz."""
    return FilterStage(
        type="lowpass",
        cutoff_hz=(30.0,),
        design="fir",
        window="hamming",
        transition_hz=transition_hz,
        phase=phase,  # type: ignore[arg-type]
    )


def test_p18_taps_that_reach_further_than_the_run_are_refused_with_both_lengths() -> None:
    """3.3 x 250 / 5 taps, made odd, are 165: they reach 82 samples, 0.328 s, to either side."""
    assert len(taps(fir(5.0), 250.0)) == 165
    assert apply_stages(signal_of(noise(83)), (fir(5.0),)).samples.shape == (1, 83)

    with pytest.raises(StepError, match=r"gap-free run of 0\.328 s; needed: more than 0\.328 s"):
        apply_stages(signal_of(noise(82)), (fir(5.0),))


def test_p19_a_splice_of_two_stretches_leaves_no_residue() -> None:
    """A 10 Hz sine that jumps in phase across a gap has no 1-4 Hz power; glued together it has."""
    time_s = np.arange(5000) / 250
    samples = np.sin(2 * np.pi * 10 * (time_s + np.where(time_s < 10, 0, 0.037)))
    delta = FilterStage(type="bandpass", cutoff_hz=(1.0, 4.0), order=4)
    runs = (Run(0, 2500, Fraction(0)), Run(2500, 5000, Fraction(70)))

    apart = apply_stages(signal_of(samples, runs=runs), (delta,)).samples[0]
    glued = apply_stages(signal_of(samples), (delta,)).samples[0]

    join = slice(2375, 2625)
    assert np.std(glued[join]) > 0.05
    assert np.abs(apart[3500:4000]).max() < 1e-3
    for half in (slice(0, 2500), slice(2500, 5000)):
        alone = apply_stages(signal_of(samples[half].copy()), (delta,)).samples[0]
        np.testing.assert_array_equal(apart[half], alone)


def test_p20_requested_and_applied_cutoffs_are_both_told() -> None:
    """Forward and backward, half power of a 40 Hz low-pass of order 2 lies at 32.4 Hz: 40 Hz lie at -6.02 dB."""
    stage = FilterStage(type="lowpass", cutoff_hz=(40.0,), order=2)

    (told,) = report((stage,), 1000.0)

    (edge,) = told.cutoffs
    assert (edge.requested_hz, round(edge.single_pass_hz, 9)) == (40.0, 40.0)
    assert edge.effective_hz == pytest.approx(32.2, abs=0.1)
    assert told.at_cutoffs[0].gain_db == pytest.approx(-6.0206, abs=1e-4)


@pytest.mark.parametrize("design", ["butterworth", "bessel"])
@pytest.mark.parametrize("cutoff_hz", [1.0, 40.0, 400.0])
def test_p20_a_corrected_cutoff_lies_where_it_was_asked_for_even_near_nyquist(
    design: str, cutoff_hz: float
) -> None:
    """400 Hz at 1000 Hz stays 400: dividing by 0.802 without pre-warping would ask for 498 Hz."""
    for type_ in ("lowpass", "highpass"):
        stage = FilterStage(
            type=type_,
            cutoff_hz=(cutoff_hz,),
            order=2,
            design=design,  # type: ignore[arg-type]
            corrected=True,
        )

        (edge,) = effective_cutoffs((stage,), 1000.0)

        assert edge.effective_hz == pytest.approx(cutoff_hz, rel=1e-9)


def test_p20_a_correction_that_would_reach_nyquist_is_refused() -> None:
    """The first pass needs room above the cut-off."""
    stage = FilterStage(type="lowpass", cutoff_hz=(486.0,), order=1, corrected=True)

    with pytest.raises(StepError, match=r"needs a design cut-off of 49\d.* below 490 Hz"):
        sections(stage, 1000.0)


@pytest.mark.parametrize(
    "stage",
    [
        FilterStage(
            type="lowpass", cutoff_hz=(40.0,), order=4, design="elliptic", ripple_db=1, attenuation_db=40
        ),
        FilterStage(type="lowpass", cutoff_hz=(40.0,), order=4, design="chebyshev1", ripple_db=1),
        FilterStage(type="lowpass", cutoff_hz=(40.0,), order=4, design="chebyshev2", attenuation_db=40),
        FilterStage(type="lowpass", cutoff_hz=(40.0,), order=4, phase="causal"),
        fir(10.0),
        NOTCH,
    ],
    ids=str,
)
def test_p20_a_correction_is_refused_where_nothing_runs_twice_and_falls_steadily(stage: FilterStage) -> None:
    """A filter with ripple has no one cut-off to be moved, and one pass needs no correction."""
    corrected = FilterStage(
        **{name: getattr(stage, name) for name in FilterStage.__dataclass_fields__ if name != "corrected"},
        corrected=True,
    )

    with pytest.raises(StepError, match="found corrected with"):
        apply_stages(signal_of(noise(5000)), (corrected,))


@pytest.mark.parametrize("design", ["butterworth", "bessel", "chebyshev1", "chebyshev2", "elliptic"])
def test_p21_a_slow_band_at_a_high_rate_stays_bounded_in_every_design(design: str) -> None:
    """As one polynomial 0.5-4 Hz of order 4 at 2048 Hz blows up; in sections every pole is inside."""
    stage = FilterStage(
        type="bandpass",
        cutoff_hz=(0.5, 4.0),
        order=4,
        design=design,  # type: ignore[arg-type]
        ripple_db=0.5,
        attenuation_db=40,
    )

    filtered = apply_stages(signal_of(noise(60 * 2048), 2048), (stage,)).samples

    assert report((stage,), 2048.0)[0].largest_pole_radius < 1
    assert 0 < np.abs(filtered).max() < 1


def test_p22_a_causal_filter_tells_its_delay_and_zero_phase_has_none() -> None:
    """Both gains are alike but for the second pass; what differs is said."""
    zero, causal = (
        FilterStage(type="lowpass", cutoff_hz=(40.0,), order=4, phase=phase) for phase in ("zero", "causal")
    )

    first, second = report((zero, causal), 250.0)

    assert first.delay is None
    assert second.delay is not None
    assert second.delay.frequency_hz == 20.0
    assert (first.words.endswith("forward and backward"), second.words.endswith("forward only")) == (
        True,
        True,
    )
    time_s = np.arange(2500) / 250
    late = apply_stages(signal_of(np.sin(2 * np.pi * 20 * time_s)), (causal,)).samples[0, 1000:1500]
    gain = response((causal,), 250.0, 20.0)
    phase_delay_s = np.sin(2 * np.pi * 20 * (time_s[1000:1500] - second.delay.delay_s))
    # Group and phase delay of a low-pass differ by a tenth or so in the middle of its pass-band.
    assert np.corrcoef(late / gain, phase_delay_s)[0, 1] > 0.9


def test_p22_a_causal_fir_is_the_zero_phase_one_shifted_by_the_delay_that_is_told() -> None:
    """Linear phase: all that a causal pass changes is the time."""
    samples = noise(3000)
    zero, causal = (
        apply_stages(signal_of(samples), (fir(10.0, phase),)).samples[0] for phase in ("zero", "causal")
    )
    (told,) = report((fir(10.0, "causal"),), 250.0)

    assert told.delay is not None
    shift = round(told.delay.delay_s * 250)
    assert shift == 41
    np.testing.assert_allclose(causal[shift + 100 :], zero[100:-shift], atol=1e-12)


@pytest.mark.parametrize(
    "stage",
    [
        FilterStage(type="highpass", cutoff_hz=(0.1,), order=2),
        FilterStage(type="highpass", cutoff_hz=(0.3,), order=4, design="chebyshev2", attenuation_db=40),
        FilterStage(type="highpass", cutoff_hz=(0.3,), design="fir", window="blackman", transition_hz=0.5),
    ],
    ids=lambda stage: stage.design,
)
def test_p23_the_ends_are_extended_as_far_as_the_filter_rings(stage: FilterStage) -> None:
    """A slow high-pass takes an offset away from the first sample to the last, and adds no swing of its own."""
    time_s = np.arange(120 * 250 + 1) / 250
    sine = 10 * np.sin(2 * np.pi * 10 * time_s)

    filtered = apply_stages(signal_of(500 + sine), (stage,)).samples[0]

    # The stop-band of chebyshev2 leaves 80 dB of the offset, that of the Blackman window some 70: 0.05 and 0.16 uV.
    np.testing.assert_allclose(filtered, sine, atol=0.25)


@pytest.mark.parametrize("stage", [fir(10.0), NOTCH], ids=str)
def test_p24_one_sample_that_is_no_number_is_refused(stage: FilterStage) -> None:
    """It would spread over the run, or over all of it where the convolution is done by blocks."""
    samples = noise(5000)
    samples[77] = np.nan

    with pytest.raises(StepError, match="not finite"):
        apply_stages(signal_of(samples), (stage,))


@pytest.mark.parametrize(
    ("rate_hz", "centres"),
    [(128.0, "50"), (250.0, "50, 100"), (1000.0, "50, 100, 150, 200, 250, 300, 350, 400, 450")],
)
def test_p25_harmonics_are_stopped_as_far_as_the_rate_holds_them(rate_hz: float, centres: str) -> None:
    """Each below 0.95 of Nyquist, and no other; the design says which."""
    assert f"at {centres} Hz" in describe(NOTCH, rate_hz)
    for centre_hz in centres.split(", "):
        assert response((NOTCH,), rate_hz, float(centre_hz)) < 1e-6
    between = np.arange(25.0, 0.95 * rate_hz / 2, 50.0)
    assert response((NOTCH,), rate_hz, between).min() > 0.999


def test_p25_a_notch_without_harmonics_stops_the_mains_alone() -> None:
    """harmonics: false."""
    alone = FilterStage(type="notch", mains_hz=60.0, width_hz=2.0, order=2, harmonics=False)

    assert response((alone,), 1000.0, 60.0) < 1e-6
    assert response((alone,), 1000.0, 120.0) > 0.999


@pytest.mark.parametrize("order", [1, 2, 4])
@pytest.mark.parametrize("phase", ["zero", "causal"])
def test_p25_the_width_of_a_notch_is_that_of_the_applied_response(order: int, phase: str) -> None:
    """Two passes would widen it: the design is narrower by as much, and its zero stays at the mains."""
    notch = FilterStage(
        type="notch",
        mains_hz=50.0,
        width_hz=3.0,
        order=order,
        phase=phase,  # type: ignore[arg-type]
    )

    stopped = stop_bands((notch,), 250.0)

    assert [high - low for low, high in stopped] == pytest.approx([3.0, 3.0], rel=1e-9)
    assert response((notch,), 250.0, [50.0, 100.0]).max() < 1e-6


def test_p25_a_notch_at_50_hz_leaves_60_hz_alone() -> None:
    """The frequency of the mains is the study's, never a guess: the report tells both."""
    (told,) = report((NOTCH,), 250.0)

    gains = {gain.frequency_hz: gain.gain_db for gain in told.at_mains}
    assert gains[50.0] < -120
    assert gains[60.0] > -0.1


def test_p25_a_mains_that_the_rate_does_not_hold_is_refused() -> None:
    """At 100 Hz there is nothing at 50 Hz to be stopped."""
    with pytest.raises(StepError, match=r"notch at 50 Hz.* allowed: mains below 47\.5 Hz"):
        sections(NOTCH, 100.0)


def test_p25_the_loss_of_a_band_is_what_is_told_of_it() -> None:
    """Of white noise in 45-55 Hz a notch takes what the share of its stop band says, to a few percent."""
    samples = noise(250 * 600)
    stopped = stop_bands((NOTCH,), 250.0)
    share = stopped_share((45.0, 55.0), stopped)
    assert share == pytest.approx(0.2, abs=1e-9)

    filtered = apply_stages(signal_of(samples), (NOTCH,)).samples[0]

    frequency_hz = np.fft.rfftfreq(len(samples), 1 / 250)
    band = (frequency_hz >= 45) & (frequency_hz < 55)
    before, after = (np.sum(np.abs(np.fft.rfft(x)[band]) ** 2) for x in (samples, filtered))
    assert 1 - after / before == pytest.approx(share, abs=0.03)
    gain = response((NOTCH,), 250.0, np.linspace(45, 55, 2001))
    assert 1 - after / before == pytest.approx(1 - np.mean(gain**2), abs=0.01)


@pytest.mark.parametrize(
    ("stage", "message"),
    [
        (FilterStage(type="notch", mains_hz=50.0, width_hz=30.0, order=2), "a width above 0, up to half"),
        (FilterStage(type="notch", mains_hz=50.0, order=2), "width_hz None"),
        (FilterStage(type="notch", width_hz=2.0, order=2), "mains_hz None"),
        (FilterStage(type="notch", mains_hz=50.0, width_hz=2.0), "order None"),
        (
            FilterStage(type="lowpass", cutoff_hz=(8.0,), order=2, design="elliptic"),
            "ripple_db and attenuation_db",
        ),
        (
            FilterStage(type="lowpass", cutoff_hz=(8.0,), order=2, design="chebyshev1", ripple_db=2),
            r"ripple_db 2 in 2 pass\(es\); allowed: at most 1\.5",
        ),
        (
            FilterStage(type="lowpass", cutoff_hz=(8.0,), design="fir", transition_hz=2.0),
            "either window or attenuation_db",
        ),
        (
            FilterStage(type="lowpass", cutoff_hz=(8.0,), design="fir", transition_hz=20.0, window="hann"),
            "allowed: at most 16 Hz",
        ),
        (
            FilterStage(
                type="bandpass", cutoff_hz=(8.0, 13.0), design="fir", transition_hz=6.0, window="hann"
            ),
            "allowed: at most 5 Hz",
        ),
        (
            FilterStage(
                type="lowpass", cutoff_hz=(8.0,), order=2, design="fir", transition_hz=2.0, window="hann"
            ),
            "no order",
        ),
    ],
    ids=lambda value: str(value)[:40],
)
def test_a_stage_that_is_not_complete_is_refused(stage: FilterStage, message: str) -> None:
    """What is missing or too large is named."""
    with pytest.raises(StepError, match=message):
        apply_stages(signal_of(noise(5000)), (stage,))


def test_sections_and_taps_are_not_taken_for_one_another() -> None:
    """A fir has no sections, the others no taps."""
    with pytest.raises(StepError, match="taps in place of sections"):
        sections(fir(10.0), 250.0)
    with pytest.raises(StepError, match="sections in place of taps"):
        taps(NOTCH, 250.0)


def test_words_say_what_a_reader_needs_to_repeat_the_filter() -> None:
    """Family, type, order or length, edges, options and direction stand in one phrase."""
    kaiser = FilterStage(
        type="bandstop",
        cutoff_hz=(48.0, 52.0),
        design="fir",
        attenuation_db=60,
        transition_hz=2.0,
        phase="causal",
    )
    elliptic = FilterStage(
        type="bandpass", cutoff_hz=(8.0, 13.0), order=4, design="elliptic", ripple_db=0.5, attenuation_db=40
    )

    length = math.ceil((60 - 7.95) / (2.285 * 2 * math.pi * 2 / 250)) + 1 | 1
    assert describe(kaiser, 250.0) == (
        f"linear-phase FIR band-stop of {length} taps, Kaiser (60 dB) window, transition 2 Hz, at 48 and 52 Hz, "
        f"one pass, its delay of {(length - 1) / 500:g} s left"
    )
    assert describe(elliptic, 250.0) == (
        "elliptic band-pass of order 4, ripple 0.5 dB, stop-band 40 dB at 8 and 13 Hz, forward and backward"
    )
    assert describe(NOTCH, 128.0) == (
        "Butterworth notch of order 2, 2 Hz wide as applied, at 50 Hz, forward and backward"
    )
