"""Frozen outputs: a step whose numbers change gets a new version, or every store keeps the old numbers unnoticed.

Each step computes nodes from inputs of its own, never from the output of the step before it, so that a change is told
where it was made. The numbers stand in ``frozen_outputs.json`` beside the version that gave them. They say nothing of
being right: that is for the reference checks.

After a version has been raised in ``nodes/catalogue.py``: ``python tests/steps/test_frozen_outputs.py`` freezes the
numbers of that step anew, and leaves all others alone.
"""

from __future__ import annotations

import hashlib
import json
import math
from fractions import Fraction
from pathlib import Path
from typing import TYPE_CHECKING, Any, cast

import numpy as np
import pytest

from bandcairn.execution.compute import compute
from bandcairn.execution.frames import epochs_to_frame, signal_to_frame, spectra_to_frame
from bandcairn.execution.quality_nodes import verdict_node
from bandcairn.nodes.catalogue import STEPS, VERSIONS
from bandcairn.nodes.key import canonical_json
from bandcairn.nodes.node import make_node
from bandcairn.signal import Run, Signal
from bandcairn.steps.epoch import Epochs
from bandcairn.store.frame import Frame

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence

    from numpy.typing import NDArray

    from bandcairn.execution.project import Project

FROZEN = Path(__file__).with_name("frozen_outputs.json")
# They compute no number: samples are read as they stand, rows are gathered.
WITHOUT_NUMBERS = {"load", "table"}
# Between processors the last bits differ; nothing that a step means does.
RTOL = 1e-9
# A column with no more values than this is frozen value by value.
MOST_VALUES = 30


def signal_of(rows: NDArray[np.float64], rate_hz: int, *, gap: bool = False) -> Signal:
    """Return a signal of channels A, B, …, in one run or in two with a second between them."""
    n = rows.shape[1]
    half = n // 2
    runs: tuple[Run, ...] = (Run(0, n, Fraction(0)),)
    if gap:
        runs = (Run(0, half, Fraction(0)), Run(half, n, Fraction(half, rate_hz) + 1))
    return Signal(rows.copy(), Fraction(rate_hz), tuple("ABCD"[: len(rows)]), runs)


def noise(seed: int, channels: int, rate_hz: int, length_s: float) -> NDArray[np.float64]:
    """Return coloured noise on an offset, in uV."""
    white = np.random.default_rng(seed).standard_normal((channels, round(rate_hz * length_s)))
    return 20 * white + np.cumsum(white, axis=1) + np.arange(1, channels + 1)[:, None]


def heart_beats(seed: int, length_s: float) -> NDArray[np.float64]:
    """Return times of beats, whose distance breathes, with one beat lost and one too early."""
    rng = np.random.default_rng(seed)
    k = np.arange(round(length_s / 0.8))
    times_s = 0.4 + np.cumsum(0.8 + 0.05 * np.sin(2 * np.pi * 0.2 * k) + 0.01 * rng.standard_normal(k.size))
    times_s[20] -= 0.3
    return np.delete(times_s[times_s < length_s], 50)


def ecg(seed: int, rate_hz: int, length_s: float) -> NDArray[np.float64]:
    """Return an ECG of narrow R peaks and broad T waves, and the same upside down."""
    time_s = np.arange(round(rate_hz * length_s)) / rate_hz
    wave = 5 * np.random.default_rng(seed).standard_normal(time_s.size)
    for beat_s in heart_beats(seed, length_s):
        wave += 1000 * np.exp(-0.5 * ((time_s - beat_s) / 0.012) ** 2)
        wave += 200 * np.exp(-0.5 * ((time_s - beat_s - 0.25) / 0.05) ** 2)
    return np.stack([wave, -0.7 * wave])


def epochs_of(signal: Signal, length_s: float, segments: tuple[tuple[str, float], ...]) -> Frame:
    """Return whole epochs one after the other, of which every fifth is rejected in the first channel."""
    length = round(signal.rate_hz * Fraction(length_s))
    first = np.arange(0, signal.samples.shape[1] - length + 1, length)
    share = len(first) / len(segments)
    reason = np.zeros((len(signal.channels), len(first)), np.int8)
    reason[0, ::5] = 1
    epochs = Epochs(
        first=first,
        start_s=first / float(signal.rate_hz),
        segment=tuple(segments[int(index / share)][0] for index in range(len(first))),
        length=length,
        peak_to_peak_uv=np.ones(reason.shape),
        reason=reason,
    )
    return epochs_to_frame(epochs, signal, segments)


def node_of(step: str, parameters: Mapping[str, Any], **parents: Frame) -> Frame:
    """Compute one node."""
    node = make_node(step, parameters=canonical_json(parameters))
    return compute(
        node, {role.replace("__", "/"): frame for role, frame in parents.items()}, cast("Project", None)
    )


def quality() -> Iterator[Frame]:
    """Yield clean, clipped, flat and copied channels, across a gap, behind a recorder with filters."""
    rows = noise(1, 4, 250, 8)
    rows[0] += 9 * np.sin(2 * np.pi * 49.9 * np.arange(rows.shape[1]) / 250)
    rows[1] = np.clip(rows[1], -20, 20)
    rows[2, 500:1200] = 7.0
    rows[3] = rows[0]
    parameters = {
        "mains_hz": 50,
        "prefilter": ["HP:0.5Hz LP:70Hz", "TC:0.3s", "LP 30 Hz ?", ""],
        "lowpass_hz": 60,
        "range_uv": [-400, 400],
    }
    yield node_of("quality", parameters, signal=signal_to_frame(signal_of(rows, 250, gap=True)))


def verdict() -> Iterator[Frame]:
    """Yield the verdicts on an EEG and on an ECG."""
    frequencies_hz = np.arange(0, 64.25, 0.5)
    measures = {"clipped_share": 0.02, "lsb_uv": 0.5, "smallest_step_uv": 4.0, "typical_rms_uv": 0.4}
    measures |= {"recorder_highpass_hz": 0.5, "recorder_lowpass_hz": 30.0, "typical_peak_to_peak_uv": 900.0}
    held = Frame(
        {"frequency_hz": frequencies_hz, "density/A": 40 / (1 + frequencies_hz) ** 2},
        {"rate_hz": "128", "channels": ["A"], "identical": {}, "measures": {"A": measures}},
    )
    limits: dict[str, Any] = {"clipped_share": 0.01, "quantisation_margin_db": 10, "beyond_recorder_share": 0}
    bands_hz = [["delta", 0.5, 4], ["gamma", 20, 45], ["", 0.5, 45]]
    judged_by: dict[str, Any] = {"signal": "s", "kind": "eeg", "bands_hz": bands_hz}
    limits_of_eeg = {**limits, "typical_rms_uv": [1, 500]}
    yield verdict_node({**judged_by, "limits": limits_of_eeg}, {"quality/r1": held}, {"quality/r1": "key"})
    judged_by = {"signal": "s", "kind": "ecg", "bands_hz": [["", 0.5, None]], "resample_hz": 100}
    limits |= {"beats_rate_hz": 250, "typical_peak_to_peak_uv": [50, 20000]}
    yield verdict_node({**judged_by, "limits": limits}, {"quality/r1": held}, {"quality/r1": "key"})


def resample() -> Iterator[Frame]:
    """Yield a whole and a broken ratio, the latter across a gap."""
    parameters = ({"rate_hz": 128}, {"rate_hz": 102.4})
    yield node_of("resample", parameters[0], signal=signal_to_frame(signal_of(noise(2, 2, 256, 8), 256)))
    yield node_of(
        "resample", parameters[1], signal=signal_to_frame(signal_of(noise(3, 1, 256, 16), 256, gap=True))
    )


def reference() -> Iterator[Frame]:
    """Yield all three kinds of reference."""
    signal = signal_to_frame(signal_of(noise(17, 3, 250, 4), 250, gap=True))
    yield node_of("reference", {"reference": "average"}, signal=signal)
    yield node_of("reference", {"reference": ["B", "C"]}, signal=signal)
    yield node_of("reference", {"pairs": [["C-A", "C", "A"], ["A-B", "A", "B"]]}, signal=signal)


def filter_() -> Iterator[Frame]:
    """Yield every type, both phases and every design, across a gap."""
    stages = [
        {"type": "bandpass", "cutoff_hz": [1, 40], "order": 4, "phase": "zero"},
        {"type": "bandstop", "cutoff_hz": [48, 52], "order": 2, "phase": "zero"},
        {"type": "highpass", "cutoff_hz": 0.5, "order": 3, "phase": "causal"},
        {"type": "lowpass", "cutoff_hz": 90, "order": 5, "phase": "causal"},
    ]
    signal = signal_to_frame(signal_of(noise(4, 2, 256, 40), 256, gap=True))
    yield node_of(
        "filter", {"stages": [{"design": "butterworth", **stage} for stage in stages]}, signal=signal
    )
    notch = {"design": "butterworth", "order": 2, "width_hz": 2, "harmonics": True, "mains_hz": 50}
    high = {"type": "highpass", "cutoff_hz": 1, "order": 3}
    low = {"type": "lowpass", "cutoff_hz": 60, "order": 4}
    band = {"type": "bandpass", "cutoff_hz": [2, 70], "design": "fir", "transition_hz": 2}
    others = [
        {"type": "notch", **notch},
        {**high, "design": "bessel", "corrected": True},
        {**low, "design": "elliptic", "ripple_db": 0.5, "attenuation_db": 50},
        {**low, "design": "chebyshev1", "ripple_db": 0.5, "phase": "causal"},
        {**high, "design": "chebyshev2", "attenuation_db": 40, "phase": "causal"},
        {**band, "window": "hamming"},
        {**band, "attenuation_db": 60, "phase": "causal"},
    ]
    yield node_of("filter", {"stages": [{"phase": "zero", **stage} for stage in others]}, signal=signal)


def beats() -> Iterator[Frame]:
    """Yield the beats of an upright and an inverted lead, across a gap."""
    yield node_of("beats", {}, signal=signal_to_frame(signal_of(ecg(5, 250, 60), 250, gap=True)))


def epoch() -> Iterator[Frame]:
    """Yield overlapping windows of segments, and windows of the whole recording across a gap."""
    signal = signal_to_frame(signal_of(noise(6, 2, 128, 60), 128, gap=True))
    reject = {"peak_to_peak_uv": 130, "flat_uv": 98, "scope": "channel"}
    segments = [["rest", 2, 20.5], ["hold", 33, 55]]
    yield node_of(
        "epoch", {"length_s": 2, "overlap": 0.5, "reject": reject, "segments": segments}, signal=signal
    )
    reject = {"peak_to_peak_uv": 130, "scope": "epoch"}
    yield node_of("epoch", {"length_s": 3, "overlap": 0, "reject": reject, "segments": []}, signal=signal)


def spectrum() -> Iterator[Frame]:
    """Yield the spectra of EEG, EMG and beats."""
    signal = signal_of(noise(7, 2, 128, 40), 128)
    parents = {
        "signal": signal_to_frame(signal),
        "epochs": epochs_of(signal, 4, (("rest", 0.0), ("hold", 20.0))),
    }
    welch = {"method": "welch", "segment_s": 2, "overlap": 0.5, "detrend": "constant"}
    yield node_of("spectrum", {"kind": "eeg", "window": "hann", **welch}, **parents)
    yield node_of("spectrum", {"kind": "eeg", "window": "blackman", **welch, "overlap": 0.75}, **parents)
    for window, detrend in (("hamming", "constant"), ("boxcar", "none")):
        periodogram = {"method": "periodogram", "overlap": 0, "window": window, "detrend": detrend}
        yield node_of("spectrum", {"kind": "emg", **periodogram}, **parents)
    heart = signal_of(np.zeros((1, 250 * 400)), 250)
    times_s = heart_beats(8, 400)
    found = Frame({"channel": ("A",) * len(times_s), "time_s": times_s}, {"channels": ["A"]})
    yield node_of(
        "spectrum",
        {
            "kind": "ecg",
            **welch,
            "window": "hann",
            "detrend": "linear",
            "segment_s": 60,
            "interpolation_hz": 4,
        },
        beats=found,
        epochs=epochs_of(heart, 130, (("", 0.0),)),
    )


def features() -> Iterator[Frame]:
    """Yield the features of EEG, ECG and EMG."""
    for make in (eeg_features, ecg_features, emg_features):
        yield make()


def densities(seed: int, n_rows: int, n_frequencies: int) -> NDArray[np.float64]:
    """Return densities that fall with frequency, row by row a little more."""
    fall = 1 + np.arange(n_frequencies) * (1 + np.arange(n_rows)[:, None] / 10) / 20
    exponential = np.random.default_rng(seed).exponential(50, (n_rows, n_frequencies))
    spectra: NDArray[np.float64] = exponential / fall
    return spectra


def eeg_features() -> Frame:
    """Return the features of two segments and two channels."""
    signal = signal_of(noise(9, 2, 128, 40), 128)
    spectra = {channel: densities(10 + row, 2, 129) for row, channel in enumerate("AB")}
    parameters = {"kind": "eeg", "bands_hz": {"theta": [4, 8], "alpha": [8, 12.75]}, "total_hz": [1, 40]}
    return node_of(
        "features",
        parameters,
        epochs=epochs_of(signal, 4, (("rest", 0.0), ("hold", 20.0))),
        spectrum=spectra_to_frame(spectra, Fraction(1, 2), rows="segments"),
    )


def ecg_features() -> Frame:
    """Return the features of three epochs of beats."""
    times_s = heart_beats(12, 1000)
    signal = signal_of(np.zeros((1, 100_000)), 100)
    bands_hz = {"vlf": [0.003, 0.04], "lf": [0.04, 0.15], "hf": [0.15, 0.4]}
    return node_of(
        "features",
        {"kind": "ecg", "bands_hz": bands_hz},
        beats=Frame({"channel": ("A",) * len(times_s), "time_s": times_s}, {"channels": ["A"]}),
        epochs=epochs_of(signal, 320, (("", 0.0),)),
        spectrum=spectra_to_frame({"A": densities(13, 3, 481)}, Fraction(1, 240), rows="epochs", refused={}),
    )


def emg_features() -> Frame:
    """Return the features of a contraction that tires."""
    signal = signal_of(noise(14, 1, 1000, 30), 1000)
    return node_of(
        "features",
        {"kind": "emg"},
        signal=signal_to_frame(signal),
        epochs=epochs_of(signal, 1, (("hold", 0.0),)),
        spectrum=spectra_to_frame({"A": densities(15, 30, 501)}, Fraction(1), rows="epochs"),
    )


def statistics() -> Iterator[Frame]:
    """Yield a family on every scale by t tests of a few people, and one of more people by the other tests."""
    scales = ("identity", "log10", "ln", "logit")
    designs = (WITHIN | {"test": "paired_t"}, BETWEEN | {"test": "welch_t"})
    yield statistics_of(
        9,
        "holm",
        [
            design | {"scale": scale, "name": f"{design['test']} {scale}"}
            for design in designs
            for scale in scales
        ],
    )
    others = (
        WITHIN | {"test": "wilcoxon"},
        BETWEEN | {"test": "mann_whitney"},
        WITHIN | {"test": "permutation", "seed": 1},
        BETWEEN | {"test": "permutation", "seed": 2},
        WITHIN | {"test": "paired_t", "equivalence": [-0.3, 0.3]},
        BETWEEN | {"test": "welch_t", "equivalence": [-0.3, 0.3]},
    )
    yield statistics_of(
        20,
        "benjamini_yekutieli",
        [other | {"scale": "identity", "name": f"question {number}"} for number, other in enumerate(others)],
    )


WITHIN: dict[str, Any] = {"within": "shift", "contrast": ["night", "day"]}
BETWEEN: dict[str, Any] = {"between": "group", "contrast": ["crew", "office"]}


def statistics_of(n_people: int, adjustment: str, questions: Sequence[dict[str, Any]]) -> Frame:
    """Return the answers about shares of people, the half of whom are of the crew."""
    people = [f"p{number}" for number in range(n_people) for _ in range(2)]
    n, n_crew = len(people), n_people // 2
    share = np.random.default_rng(16).uniform(0.1, 0.4, n)
    share[1::2] += 0.2
    share[: 2 * n_crew] += 0.2
    table = Frame(
        {
            "recording": tuple(f"r{number}" for number in range(n)),
            "participant": tuple(people),
            "channel": ("A",) * n,
            "segment": (None,) * n,
            "feature": ("relative_band_power",) * n,
            "band": ("alpha",) * n,
            "value": share,
            "unit": ("1",) * n,
            "epochs_used": np.full(n, 20),
            "design/shift": ("day", "night") * (n // 2),
            "design/group": tuple("crew" if int(person[1:]) < n_crew else "office" for person in people),
        }
    )
    question = {
        "signal": "eeg",
        "feature": "relative_band_power",
        "band": "alpha",
        "channels": "each",
        "channel_names": ["A"],
        "confidence": 0.9,
    }
    asked = [question | each for each in questions]
    return node_of(
        "statistics", {"family": "all", "adjustment": adjustment, "questions": asked}, table__eeg=table
    )


OUTPUTS = {
    "quality": quality,
    "verdict": verdict,
    "resample": resample,
    "reference": reference,
    "filter": filter_,
    "beats": beats,
    "epoch": epoch,
    "spectrum": spectrum,
    "features": features,
    "statistics": statistics,
}


def summary_of(step: str) -> dict[str, float | str]:
    """Return what is frozen of a step: some numbers of every column, every fact."""
    told: dict[str, float | str] = {}
    for index, frame in enumerate(OUTPUTS[step]()):
        for name, column in frame.columns.items():
            told |= {f"{index} {name}, {what}": value for what, value in summary_of_column(column)}
        told |= dict(summary_of_fact(frame.facts, f"{index} fact"))
    return told


def summary_of_column(column: NDArray[Any] | tuple[str | None, ...]) -> Iterator[tuple[str, float | str]]:
    """Yield every number of a short column; of a long one its size and two means that tell value and order.

    Of text the digest.
    """
    if isinstance(column, tuple):
        yield "text", hashlib.sha256(json.dumps(column).encode()).hexdigest()[:16]
        return
    values = column.astype(np.float64)
    if values.size <= MOST_VALUES:
        for index, value in enumerate(values):
            yield f"row {index}", float(value) if math.isfinite(value) else "null"
        return
    known = np.flatnonzero(np.isfinite(values))
    yield "values", values.size
    yield "known", known.size
    yield "root mean square", float(np.sqrt(np.mean(values[known] ** 2))) if known.size else 0.0
    # Weights of one sign on absolute values: nothing cancels, so a relative tolerance holds.
    yield (
        "weighted mean",
        float(np.mean(np.abs(values[known]) * (1 + known / values.size))) if known.size else 0.0,
    )
    yield "positive", int(np.count_nonzero(values[known] > 0))


def summary_of_fact(value: object, name: str) -> Iterator[tuple[str, float | str]]:
    """Yield every number and text of the facts with its path; of long lists of numbers what a column yields."""
    if isinstance(value, dict):
        for key, item in value.items():
            yield from summary_of_fact(item, f"{name}.{key}")
    elif isinstance(value, list) and len(value) > MOST_VALUES:
        yield from ((f"{name}, {what}", told) for what, told in summary_of_column(np.array(value)))
    elif isinstance(value, (list, tuple)):
        for index, item in enumerate(value):
            yield from summary_of_fact(item, f"{name}[{index}]")
    elif isinstance(value, (int, float)):
        yield name, float(value)
    else:
        yield name, str(value)


def frozen() -> dict[str, Any]:
    """Return the frozen numbers by step."""
    content: dict[str, Any] = json.loads(FROZEN.read_text("utf-8"))
    return content


def test_every_step_that_computes_a_number_is_frozen() -> None:
    """A new step comes with its numbers."""
    assert OUTPUTS.keys() | WITHOUT_NUMBERS == {step.name for step in STEPS}
    assert frozen().keys() == OUTPUTS.keys()


@pytest.mark.parametrize("step", OUTPUTS)
def test_the_numbers_of_a_step_stand_as_long_as_its_version(step: str) -> None:
    """Nodes are kept by version: new numbers under an old one would never reach a study that has been run."""
    known, found = frozen()[step], summary_of(step)
    assert known["version"] == VERSIONS[step], f"freeze the numbers of {step} anew: see the top of this file"
    told = known["numbers"]
    changed = [
        f"{name}: {told.get(name)} became {found.get(name)}"
        for name in {**told, **found}
        if not alike(told.get(name), found.get(name))
    ]
    assert changed == [], (
        f"if the output of {step} is meant to change, raise its version in nodes/catalogue.py"
    )


def alike(told: float | str | None, found: float | str | None) -> bool:
    """Tell whether two numbers agree to the last digits that processors agree on; texts agree or not."""
    if isinstance(told, (int, float)) and isinstance(found, (int, float)):
        return math.isclose(told, found, rel_tol=RTOL, abs_tol=0)
    return told == found


def freeze() -> None:
    """Freeze the steps that are not frozen at their present version."""
    known = frozen() if FROZEN.exists() else {}
    for step in OUTPUTS:
        if known.get(step, {}).get("version") != VERSIONS[step]:
            known[step] = {"version": VERSIONS[step], "numbers": summary_of(step)}
    FROZEN.write_text(json.dumps(known, indent=1, ensure_ascii=False) + "\n", "utf-8")


if __name__ == "__main__":
    freeze()
