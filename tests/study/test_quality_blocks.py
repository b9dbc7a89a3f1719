"""Blocks about acquisition: limits of quality, recorders, and which frequencies a study asks for."""

from __future__ import annotations

from typing import Any

import pytest
from pydantic import TypeAdapter, ValidationError

from bandcairn.study.models import AnySignal
from bandcairn.study.quality_blocks import EcgQuality, EegQuality, EmgQuality, QualityLimits, Recorder
from bandcairn.study.requested_ranges import requested_ranges

BANDPASS = {"type": "bandpass", "cutoff_hz": [20, 450], "design": "butterworth", "order": 4}
HIGHPASS = {"type": "highpass", "cutoff_hz": 20, "design": "butterworth", "order": 4}


def signal(kind: str, **keys: Any) -> AnySignal:  # noqa: ANN401 - values of a description
    """Return a signal of one channel."""
    spectrum = {"method": "welch", "segment_s": 2}
    whole = {"kind": kind, "channels": ["A"], "epoch": {"length_s": 4}, "spectrum": spectrum, **keys}
    adapter: TypeAdapter[AnySignal] = TypeAdapter(AnySignal)
    return adapter.validate_python(whole)


def test_p1_every_kind_has_a_plausible_amplitude_of_its_own() -> None:
    """P1: EEG 1 to 500 uV root mean square, ECG 0.05 to 20 mV peak to peak, EMG 1 uV to 20 mV root mean square."""
    assert EegQuality().typical_rms_uv == (1, 500)
    assert EcgQuality().typical_peak_to_peak_uv == (50, 20_000)
    assert EmgQuality().rms_uv == (1, 20_000)


@pytest.mark.parametrize("limit", sorted(set(QualityLimits.model_fields) - {"on_failure", "on_band_failure"}))
def test_any_limit_may_be_null_and_is_then_no_part_of_what_is_judged(limit: str) -> None:
    """Null says that a measure is told and not judged."""
    written = QualityLimits.model_validate({limit: None}).model_dump(mode="json", exclude_none=True)
    assert limit not in written


def test_a_limit_of_another_kind_is_refused() -> None:
    """A rate for beats means nothing to EEG."""
    with pytest.raises(ValidationError, match="beats_rate_hz"):
        signal("eeg", features={"bands_hz": {"alpha": [8, 13]}}, quality={"beats_rate_hz": 250})


@pytest.mark.parametrize(
    ("block", "told"),
    [
        ({"highpass_hz": 70, "lowpass_hz": 0.1}, r"found 70; allowed: below lowpass_hz \(0\.1\)"),
        ({"range_uv": [400, -400]}, "two increasing values"),
        ({"lowpass_hz": 0}, "greater than 0"),
    ],
)
def test_p11_a_recorder_that_lets_nothing_pass_is_refused(block: dict[str, Any], told: str) -> None:
    """P11: high-pass and low-pass exchanged."""
    with pytest.raises(ValidationError, match=told):
        Recorder.model_validate(block)


def test_c3_of_eeg_every_band_and_the_whole_range_are_asked_for() -> None:
    """C3: the range of the total power is the declared one, else from the lowest edge to the highest."""
    bands_hz = {"alpha": [8, 13], "theta": [4, 8]}
    asked = requested_ranges(signal("eeg", features={"bands_hz": bands_hz}))
    assert asked == (("alpha", 8, 13), ("theta", 4, 8), ("", 4, 13))
    declared = requested_ranges(signal("eeg", features={"bands_hz": bands_hz, "total_hz": [1, 40]}))
    assert declared[-1] == ("", 1, 40)


def test_c3_of_ecg_and_emg_what_the_filters_let_pass_is_asked_for() -> None:
    """C3: the bands of an ECG are those of its intervals; without a filter nothing definite is asked."""
    assert requested_ranges(signal("emg", filter=[BANDPASS])) == (("", 20, 450),)
    assert requested_ranges(signal("ecg", filter=[HIGHPASS])) == (("", 20, None),)
    assert requested_ranges(signal("ecg")) == ()
