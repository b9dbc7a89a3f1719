"""Filter designs other than plain Butterworth, notches, moved cut-offs: against tables, closed forms, scipy and mne."""

from __future__ import annotations

import math
from fractions import Fraction
from typing import TYPE_CHECKING, Any

import mne
import numpy as np
import pytest
from scipy import signal as scipy_signal

from bandcairn.signal import Run, Signal
from bandcairn.steps.filter import FilterStage, apply_stages, effective_cutoffs, response, sections, taps
from bandcairn.steps.filter_design import bands_of, half_power_ratio, n_taps
from bandcairn.steps.filter_report import report
from reference import load, published

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

ENTRIES = load("filter_designs")
ADJUSTED = {name: entry for name, entry in load("filters").items() if name.startswith("FIL-ADJCUT")}
ELLIPTIC: dict[str, Any] = {"design": "elliptic", "ripple_db": 0.5, "attenuation_db": 50.0}
RATE_HZ = 250.0


def ids(prefix: str) -> list[str]:
    """Return the ids of the entries that begin alike."""
    return [entry_id for entry_id in ENTRIES if entry_id.startswith(prefix)]


def low(cutoff_hz: float, order: int | None = None, **options: Any) -> FilterStage:  # noqa: ANN401
    """Return a causal low-pass: one pass shows the design itself."""
    return FilterStage(
        **{"type": "lowpass", "cutoff_hz": (cutoff_hz,), "order": order, "phase": "causal", **options}
    )


def signal_of(samples: NDArray[np.float64], rate_hz: int = 250) -> Signal:
    """Return one channel in one run."""
    return Signal(samples[np.newaxis].copy(), Fraction(rate_hz), ("c",), (Run(0, len(samples), Fraction(0)),))


def noise(n_samples: int, seed: int = 1) -> NDArray[np.float64]:
    """Return white noise of variance 1."""
    return np.random.default_rng(seed).normal(size=n_samples)


def decibel(stage: FilterStage, frequencies_hz: object, rate_hz: float = RATE_HZ) -> NDArray[np.float64]:
    """Return the gain of a stage in dB."""
    return np.asarray(20 * np.log10(response((stage,), rate_hz, np.asarray(frequencies_hz, float))))


def warped(frequency_hz: float, rate_hz: float = RATE_HZ) -> float:
    """Return the frequency of the analogue filter behind the bilinear transform."""
    return math.tan(math.pi * frequency_hz / rate_hz)


@pytest.mark.parametrize("entry_id", [name for name in ids("FIL-CHEB1") if name != "FIL-CHEB1-DIG"])
def test_poles_of_chebyshev_multiply_to_the_handbook_polynomial(entry_id: str) -> None:
    """Truth: published table (Weinberg 1962). Digital poles taken back to a pass-band edge of 1 rad/s."""
    entry = ENTRIES[entry_id]
    order, ripple_db = entry.inputs["order"], float(entry.inputs["ripple_db"])
    sos = sections(low(40, order, design="chebyshev1", ripple_db=ripple_db), RATE_HZ)
    z = np.concatenate([np.roots(np.trim_zeros(section[3:], "b")) for section in sos])

    poles = (z - 1) / (z + 1) / warped(40)

    entry.assert_close(np.poly(poles).real[1:])


def test_gain_of_a_chebyshev_low_pass() -> None:
    """Truth: closed form 1 / (1 + eps^2 T_N^2): order 5, 1 dB, edge 40 Hz; the edge lies at -1 dB, not -3 dB."""
    entry = published("filter_designs", "FIL-CHEB1-DIG")

    entry.assert_close(decibel(low(40, 5, design="chebyshev1", ripple_db=1.0), entry.inputs["f_hz"]))


def test_least_orders_that_meet_a_specification() -> None:
    """Truth: closed form of the orders. That many meet 1 dB at 40 Hz and 40 dB at 60 Hz, one less does not."""
    entry = published("filter_designs", "FIL-ORDERS")
    ripple: dict[str, Any] = {"ripple_db": 1.0}
    stop: dict[str, Any] = {"attenuation_db": 40.0}

    def butterworth(order: int) -> FilterStage:
        """Return the filter that loses 1 dB at 40 Hz."""
        edge = warped(40) * (10**0.1 - 1) ** (-1 / (2 * order))
        return low(RATE_HZ / math.pi * math.atan(edge), order)

    designs: dict[str, Callable[[int], FilterStage]] = {
        "butterworth": butterworth,
        "cheby1": lambda order: low(40, order, design="chebyshev1", **ripple),
        "cheby2": lambda order: low(60, order, design="chebyshev2", **stop),
        "elliptic": lambda order: low(40, order, design="elliptic", **ripple, **stop),
    }
    slack_db = 1e-6
    for name, design in designs.items():
        needed = entry.expected[name]
        enough, too_few = (
            (
                decibel(design(order), 40) >= -1 - slack_db,
                bool(np.all(stopped(design(order)) <= -40 + slack_db)),
            )
            for order in (needed, needed - 1)
        )
        assert all(enough), name
        assert not all(too_few), name


def stopped(stage: FilterStage) -> NDArray[np.float64]:
    """Return the gain from 60 Hz on."""
    return decibel(stage, np.linspace(60, 124.9, 3000))


@pytest.mark.parametrize("order", range(1, 9))
def test_ripples_are_equal_and_as_large_as_declared(order: int) -> None:
    """Truth: definition of the designs: ripple reaches exactly its limit in the pass-band, loss in the stop-band."""
    passed, stop = np.linspace(0, 40, 20_001), np.linspace(40, 124.99, 20_001)

    first = decibel(low(40, order, design="chebyshev1", ripple_db=0.5), passed)
    second = decibel(low(40, order, design="chebyshev2", attenuation_db=50.0), stop)
    both = decibel(low(40, order, **ELLIPTIC), passed)

    # A grid of 2 mHz misses the bottom of a ripple by less than this.
    assert (first.min(), first.max()) == (pytest.approx(-0.5, abs=1e-3), pytest.approx(0, abs=1e-3))
    assert second.max() == pytest.approx(-50, abs=1e-3)
    assert (both.min(), both.max()) == (pytest.approx(-0.5, abs=1e-3), pytest.approx(0, abs=1e-3))


@pytest.mark.parametrize("order", range(2, 9))
def test_stop_band_of_an_elliptic_filter_holds(order: int) -> None:
    """Truth: definition: beyond its first zero the loss never falls below what is declared, and just reaches it."""
    gain = decibel(low(20, order, **ELLIPTIC), np.linspace(20, 124.99, 40_001))
    beyond = gain[np.argmax(gain <= -50) :]

    assert beyond.max() == pytest.approx(-50, abs=1e-3)


@pytest.mark.parametrize(
    ("design", "name", "options"),
    [
        ("chebyshev1", "cheby1", {"rp": 0.5}),
        ("chebyshev2", "cheby2", {"rs": 50}),
        ("elliptic", "ellip", {"rp": 0.5, "rs": 50}),
        ("bessel", "bessel", {"norm": "mag"}),
    ],
)
@pytest.mark.parametrize("type_", ["lowpass", "highpass", "bandpass", "bandstop"])
def test_filtered_noise_equals_scipy_in_every_design(
    design: str, name: str, options: dict[str, Any], type_: str
) -> None:
    """Truth: independent library, by its own functions of the designs; far from the edges, which it pads otherwise."""
    edges = {"lowpass": (40.0,), "highpass": (8.0,)}.get(type_, (8.0, 40.0))
    stage = FilterStage(
        type=type_,  # type: ignore[arg-type]
        cutoff_hz=edges,
        order=4,
        design=design,  # type: ignore[arg-type]
        ripple_db=0.5,
        attenuation_db=50.0,
    )
    wanted = edges if len(edges) == 2 else edges[0]
    sos = getattr(scipy_signal, name)(N=4, Wn=wanted, btype=type_, fs=RATE_HZ, output="sos", **options)
    samples = noise(60_000)

    found = apply_stages(signal_of(samples), (stage,)).samples[0]

    expected = scipy_signal.sosfiltfilt(sos, samples)
    np.testing.assert_allclose(found[20_000:40_000], expected[20_000:40_000], atol=1e-9)


@pytest.mark.parametrize(
    ("options", "ftype"),
    [
        ({"design": "chebyshev2", "attenuation_db": 40.0}, {"ftype": "cheby2", "rs": 40}),
        (
            {"design": "elliptic", "ripple_db": 1.0, "attenuation_db": 40.0},
            {"ftype": "ellip", "rp": 1, "rs": 40},
        ),
    ],
)
def test_filtered_noise_equals_mne_in_other_designs(options: dict[str, Any], ftype: dict[str, Any]) -> None:
    """Truth: independent library, with its own choice of padding; compared far from the edges."""
    samples = noise(30_000)
    iir = {"order": 4, "output": "sos", **ftype}
    expected = mne.filter.filter_data(
        samples, RATE_HZ, 5.0, 40.0, method="iir", iir_params=iir, phase="zero", verbose="error"
    )

    stage = FilterStage(type="bandpass", cutoff_hz=(5.0, 40.0), order=4, **options)
    found = apply_stages(signal_of(samples), (stage,)).samples[0]

    np.testing.assert_allclose(found[10_000:-10_000], expected[10_000:-10_000], atol=1e-9)


def test_taps_give_the_same_filtered_noise_as_mne() -> None:
    """Truth: independent library. Its low-pass ends its pass-band where ours begins the transition: 40, not 45 Hz."""
    samples = noise(30_000)
    expected = mne.filter.filter_data(
        samples,
        RATE_HZ,
        None,
        40.0,
        h_trans_bandwidth=10.0,
        fir_design="firwin",
        phase="zero",
        verbose="error",
    )

    stage = low(45, design="fir", window="hamming", transition_hz=10.0, phase="zero")
    found = apply_stages(signal_of(samples), (stage,)).samples[0]

    np.testing.assert_allclose(found[1000:-1000], expected[1000:-1000], atol=1e-9)


@pytest.mark.parametrize("phase", ["zero", "causal"])
@pytest.mark.parametrize(
    "options", [{"window": "hann"}, {"window": "hamming"}, {"window": "blackman"}, {"attenuation_db": 60.0}]
)
def test_taps_run_as_the_sum_that_defines_them(phase: str, options: dict[str, Any]) -> None:
    """Truth: definition: a sum over the taps for every sample, of a windowed sinc that adds up to 1."""
    stage = low(40, design="fir", transition_hz=10.0, phase=phase, **options)
    length = n_taps(stage, RATE_HZ)
    window = options.get("window") or ("kaiser", scipy_signal.kaiser_beta(60))
    lags = np.arange(length) - length // 2
    impulse = np.sinc(2 * 40 / RATE_HZ * lags) * scipy_signal.get_window(window, length, fftbins=False)
    impulse /= impulse.sum()
    samples = noise(1000)

    found = apply_stages(signal_of(samples), (stage,)).samples[0]

    delay = length // 2 if phase == "causal" else 0
    for index in range(200, 800):
        expected = sum(h * samples[index - delay - lag] for h, lag in zip(impulse, lags, strict=True))
        assert found[index] == pytest.approx(expected, abs=1e-12)


@pytest.mark.parametrize("entry_id", ids("FIL-FIRWIN"))
def test_ripple_and_stop_band_of_the_windows(entry_id: str) -> None:
    """Truth: published table (Ifeachor & Jervis 2002, 7.3): transition times length, ripple, attenuation."""
    entry = ENTRIES[entry_id]
    transition_hz = entry.expected["transition_width_times_N"] * RATE_HZ / 201
    stage = low(40, design="fir", window=entry.inputs["window"], transition_hz=transition_hz)
    assert n_taps(stage, RATE_HZ) == 201

    frequencies_hz = np.linspace(0, 125, 50_001)[:-1]
    gain = decibel(stage, frequencies_hz)

    # The overshoot before the transition, and the highest lobe behind the first zero.
    entry.assert_close(gain.max(), "passband_ripple_db")
    first_zero = np.flatnonzero((frequencies_hz[1:-1] > 40) & (np.diff(gain)[1:] > 0))[0]
    entry.assert_close(-gain[first_zero:].max(), "stopband_attenuation_db")


def test_length_and_shape_of_kaiser_s_worked_example() -> None:
    """Truth: worked example (Oppenheim & Schafer 1999, 7.3): order 37; made even, that its delay is whole samples."""
    entry = published("filter_designs", "FIL-KAISER-LP")
    attenuation_db = -20 * math.log10(entry.inputs["delta"])
    stage = low(0.25, design="fir", attenuation_db=attenuation_db, transition_hz=0.1)

    entry.assert_close(attenuation_db, "A_db")
    assert n_taps(stage, 1.0) == entry.expected["M"] + 2
    ratio = taps(stage, 1.0)[0] / taps(stage, 1.0)[19] / np.sinc(2 * 0.25 * 19)
    entry.assert_close(beta_of_edge(float(ratio)), "beta")


@pytest.mark.parametrize("entry_id", ids("FIL-KAISERBETA"))
def test_beta_of_kaiser_s_window(entry_id: str) -> None:
    """Truth: Kaiser's empirical formula (1974), read off the first tap: the window's edge is 1 / I0(beta)."""
    entry = ENTRIES[entry_id]
    impulse = taps(
        low(0.26, design="fir", attenuation_db=float(entry.inputs["A_db"]), transition_hz=0.1), 1.0
    )
    half = len(impulse) // 2

    entry.assert_close(beta_of_edge(impulse[0] / impulse[half] / np.sinc(2 * 0.26 * half)))


def beta_of_edge(edge: float) -> float:
    """Return the beta at which Kaiser's window ends at `edge`."""
    betas = np.linspace(0, 12, 1_200_001)
    return float(np.interp(-edge, -1 / np.i0(betas), betas))


def test_cutoff_of_taps_lies_at_6_db() -> None:
    """Truth: closed form: the window smooths the ideal step symmetrically, so half the amplitude is left there."""
    entry = published("filter_designs", "FIL-FIR-6DB")
    stage = low(40, design="fir", window="hamming", transition_hz=3.3 * RATE_HZ / 201)
    assert n_taps(stage, RATE_HZ) == entry.inputs["taps"]

    entry.assert_close(decibel(stage, 40))


def test_delay_of_causal_taps() -> None:
    """Truth: closed form (N - 1) / 2 samples; zero phase takes just that off."""
    entry = published("filter_designs", "FIL-FIR-DELAY")
    for length, seconds in zip(entry.inputs["taps"], entry.expected["seconds"], strict=True):
        stage = low(40, design="fir", window="hamming", transition_hz=3.3 * RATE_HZ / length)
        assert n_taps(stage, RATE_HZ) == length

        (told,) = report((stage,), RATE_HZ)

        assert told.delay is not None
        assert told.delay.delay_s == pytest.approx(seconds, abs=1e-9)


@pytest.mark.parametrize("entry_id", ids("FIL-NOTCH"))
def test_second_order_notch(entry_id: str) -> None:
    """Truth: closed form (Orfanidis 1996, 11.3): both -3 dB edges, pole radius and settling; one pass, order 1."""
    entry = ENTRIES[entry_id]
    f0_hz, rate_hz = float(entry.inputs["f0_hz"]), float(entry.inputs["fs_hz"])
    stage = notch(f0_hz, f0_hz / entry.inputs["Q"])

    (told,) = report((stage,), rate_hz)

    lower, upper = told.cutoffs
    entry.assert_close(upper.effective_hz - lower.effective_hz, "bandwidth_hz")
    entry.assert_close(lower.effective_hz, "lower_3db_hz")
    entry.assert_close(upper.effective_hz, "upper_3db_hz")
    entry.assert_close(told.largest_pole_radius, "pole_radius")
    assert told.settling_s * rate_hz == math.ceil(entry.expected["n_eff_1pct_samples"])


def notch(mains_hz: float, width_hz: float) -> FilterStage:
    """Return the notch of two poles, in one pass."""
    return FilterStage(
        type="notch", mains_hz=mains_hz, width_hz=width_hz, order=1, phase="causal", harmonics=False
    )


def test_coefficients_of_the_worked_notch() -> None:
    """Truth: worked example (Orfanidis 1996, 11.3): 1750 Hz, 500 Hz wide at 10 kHz."""
    entry = published("filter_designs", "FIL-ORF-NOTCH")
    stage = notch(float(entry.inputs["f0_hz"]), float(entry.inputs["bandwidth_hz"]))

    ((b0, b1, b2, _, a1, a2),) = sections(stage, float(entry.inputs["fs_hz"]))

    entry.assert_close(b0, "gain")
    entry.assert_close(-b1 / b0, "num_c1")
    entry.assert_close(-a1, "den_c1")
    entry.assert_close(a2, "den_c2")
    assert b2 / b0 == pytest.approx(1, abs=1e-12)


@pytest.mark.parametrize("order", [1, 2, 3, 4])
def test_two_passes_of_a_notch_have_the_gain_of_its_closed_form(order: int) -> None:
    """Truth: closed form: 1 / (1 + x^2N) for two passes, x chosen so that the width declared is that of both."""
    stage = FilterStage(type="notch", mains_hz=50.0, width_hz=2.0, order=order, harmonics=False)
    frequencies_hz = np.array([45, 49, 49.5, 49.9, 50.1, 50.5, 51, 55])
    centre, axis = warped(50), np.tan(np.pi * frequencies_hz / RATE_HZ)
    width = (1 + centre**2) * math.tan(math.pi * 2 / RATE_HZ) * (math.sqrt(2) - 1) ** (1 / (2 * order))
    expected = 1 / (1 + (width * axis / (centre**2 - axis**2)) ** (2 * order))

    # Poles a hundredth from the zeros keep some nine digits.
    np.testing.assert_allclose(response((stage,), RATE_HZ, frequencies_hz), expected, rtol=1e-6, atol=1e-12)


@pytest.mark.parametrize("entry_id", ADJUSTED)
def test_corrected_design_has_the_published_cutoff(entry_id: str) -> None:
    """Truth: closed form (Robertson & Dowling 2003, Winter 2009), pre-warped."""
    entry = ADJUSTED[entry_id]
    inputs = entry.inputs
    desired_hz = float(inputs["desired_fc_hz"])
    stage = FilterStage(
        type="lowpass" if inputs["type"] == "low" else "highpass",
        cutoff_hz=(desired_hz,),
        order=inputs["order"],
        corrected=True,
    )

    (band,) = bands_of(stage, float(inputs["fs_hz"]))

    entry.assert_close(band.design_hz[0], "design_fc_hz")
    entry.assert_close(decibel(stage, desired_hz, float(inputs["fs_hz"])), "gain_at_desired_fc_db")


@pytest.mark.parametrize("design", ["butterworth", "bessel"])
@pytest.mark.parametrize("type_", ["lowpass", "highpass", "bandpass", "bandstop"])
@pytest.mark.parametrize("order", range(1, 9))
def test_corrected_cutoffs_lie_where_they_were_asked_for(design: str, type_: str, order: int) -> None:
    """Truth: definition: half power of both passes at the requested cut-offs; 400 Hz at 1000 Hz among them."""
    edges = {"lowpass": (400.0,), "highpass": (400.0,)}.get(type_, (100.0, 400.0))
    stage = FilterStage(
        type=type_,  # type: ignore[arg-type]
        cutoff_hz=edges,
        order=order,
        design=design,  # type: ignore[arg-type]
        corrected=True,
    )

    gain_db = decibel(stage, edges, 1000.0)

    np.testing.assert_allclose(gain_db, 10 * math.log10(0.5), atol=1e-6)
    found = [edge.effective_hz for edge in effective_cutoffs((stage,), 1000.0)]
    np.testing.assert_allclose(found, edges, rtol=1e-7)


@pytest.mark.parametrize("order", range(1, 9))
def test_bessel_prototype_is_half_power_at_its_cutoff_and_its_ratio_is_that_of_two_passes(order: int) -> None:
    """Truth: definition by reverse Bessel polynomials, scaled to half power at 1 rad/s, and their gain at the ratio."""
    # theta_n(s) = sum of (2n - k)! / (2^(n - k) k! (n - k)!) s^k
    theta = [
        math.factorial(2 * order - k) / (2 ** (order - k) * math.factorial(k) * math.factorial(order - k))
        for k in range(order, -1, -1)
    ]

    def power(frequency: float) -> float:
        return float(abs(theta[-1] / np.polyval(theta, 1j * frequency)) ** 2)

    low_, high = 0.0, 10.0
    for _ in range(200):
        middle = (low_ + high) / 2
        low_, high = (middle, high) if power(middle) > 0.5 else (low_, middle)
    stage = low(40, order, design="bessel", phase="zero")
    frequencies_hz = np.array([5, 20, 40, 60, 100])
    expected = [power(low_ * warped(f) / warped(40)) for f in frequencies_hz]

    np.testing.assert_allclose(response((stage,), RATE_HZ, frequencies_hz), expected, rtol=1e-7)
    assert power(low_ * half_power_ratio(stage)) == pytest.approx(math.sqrt(0.5), abs=1e-9)


def test_group_delay_equals_scipy() -> None:
    """Truth: independent library, on one polynomial of low order, where it is well conditioned."""
    stage = FilterStage(type="bandpass", cutoff_hz=(5.0, 40.0), order=2, phase="causal")
    middle_hz = math.sqrt(5 * 40)
    b, a = scipy_signal.butter(2, [5, 40], "bandpass", fs=RATE_HZ)
    _, expected = scipy_signal.group_delay((b, a), [middle_hz], fs=RATE_HZ)

    (told,) = report((stage,), RATE_HZ)

    assert told.delay is not None
    assert told.delay.frequency_hz == middle_hz
    assert told.delay.delay_s * RATE_HZ == pytest.approx(expected[0], rel=1e-6)
