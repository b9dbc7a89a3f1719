"""What holds for every filter and every signal, whatever is drawn."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from bandcairn.signal import Run, Signal
from bandcairn.steps.filter import FilterStage, apply_stages, response
from bandcairn.steps.filter_report import curve, report

if TYPE_CHECKING:
    from numpy.typing import NDArray

RATE_HZ = 250
N_SAMPLES = 4000


@st.composite
def stages(draw: st.DrawFn, phases: tuple[str, ...] = ("zero", "causal")) -> FilterStage:
    """Return any stage whose transients are over within two seconds."""
    type_ = draw(st.sampled_from(["lowpass", "highpass", "bandpass", "bandstop", "notch"]))
    phase = draw(st.sampled_from(phases))
    if type_ == "notch":
        width_hz = draw(st.floats(2, 10))
        return FilterStage(type="notch", mains_hz=50.0, width_hz=width_hz, order=2, phase=phase)  # type: ignore[arg-type]
    low_hz, high_hz = draw(st.floats(5, 20)), draw(st.floats(40, 90))
    cutoff_hz = {"lowpass": (high_hz,), "highpass": (low_hz,)}.get(type_, (low_hz, high_hz))
    design = draw(st.sampled_from(["butterworth", "bessel", "chebyshev1", "chebyshev2", "elliptic", "fir"]))
    options: dict[str, object] = {"transition_hz": 5.0, "window": draw(st.sampled_from(["hann", "blackman"]))}
    if design != "fir":
        options = {"order": draw(st.integers(2, 4)), "ripple_db": 0.5, "attenuation_db": 40.0}
    return FilterStage(type=type_, cutoff_hz=cutoff_hz, phase=phase, design=design, **options)  # type: ignore[arg-type]


def noise(seed: int) -> NDArray[np.float64]:
    """Return white noise on an offset."""
    return np.random.default_rng(seed).normal(3, 10, size=N_SAMPLES)


def filtered(samples: NDArray[np.float64], *chain: FilterStage, cut: int = 0) -> NDArray[np.float64]:
    """Return one channel behind a chain, in one run or in two that meet at `cut`."""
    runs: tuple[Run, ...] = (Run(0, len(samples), Fraction(0)),)
    if cut:
        runs = (Run(0, cut, Fraction(0)), Run(cut, len(samples), Fraction(100)))
    signal = Signal(samples[np.newaxis].copy(), Fraction(RATE_HZ), ("c",), runs)
    result: NDArray[np.float64] = apply_stages(signal, chain).samples[0]
    return result


seeds = st.integers(0, 2**16)


@settings(max_examples=25, deadline=None)
@given(chain=st.lists(stages(), min_size=1, max_size=3), a=st.floats(-3, 3), b=st.floats(-3, 3), seed=seeds)
def test_filtering_is_linear(chain: list[FilterStage], a: float, b: float, seed: int) -> None:
    """The filtered sum is the sum of the filtered: nothing is clipped, rounded or adapted."""
    first, second = noise(seed), noise(seed + 1)

    together = filtered(a * first + b * second, *chain)

    np.testing.assert_allclose(
        together, a * filtered(first, *chain) + b * filtered(second, *chain), atol=1e-8
    )


@settings(max_examples=30, deadline=None)
@given(chain=st.lists(stages(), min_size=1, max_size=2), seed=seeds)
def test_the_input_is_left_as_it_was(chain: list[FilterStage], seed: int) -> None:
    """A step never writes into what it was given, and gives the same answer again."""
    signal = Signal(noise(seed)[np.newaxis], Fraction(RATE_HZ), ("c",), (Run(0, N_SAMPLES, Fraction(0)),))
    before = signal.samples.copy()

    one, other = (apply_stages(signal, tuple(chain)).samples for _ in range(2))

    np.testing.assert_array_equal(signal.samples, before)
    np.testing.assert_array_equal(one, other)


@settings(max_examples=25, deadline=None)
@given(stage=stages(phases=("zero",)), seed=seeds)
def test_zero_phase_does_not_know_the_direction_of_time(stage: FilterStage, seed: int) -> None:
    """The reversed signal is filtered to the reversed result; the two passes differ near the ends alone."""
    samples = noise(seed)
    # Each settling time takes the ends down to a hundredth: after three a millionth of them is left.
    edge = 0 if stage.design == "fir" else round(3 * RATE_HZ * report((stage,), float(RATE_HZ))[0].settling_s)
    assume(edge < N_SAMPLES / 2 - 100)

    forward, backward = filtered(samples, stage), filtered(samples[::-1], stage)[::-1]

    middle = slice(edge, N_SAMPLES - edge)
    np.testing.assert_allclose(forward[middle], backward[middle], atol=1e-4)


@settings(max_examples=25, deadline=None)
@given(chain=st.lists(stages(), min_size=1, max_size=2), cut=st.integers(1500, 2500), seed=seeds)
def test_a_gap_never_leaks(chain: list[FilterStage], cut: int, seed: int) -> None:
    """What stands behind a gap changes no bit before it, nor the other way round."""
    samples, changed_after, changed_before = noise(seed), noise(seed), noise(seed)
    changed_after[cut:] *= -1000
    changed_before[:cut] += 1e6

    whole = filtered(samples, *chain, cut=cut)

    np.testing.assert_array_equal(filtered(changed_after, *chain, cut=cut)[:cut], whole[:cut])
    np.testing.assert_array_equal(filtered(changed_before, *chain, cut=cut)[cut:], whole[cut:])


@settings(max_examples=25, deadline=None)
@given(stage=stages())
def test_every_told_half_power_point_is_one(stage: FilterStage) -> None:
    """The gain at the told -3.01 dB points is that; beside a notch the others of its band-stops count a little."""
    (told,) = report((stage,), float(RATE_HZ))

    for edge in told.cutoffs:
        gain_db = 20 * np.log10(response((stage,), float(RATE_HZ), edge.effective_hz))
        assert gain_db == pytest.approx(-3.0103, abs=1e-2 if stage.type == "notch" else 1e-6)


@settings(max_examples=20, deadline=None)
@given(chain=st.lists(stages(), max_size=3))
def test_the_curve_is_the_response_on_its_grid(chain: list[FilterStage]) -> None:
    """512 rising frequencies from 0.1 Hz to Nyquist, and the gain of the whole chain at each."""
    shape = curve(tuple(chain), float(RATE_HZ))

    assert shape.frequency_hz.shape == shape.gain_db.shape == (512,)
    assert (shape.frequency_hz[0], shape.frequency_hz[-1]) == (0.1, RATE_HZ / 2)
    assert np.all(np.diff(shape.frequency_hz) > 0)
    gain = np.maximum(response(tuple(chain), float(RATE_HZ), shape.frequency_hz), 1e-10)
    np.testing.assert_allclose(shape.gain_db, 20 * np.log10(gain), atol=6e-5)
