"""Nodes of quality: what is measured of a recording, and what the study's limits make of it."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest

from bandcairn.errors import StepError
from bandcairn.execution.frames import signal_to_frame
from bandcairn.execution.group_nodes import (
    TABLE_COLUMNS,
    concerns,
    consequence,
    frame_rows,
    rows_to_frame,
    table_node,
)
from bandcairn.execution.quality_nodes import (
    JUDGED_COLUMNS,
    MOST_STRETCHES,
    UNITS,
    quality_node,
    verdict_node,
)
from bandcairn.signal import Run, Signal
from bandcairn.store.frame import Frame
from bandcairn.study.models import EcgSignal, EegSignal, EmgSignal

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from bandcairn.store.frame import Column

RATE_HZ = 256
LSB_UV = 0.1
BANDS_HZ = (("delta", 0.5, 4), ("alpha", 8, 13), ("gamma", 55, 95), ("", 0.5, 95))
LIMITS: Mapping[str, Any] = {
    "clipped_share": 0.01,
    "flat_share": 0.05,
    "identical_channels": 0,
    "quantisation_margin_db": 10.0,
    "beyond_recorder_share": 0.0,
}


def noise(seed: int = 1, sd_uv: float = 20, length_s: int = 60) -> NDArray[np.float64]:
    """Return white noise in steps of a tenth of a microvolt."""
    samples = np.random.default_rng(seed).normal(0, sd_uv, RATE_HZ * length_s)
    return np.asarray(np.round(samples / LSB_UV) * LSB_UV)


def loaded(*rows: NDArray[np.float64], gap_at: int = 0, lsb_uv: float = LSB_UV) -> Frame:
    """Return the node of a load: channels A, B, … as integers with their scaling; 2 s missing before `gap_at`."""
    runs: tuple[Run, ...] = (Run(0, rows[0].size, Fraction(0)),)
    if gap_at:
        runs = (Run(0, gap_at, Fraction(0)), Run(gap_at, rows[0].size, Fraction(gap_at, RATE_HZ) + 2))
    channels = tuple("ABCD"[: len(rows)])
    frame = signal_to_frame(Signal(np.stack(rows), Fraction(RATE_HZ), channels, runs))
    integers = {
        name: np.round(row / lsb_uv).astype(np.int16) for name, row in zip(channels, rows, strict=True)
    }
    scaling = {"gain_uv": [lsb_uv] * len(rows), "offset_uv": [0.0] * len(rows)}
    return Frame(integers, {**frame.facts, **scaling})


def quality(
    *rows: NDArray[np.float64], gap_at: int = 0, lsb_uv: float = LSB_UV, **parameters: object
) -> Frame:
    """Return the node of quality."""
    return quality_node(
        {"mains_hz": 50, **parameters}, {"signal": loaded(*rows, gap_at=gap_at, lsb_uv=lsb_uv)}
    )


def verdict(frame: Frame, limits: Mapping[str, Any] = LIMITS, **judged_by: object) -> list[dict[str, Any]]:
    """Return the rows of the verdict on one recording."""
    parameters = {"signal": "eeg", "kind": "eeg", "bands_hz": BANDS_HZ, "limits": limits, **judged_by}
    return frame_rows(verdict_node(parameters, {"quality/r1": frame}, {"quality/r1": "key"}))


def row(rows: list[dict[str, Any]], measure: str, channel: str = "A") -> dict[str, Any]:
    """Return the row of one measure of a channel."""
    (found,) = [one for one in rows if (one["measure"], one["channel"]) == (measure, channel)]
    return found


def failed(rows: list[dict[str, Any]]) -> list[tuple[str, str]]:
    """Return channel and measure of what has failed."""
    return [(one["channel"], one["measure"]) for one in rows if one["passed"] == "no"]


def test_a_clean_recording_passes_everything_and_says_so() -> None:
    """Measures with a limit pass, those without are told all the same."""
    rows = verdict(quality(noise()))
    assert failed(rows) == []
    assert row(rows, "clipped_share")["passed"] == "yes"
    assert row(rows, "peak_to_peak_uv")["passed"] is None
    assert row(rows, "lsb_uv")["value"] == LSB_UV
    assert row(rows, "smallest_step_uv")["value"] == pytest.approx(LSB_UV)


def test_stretches_are_kept_in_seconds_of_the_file_across_a_gap() -> None:
    """C1: what a picture will show: where it is clipped and flat, in true time, gaps counted."""
    samples = noise()
    samples[256:512] = 400
    samples[5120:5632] = 3
    stretches = quality(samples, gap_at=2560).facts["stretches"]["A"]
    assert stretches["clipped"] == {"count": 1, "start_s": [1.0], "stop_s": [2.0]}
    assert stretches["flat"] == {"count": 2, "start_s": [1.0, 22.0], "stop_s": [2.0, 24.0]}


def test_of_many_stretches_the_longest_are_kept_and_all_are_counted() -> None:
    """A node stays small whatever a channel has gone through."""
    samples = noise()
    for index in range(130):
        samples[100 * index : 100 * index + 3 + (index >= 20)] = 400
    found = quality(samples).facts["stretches"]["A"]["clipped"]
    assert found["count"] == 130
    assert len(found["start_s"]) == MOST_STRETCHES
    lengths = np.subtract(found["stop_s"], found["start_s"]) * RATE_HZ
    np.testing.assert_allclose(lengths, 4, rtol=1e-9)
    assert found["start_s"] == sorted(found["start_s"])


def test_gaps_stand_in_the_results() -> None:
    """Two seconds of 62 are missing; it fails where the study limits it."""
    frame = quality(noise(), gap_at=2560)
    rows = verdict(frame, {"missing_share": 0.01, "longest_gap_s": 3})
    assert row(rows, "gap_count")["value"] == 1
    assert row(rows, "longest_gap_s")["value"] == 2
    assert row(rows, "missing_share")["value"] == pytest.approx(2 / 62)
    assert failed(rows) == [("A", "missing_share")]


def test_c2_declared_50_and_data_60_is_refused_unless_accepted() -> None:
    """C2: the recording fails with the reason; a reason in the study, or a notch of the recorder, lets it pass."""
    samples = noise() + 30 * np.sin(2 * np.pi * 60 * np.arange(60 * RATE_HZ) / RATE_HZ)
    with pytest.raises(StepError, match=r"line at 60\.00 Hz in A.*study\.yaml declares as 50"):
        quality(samples)
    quality(samples, accept_other_mains="a projector at 60 Hz")
    quality(samples, prefilter=["HP:0.1Hz LP:100Hz N:50Hz"])
    quality(samples, mains_hz=60)


def test_p11_the_stricter_of_header_and_declaration_is_what_bands_are_held_against() -> None:
    """P11: the header says 70 Hz, the study 100 Hz: 70 Hz counts."""
    rows = verdict(quality(noise(), prefilter=["HP:0.1Hz LP:70Hz"], lowpass_hz=100))
    assert row(rows, "recorder_highpass_hz")["value"] == 0.1
    assert row(rows, "recorder_lowpass_hz")["value"] == 70


def test_c3_a_band_beyond_the_recorder_is_flagged_with_its_loss() -> None:
    """C3: behind a low-pass of 70 Hz the band 55 to 95 Hz has lost 3.3 dB, and so has the whole; alpha has not."""
    rows = verdict(quality(noise(), prefilter=["HP:0.1Hz LP:70Hz"]))
    assert failed(rows) == [("A", "beyond_recorder_share/gamma"), ("A", "beyond_recorder_share")]
    gamma = row(rows, "beyond_recorder_share/gamma")
    assert gamma["value"] == 0.625
    assert gamma["told"] == (
        "beyond_recorder_share/gamma 0.625 is above 0 (the recorder passes 0.1 Hz to 70 Hz: "
        "a loss of 3.3 dB or more)"
    )
    assert row(rows, "recorder_loss_db/gamma")["value"] == pytest.approx(3.3, abs=0.2)


def test_c4_a_range_without_an_upper_end_takes_what_the_recorder_gives() -> None:
    """C4: only a high-pass is declared: nothing is asked of the recorder's low-pass."""
    frame = quality(noise(), prefilter=["HP:1Hz LP:70Hz"])
    rows = verdict(frame, kind="emg", bands_hz=[["", 0.5, None]])
    assert failed(rows) == [("A", "beyond_recorder_share")]
    assert failed(verdict(frame, kind="emg", bands_hz=[["", 20, None]])) == []


def test_c5_p12_coarse_steps_are_flagged_in_the_bands_that_they_drown() -> None:
    """C5, P12: in steps of 8 uV, alpha of 1 uV^2/Hz stands out; the faint rest lies within 10 dB of their noise."""
    time_s = np.arange(60 * RATE_HZ) / RATE_HZ
    rhythm = 25 * np.sin(2 * np.pi * 10 * time_s)
    samples = np.round((rhythm + noise(sd_uv=6)) / 8) * 8
    rows = verdict(quality(samples, lsb_uv=8.0), bands_hz=[["alpha", 8, 13], ["beta", 15, 30]])
    assert failed(rows) == [("A", "quantisation_margin_db/beta")]
    assert "steps of 8 uV leave 0.0417 uV^2/Hz" in row(rows, "quantisation_margin_db/beta")["told"]


def test_p12_the_step_that_is_seen_counts_where_it_is_coarser_than_the_scaling() -> None:
    """P12: a converter of 12 bits in a file of 16."""
    samples = np.round(noise(sd_uv=6) / 8) * 8
    rows = verdict(quality(samples), bands_hz=[["beta", 15, 30]])
    assert row(rows, "lsb_uv")["value"] == LSB_UV
    assert failed(rows) == [("A", "quantisation_margin_db/beta")]


def test_p1_an_amplitude_that_no_eeg_has_fails_on_either_side() -> None:
    """P1: uV taken for mV, and the reverse: a thousand times too large, or too small."""
    limits = {"typical_rms_uv": [1, 500]}
    for factor, told in ((1000, "above 500"), (0.001, "below 1")):
        frame = quality_node({"mains_hz": 50}, {"signal": scaled(factor)})
        (found,) = [one for one in verdict(frame, limits) if one["passed"] == "no"]
        assert found["measure"] == "typical_rms_uv"
        assert told in found["told"]
    passing = row(verdict(quality(noise()), limits), "typical_rms_uv")
    assert (passing["passed"], passing["limit"]) == ("yes", 1)


def scaled(factor: float) -> Frame:
    """Return a load whose header misstates the unit."""
    frame = loaded(noise())
    return Frame(frame.columns, {**frame.facts, "gain_uv": [LSB_UV * factor]})


def test_copied_channels_are_told_by_name() -> None:
    """One electrode under two names is one measurement."""
    rows = verdict(quality(noise(), noise(2), noise()))
    assert failed(rows) == [("A", "identical_channels"), ("C", "identical_channels")]
    assert row(rows, "identical_channels")["told"].endswith("(the same samples as C)")


def test_a_dead_channel_is_one_fault() -> None:
    """Flat: neither implausible, nor copied, nor without a margin."""
    rows = verdict(
        quality(noise(), np.zeros(60 * RATE_HZ), np.zeros(60 * RATE_HZ)),
        {**LIMITS, "typical_rms_uv": [1, 500]},
    )
    assert failed(rows) == [("B", "flat_share"), ("C", "flat_share")]


@pytest.mark.parametrize(("resample_hz", "floor_ms", "passes"), [(None, 2.76, "yes"), (128, 5.52, "no")])
def test_h6_a_low_rate_is_told_at_the_features_of_intervals(
    resample_hz: float | None, floor_ms: float, passes: str
) -> None:
    """H6: below 250 Hz, after resampling, the floor of RMSSD is told; nothing is left out for it."""
    judged_by: dict[str, object] = {} if resample_hz is None else {"resample_hz": resample_hz}
    rows = verdict(quality(noise()), {"beats_rate_hz": 250}, kind="ecg", bands_hz=[], **judged_by)
    assert row(rows, "rmssd_floor_ms")["value"] == pytest.approx(floor_ms, abs=0.005)
    rate = row(rows, "beats_rate_hz")
    assert rate["passed"] == passes
    assert consequence(rate) == "advice"
    assert not concerns(rate, {"feature": "heart_rate", "band": None})
    assert concerns(rate, {"feature": "rmssd", "band": None})


def test_c7_a_limit_that_is_absent_is_not_judged_and_its_measure_is_told() -> None:
    """C7: the same measures under other limits: only what is judged changes."""
    samples = noise()
    samples[256:1024] = 400
    frame = quality(samples)
    strict, none = verdict(frame), verdict(frame, {})
    assert failed(strict) == [("A", "clipped_share")]
    assert failed(none) == []
    assert [(one["measure"], one["value"]) for one in strict] == [
        (one["measure"], one["value"]) for one in none
    ]


def table(failures: list[dict[str, Any]], **decided: str) -> dict[tuple[str, str | None], dict[str, Any]]:
    """Return the table of one recording with three features, by feature and band."""
    features = [("band_power", "alpha"), ("band_power", "gamma"), ("total_power", None)]
    columns: dict[str, Column] = {
        "channel": ("A",) * 3,
        "segment": (None,) * 3,
        "feature": tuple(feature for feature, _ in features),
        "band": tuple(band for _, band in features),
        "value": np.array([1.0, 2.0, 3.0]),
        "unit": ("uV^2",) * 3,
        "epochs_used": np.array([5, 5, 5]),
        "epochs_total": np.array([6, 6, 6]),
        "note": (None,) * 3,
    }
    for name, kind in TABLE_COLUMNS.items():
        if name not in columns and name not in {"recording", "participant", "node"}:
            columns[name] = np.zeros(3, np.int64) if kind == "count" else (None,) * 3
    parents = {"features/r1": Frame(columns), "verdict": rows_to_frame(failures, JUDGED_COLUMNS)}
    parameters = {
        "design": [],
        "on_failure": "exclude",
        "on_band_failure": "flag",
        **decided,
        "rows": [{"recording": "r1", "participant": "p1", "design": {}}],
    }
    rows = frame_rows(table_node(parameters, parents, {"features/r1": "key"}))
    return {(one["feature"], one["band"]): one for one in rows}


def test_a_failed_band_concerns_its_own_features_and_is_kept_with_a_note_or_left_out_as_the_study_says() -> (
    None
):
    """C3: gamma and the whole range are flagged; alpha stands as it is. `exclude` takes the values away."""
    failures = verdict(quality(noise(), prefilter=["LP:70Hz"]))
    flagged = table(failures)
    assert flagged["band_power", "alpha"]["note"] is None
    assert flagged["band_power", "gamma"]["value"] == 2
    assert flagged["band_power", "gamma"]["note"].startswith(
        "kept although beyond_recorder_share/gamma 0.625"
    )
    assert flagged["total_power", None]["note"].startswith("kept although beyond_recorder_share 0.265")
    left_out = table(failures, on_band_failure="exclude")
    assert left_out["band_power", "alpha"]["value"] == 1
    assert left_out["band_power", "gamma"]["value"] is None
    assert left_out["band_power", "gamma"]["note"].startswith("left out: beyond_recorder_share/gamma")


def test_a_failed_channel_concerns_all_of_it() -> None:
    """C1: clipped: every feature of the channel is left out, or kept with a note."""
    samples = noise()
    samples[256:1024] = 400
    failures = verdict(quality(samples))
    left_out, flagged = table(failures), table(failures, on_failure="flag")
    assert all(one["value"] is None and one["epochs_used"] == 0 for one in left_out.values())
    assert all(
        one["value"] and one["note"].startswith("kept although clipped_share") for one in flagged.values()
    )


@pytest.mark.parametrize(
    ("kind", "model", "measure"),
    [
        ("eeg", EegSignal, "typical_rms_uv"),
        ("ecg", EcgSignal, "typical_peak_to_peak_uv"),
        ("emg", EmgSignal, "rms_uv"),
    ],
)
def test_every_limit_of_a_study_names_a_measure(kind: str, model: type[EegSignal], measure: str) -> None:
    """A limit without a measure would never be judged."""
    quality_block = model.model_fields["quality"].default
    decisions = {"on_failure", "on_band_failure", "accept_other_mains"}
    limits = set(type(quality_block).model_fields) - decisions
    assert limits <= UNITS.keys()
    assert measure in limits, kind
