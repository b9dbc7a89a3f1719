"""Filters against handbook tables, closed forms, scipy and mne."""

from __future__ import annotations

import math
from fractions import Fraction
from typing import TYPE_CHECKING

import mne
import numpy as np
import pytest
from scipy import signal as scipy_signal

from bandcairn.errors import StepError
from bandcairn.signal import Run, Signal
from bandcairn.steps.filter import FilterStage, apply_stages, effective_cutoffs, response, sections
from reference import load, published

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from bandcairn.steps.filter import FilterType, Phase

ENTRIES = load("filters")
TYPES: dict[str, FilterType] = {
    "low": "lowpass",
    "high": "highpass",
    "band": "bandpass",
    "bandstop": "bandstop",
}
EXAMPLES = [
    (FilterStage(type="bandpass", cutoff_hz=(0.5, 45.0), order=4), 128.0),
    (FilterStage(type="bandpass", cutoff_hz=(20.0, 450.0), order=4), 1000.0),
    (FilterStage(type="bandpass", cutoff_hz=(0.5, 4.0), order=4), 2048.0),
    (FilterStage(type="bandstop", cutoff_hz=(48.0, 52.0), order=2, phase="causal"), 250.0),
    (FilterStage(type="highpass", cutoff_hz=(0.05,), order=2), 500.0),
    (FilterStage(type="lowpass", cutoff_hz=(30.0,), order=8, phase="causal"), 128.0),
]


def ids(prefix: str) -> list[str]:
    """Return the ids of the entries that begin alike."""
    return [entry_id for entry_id in ENTRIES if entry_id.startswith(prefix)]


def stage_of(type_: str, cutoff_hz: float | list[float], order: int, phase: Phase) -> FilterStage:
    """Return the stage that an entry describes."""
    cutoffs = tuple(map(float, cutoff_hz)) if isinstance(cutoff_hz, list) else (float(cutoff_hz),)
    return FilterStage(type=TYPES[type_], cutoff_hz=cutoffs, order=order, phase=phase)


def signal_of(samples: NDArray[np.float64], rate_hz: int) -> Signal:
    """Return one channel in one run."""
    return Signal(samples[np.newaxis], Fraction(rate_hz), ("c",), (Run(0, len(samples), Fraction(0)),))


def decibel(gain: NDArray[np.float64]) -> NDArray[np.float64]:
    """Return an amplitude gain in dB."""
    return np.asarray(20 * np.log10(gain))


def analogue_poles(order: int) -> NDArray[np.complex128]:
    """Return the poles of a digital low-pass, taken back to the prototype of cut-off 1 rad/s."""
    sos = sections(FilterStage(type="lowpass", cutoff_hz=(40.0,), order=order), 250.0)
    z = np.concatenate([np.roots(np.trim_zeros(section[3:], "b")) for section in sos])
    return np.asarray((z - 1) / (z + 1) / math.tan(math.pi * 40 / 250))


@pytest.mark.parametrize("entry_id", ids("FIL-BUTPOLY"))
def test_poles_multiply_to_the_tabulated_polynomial(entry_id: str) -> None:
    """Truth: published table. The digital filter is Butterworth's, by the bilinear transform."""
    entry = ENTRIES[entry_id]

    entry.assert_close(np.poly(analogue_poles(entry.inputs["order"])).real)


@pytest.mark.parametrize("entry_id", ids("FIL-BUTQUAD"))
def test_quadratic_factors_are_the_tabulated_ones(entry_id: str) -> None:
    """Truth: published table of the linear coefficients -2 Re(pole) of the second-order factors."""
    entry = ENTRIES[entry_id]
    poles = analogue_poles(entry.inputs["order"])

    found = np.sort(-2 * poles.real[poles.imag > 1e-9])
    entry.assert_close(found if entry.expected[0] <= entry.expected[-1] else found[::-1])


@pytest.mark.parametrize("entry_id", ids("FIL-CUTOFF"))
def test_gain_at_the_declared_cutoff(entry_id: str) -> None:
    """Truth: closed form. Half power for a single pass, a quarter forward and backward."""
    entry = ENTRIES[entry_id]
    inputs = entry.inputs

    for phase, key in (("causal", "single_pass_db"), ("zero", "forward_backward_db")):
        stage = stage_of(inputs["type"], inputs["fc_hz"], inputs["order"], phase)  # type: ignore[arg-type]
        entry.assert_close(decibel(response((stage,), inputs["fs_hz"], inputs["fc_hz"])), key)


def warped(frequency_hz: float, rate_hz: float) -> float:
    """Return the frequency of the analogue filter behind the bilinear transform."""
    return math.tan(math.pi * frequency_hz / rate_hz)


def test_second_pass_moves_half_power_by_the_published_factor() -> None:
    """Truth: published table (Robertson & Dowling 2003, Winter 2009: 0.802 for two passes of order 2)."""
    entry = published("filters", "FIL-PASSCORR-2")
    stage = FilterStage(type="lowpass", cutoff_hz=(40.0,), order=2)
    (edge,) = effective_cutoffs((stage,), 250.0)

    entry.assert_close(warped(edge.effective_hz, 250) / warped(40, 250), "butterworth_C")


@pytest.mark.parametrize("entry_id", ids("FIL-ADJCUT"))
def test_adjusted_design_lands_on_the_desired_cutoff(entry_id: str) -> None:
    """Truth: closed form of the cut-off whose second pass lands on a wished one."""
    entry = ENTRIES[entry_id]
    inputs = entry.inputs
    stage = stage_of(inputs["type"], entry.expected["design_fc_hz"], inputs["order"], "zero")
    (edge,) = effective_cutoffs((stage,), inputs["fs_hz"])

    # The tabulated cut-off has ten digits after the point.
    assert edge.effective_hz == pytest.approx(inputs["desired_fc_hz"], abs=1e-8)


@pytest.mark.parametrize("order", range(1, 9))
@pytest.mark.parametrize(("cutoff_hz", "rate_hz"), [(1.0, 250.0), (40.0, 250.0), (400.0, 1000.0)])
def test_effective_cutoffs_of_low_and_high_pass_have_a_closed_form(
    order: int, cutoff_hz: float, rate_hz: float
) -> None:
    """Truth: closed form. 1 / (1 + x^2n) = 1/sqrt(2) at x = (sqrt(2) - 1)^(1/2n), pre-warped."""
    x = (math.sqrt(2) - 1) ** (1 / (2 * order))
    for type_, factor in (("low", x), ("high", 1 / x)):
        for phase, shift in (("zero", factor), ("causal", 1.0)):
            stage = stage_of(type_, cutoff_hz, order, phase)  # type: ignore[arg-type]
            expected_hz = math.atan(shift * warped(cutoff_hz, rate_hz)) * rate_hz / math.pi

            (edge,) = effective_cutoffs((stage,), rate_hz)

            # 1 Hz of order 8 at 250 Hz: sections carry 1e-16, poles 0.01 from the zeros lose six digits of it.
            assert edge.effective_hz == pytest.approx(expected_hz, rel=1e-8)


@pytest.mark.parametrize("order", range(1, 9))
@pytest.mark.parametrize("type_", ["band", "bandstop"])
def test_effective_cutoffs_of_bands_have_a_closed_form(order: int, type_: str) -> None:
    """Truth: closed form. Low-pass to band transforms turn x into a quadratic for the warped frequency."""
    low, high = warped(8, 250), warped(13, 250)
    x = (math.sqrt(2) - 1) ** (1 / (2 * order))
    width = (high - low) * (x if type_ == "band" else 1 / x)
    root = math.sqrt(width**2 + 4 * low * high)
    expected_hz = [math.atan((root + side * width) / 2) * 250 / math.pi for side in (-1, 1)]

    found = effective_cutoffs((stage_of(type_, [8, 13], order, "zero"),), 250.0)

    # As above; 16 poles within 5 Hz cost one digit more.
    np.testing.assert_allclose([edge.effective_hz for edge in found], expected_hz, rtol=1e-7)


def test_coefficients_of_the_worked_example() -> None:
    """Truth: worked example (Winter 2009), signs of b as he writes them."""
    entry = published("filters", "FIL-WINTER-COEF")
    ((b0, b1, b2, _, a1, a2),) = sections(FilterStage(type="lowpass", cutoff_hz=(10.0,), order=2), 100.0)

    for key, found in (("a0", b0), ("a1", b1), ("a2", b2), ("b1", -a1), ("b2", -a2)):
        entry.assert_close(found, key)


def test_sections_of_the_textbook_example() -> None:
    """Truth: worked example (Oppenheim & Schafer 1999): order 6 that just meets 15 dB at 0.3 pi."""
    entry = published("filters", "FIL-OS-BILINEAR")
    omega_c = 2 * math.tan(0.15 * math.pi) / (10**1.5 - 1) ** (1 / 12)
    cutoff_hz = 2 * math.atan(omega_c / 2) / (2 * math.pi)
    sos = sections(FilterStage(type="lowpass", cutoff_hz=(cutoff_hz,), order=6), 1.0)

    entry.assert_close(omega_c, "Omega_c")
    entry.assert_close(np.prod(sos[:, 0]), "gain")
    factors = sorted(([-section[4], section[5]] for section in sos), reverse=True)
    entry.assert_close(factors, "sections_c1_c2")


@pytest.mark.parametrize(("entry_id", "band_hz"), [("FIL-BS5565-360", 60), ("FIL-BS5565-1000", 60)])
def test_band_stop_at_the_mains(entry_id: str, band_hz: float) -> None:
    """Truth: closed form of the gain at exactly 60 Hz, single pass; forward and backward doubles it in dB."""
    entry = ENTRIES[entry_id]
    rate_hz = entry.inputs["fs_hz"]
    for order in (1, 2, 3, 4):
        causal = stage_of("bandstop", [55, 65], order, "causal")
        zero = stage_of("bandstop", [55, 65], order, "zero")
        once, twice = (decibel(response((stage,), rate_hz, band_hz)) for stage in (causal, zero))

        entry.assert_close(once, "single_pass_db", f"N{order}")
        entry.assert_close(twice / 2, "single_pass_db", f"N{order}")


@pytest.mark.parametrize("entry_id", ["FIL-BS5565-360", "FIL-BS5565-1000"])
def test_mains_sine_behind_the_band_stop_has_the_computed_amplitude(entry_id: str) -> None:
    """Truth: closed form. 100 uV of 60 Hz keep the doubled attenuation of order 1 in the middle of a minute."""
    entry = ENTRIES[entry_id]
    rate_hz = entry.inputs["fs_hz"]
    seconds = np.arange(60 * rate_hz) / rate_hz
    mains = signal_of(100 * np.sin(2 * np.pi * 60 * seconds), rate_hz)

    filtered = apply_stages(mains, (stage_of("bandstop", [55, 65], 1, "zero"),)).samples[0]

    middle = filtered[20 * rate_hz : 40 * rate_hz]
    # Whole periods: the RMS is the amplitude over sqrt(2). 0.004 dB is twice the tolerance of the single pass.
    found_db = 20 * math.log10(math.sqrt(2 * np.mean(middle**2)) / 100)
    assert found_db == pytest.approx(2 * entry.expected["single_pass_db"]["N1"], abs=0.004)


def test_band_stop_at_50_hz() -> None:
    """Truth: closed form, as above at 250 Hz."""
    entry = published("filters", "FIL-BS4555-250")
    for order in (1, 2, 3, 4):
        stage = stage_of("bandstop", [45, 55], order, "causal")

        entry.assert_close(decibel(response((stage,), 250.0, 50.0)), f"N{order}")


def test_gain_of_the_alpha_band_pass() -> None:
    """Truth: closed form at five frequencies; both edges are at half power."""
    entry = published("filters", "FIL-BP-EEG")
    stage = stage_of("band", entry.inputs["band_hz"], 3, "causal")

    entry.assert_close(decibel(response((stage,), 250.0, entry.inputs["f_hz"])))


@pytest.mark.parametrize("entry_id", ids("FIL-IRLEN"))
def test_runs_up_to_the_settling_time_are_refused(entry_id: str) -> None:
    """Truth: computed from the largest pole radius by two other programs; ln 0.01 / ln rho, rounded up."""
    entry = ENTRIES[entry_id]
    inputs = entry.inputs
    stage = stage_of(inputs["type"], inputs["band_hz"], inputs["prototype_order"], "zero")
    needed = math.ceil(entry.expected["n_1pct_samples"])

    with pytest.raises(StepError, match="in which this filter settles"):
        apply_stages(signal_of(np.zeros(needed), inputs["fs_hz"]), (stage,))
    apply_stages(signal_of(np.zeros(needed + 1), inputs["fs_hz"]), (stage,))


def test_sine_keeps_its_phase_and_the_squared_gain() -> None:
    """Truth: closed form |H|^2 (Gustafsson 1996), least-squares fit on the middle 10 s of a minute."""
    entry = published("filters", "FIL-ZEROPHASE-SINE")
    stage = stage_of("low", 10, 2, "zero")
    seconds = np.arange(60 * 250) / 250
    middle = slice(25 * 250, 35 * 250)
    for index, frequency_hz in enumerate(entry.inputs["f_hz"]):
        angle = 2 * np.pi * frequency_hz * seconds
        filtered = apply_stages(signal_of(np.sin(angle), 250), (stage,)).samples[0, middle]
        basis = np.column_stack([np.sin(angle[middle]), np.cos(angle[middle])])
        (in_phase, quadrature), *_ = np.linalg.lstsq(basis, filtered)

        expected = entry.expected["amplitude"][index]
        assert math.hypot(in_phase, quadrature) == pytest.approx(expected, abs=1e-6)
        assert math.atan2(quadrature, in_phase) == pytest.approx(0, abs=1e-6)


@pytest.mark.parametrize(("stage", "rate_hz"), EXAMPLES)
def test_response_equals_scipy(stage: FilterStage, rate_hz: float) -> None:
    """Truth: independent library. Above 1 % of the lowest cut-off, where its plain powers of z keep 6 digits."""
    lowest_hz = min(stage.cutoff_hz) / 100
    frequencies_hz = np.geomspace(lowest_hz, rate_hz / 2, 500, endpoint=False)
    _, expected = scipy_signal.sosfreqz(sections(stage, rate_hz), frequencies_hz, fs=rate_hz)

    found = response((stage,), rate_hz, frequencies_hz)

    np.testing.assert_allclose(found, np.abs(expected) ** stage.passes, rtol=1e-6, atol=1e-12)


@pytest.mark.parametrize("order", [1, 2, 4, 8])
def test_response_of_a_slow_high_pass_is_exact_near_zero(order: int) -> None:
    """Truth: closed form. The slope below the cut-off holds over three decades at 0.1 Hz of 1000 Hz."""
    stage = FilterStage(type="highpass", cutoff_hz=(0.1,), order=order, phase="causal")
    frequencies_hz = np.geomspace(1e-4, 1, 50)
    ratio = np.tan(np.pi * 0.1 / 1000) / np.tan(np.pi * frequencies_hz / 1000)

    found = response((stage,), 1000.0, frequencies_hz)

    # Poles 6e-4 from z = 1 keep, of 16 digits, about 9 in the squared distance of a pair from it.
    np.testing.assert_allclose(found, 1 / np.sqrt(1 + ratio ** (2 * order)), rtol=1e-7)


@pytest.mark.parametrize(("stage", "rate_hz"), EXAMPLES)
def test_filtered_noise_equals_scipy_far_from_the_edges(stage: FilterStage, rate_hz: float) -> None:
    """Truth: independent library. Its own padding differs, so the middle third is compared."""
    samples = np.random.default_rng(1).normal(size=600_000)
    sos = sections(stage, rate_hz)
    run = scipy_signal.sosfiltfilt if stage.phase == "zero" else scipy_signal.sosfilt

    found = apply_stages(signal_of(samples, int(rate_hz)), (stage,)).samples[0]

    middle = slice(200_000, 400_000)
    np.testing.assert_allclose(found[middle], run(sos, samples)[middle], atol=1e-9)


def test_one_cascade_has_the_response_of_its_stages_in_turn() -> None:
    """Truth: independent library, which runs each stage forward and backward by itself."""
    stages = (EXAMPLES[1][0], FilterStage(type="bandstop", cutoff_hz=(48.0, 52.0), order=2))
    samples = np.random.default_rng(2).normal(size=60_000)
    expected = samples
    for stage in stages:
        expected = scipy_signal.sosfiltfilt(sections(stage, 1000.0), expected)

    found = apply_stages(signal_of(samples, 1000), stages).samples[0]

    # The slowest pole settles to 1 % in 0.5 s: ten seconds from the edges nothing of them is left.
    np.testing.assert_allclose(found[10_000:-10_000], expected[10_000:-10_000], atol=1e-12)


def test_filtered_noise_equals_mne() -> None:
    """Truth: independent library, with its own choice of padding; compared far from the edges."""
    samples = np.random.default_rng(3).normal(size=30_000)
    iir = {"order": 4, "ftype": "butter", "output": "sos"}
    expected = mne.filter.filter_data(
        samples, 250.0, 1.0, 40.0, method="iir", iir_params=iir, phase="zero", verbose="error"
    )

    stage = FilterStage(type="bandpass", cutoff_hz=(1.0, 40.0), order=4)
    found = apply_stages(signal_of(samples, 250), (stage,)).samples[0]

    np.testing.assert_allclose(found[5000:-5000], expected[5000:-5000], atol=1e-9)


def test_causal_pass_equals_the_difference_equations() -> None:
    """Truth: definition, sample by sample: sections in direct form, each from rest at its first input."""
    stage = FilterStage(type="bandpass", cutoff_hz=(5.0, 40.0), order=2, phase="causal")
    samples = np.random.default_rng(4).normal(size=500)
    expected = samples.copy()
    for b0, b1, b2, _, a1, a2 in sections(stage, 250.0):
        settled = expected[0] * (b0 + b1 + b2) / (1 + a1 + a2)
        x1 = x2 = expected[0]
        y1 = y2 = settled
        for index, x0 in enumerate(expected):
            y0 = b0 * x0 + b1 * x1 + b2 * x2 - a1 * y1 - a2 * y2
            expected[index], x1, x2, y1, y2 = y0, x0, x1, y0, y1

    found = apply_stages(signal_of(samples, 250), (stage,)).samples[0]

    np.testing.assert_allclose(found, expected, atol=1e-12)


def test_slow_band_at_a_high_rate_is_stable_in_sections() -> None:
    """Truth: closed form, beside the known failure of one polynomial: 0.5-4 Hz of order 4 at 2048 Hz."""
    _, polynomial = scipy_signal.butter(4, [0.5, 4], "bandpass", fs=2048)
    assert np.abs(np.roots(polynomial)).max() > 1
    stage = FilterStage(type="bandpass", cutoff_hz=(0.5, 4.0), order=4)
    seconds = np.arange(60 * 2048) / 2048
    centre_hz = math.atan(math.sqrt(warped(0.5, 2048) * warped(4, 2048))) * 2048 / math.pi

    filtered = apply_stages(signal_of(np.sin(2 * np.pi * centre_hz * seconds), 2048), (stage,)).samples[0]

    # The centre passes with gain 1; 20 s from the edges, five settling times, transients are below 1e-9.
    middle = slice(20 * 2048, 40 * 2048)
    np.testing.assert_allclose(filtered[middle], np.sin(2 * np.pi * centre_hz * seconds[middle]), atol=1e-8)


def test_step_near_the_edge_settles_within_the_padding() -> None:
    """Truth: closed form (E4). 0.1 Hz of order 2 rings for 10 s; the padded edge of an offset does not."""
    stage = FilterStage(type="highpass", cutoff_hz=(0.1,), order=2)
    samples = 500 + 10 * np.sin(2 * np.pi * 10 * np.arange(60 * 500) / 500)

    filtered = apply_stages(signal_of(samples, 500), (stage,)).samples[0]

    # 10 Hz passes with gain 1 - 1e-8; of the offset, 50 times as large, nothing may be left at the edges.
    np.testing.assert_allclose(filtered[:500], samples[:500] - 500, atol=0.01)
