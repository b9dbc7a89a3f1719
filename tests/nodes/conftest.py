"""A study and the content of its files without any file: planning needs no more."""

from __future__ import annotations

import hashlib
from fractions import Fraction
from pathlib import Path
from typing import TYPE_CHECKING

import pytest
import yaml

from bandcairn.nodes.plan import build_plan
from bandcairn.nodes.survey import RawContent
from bandcairn.signal import ChannelFacts, FileFacts
from bandcairn.study.description import LoadedStudy
from bandcairn.study.models import StudyDescription
from bandcairn.study.tables import RecordingRow, SegmentRow

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from bandcairn.nodes.plan import Plan

STUDY = """\
study: Harbour
mains_hz: 50
signals:
  eeg:
    kind: eeg
    channels: [Fz, Cz]
    segments: []
    resample: {rate_hz: 128}
    filter:
      - {type: bandpass, cutoff_hz: [0.5, 45], design: butterworth, order: 4}
    epoch: {length_s: 4, overlap: 0.5, reject: {peak_to_peak_uv: 150}}
    spectrum: {method: welch, segment_s: 2}
    features:
      bands_hz: {theta: [4, 8], alpha: [8, 13]}
  heart:
    kind: ecg
    channels: [ECG]
    filter:
      - {type: bandpass, cutoff_hz: [1, 40], design: butterworth, order: 2}
    epoch: {length_s: 60}
    spectrum: {method: welch, segment_s: 30}
  arm:
    kind: emg
    channels: [EMG]
    segments: [hold]
    filter:
      - {type: highpass, cutoff_hz: 20, design: butterworth, order: 4}
      - {type: lowpass, cutoff_hz: 400, design: butterworth, order: 2}
    epoch: {length_s: 1}
    spectrum: {method: periodogram}
questions:
  - name: alpha by shift
    signal: eeg
    feature: band_power
    band: alpha
    scale: log10
    within: condition
    contrast: [night, day]
    test: paired_t
    family: watch
  - name: heart rate by shift
    signal: heart
    feature: heart_rate
    within: condition
    contrast: [night, day]
    test: paired_t
    family: watch
  - name: fatigue by shift
    signal: arm
    feature: median_frequency
    within: condition
    contrast: [night, day]
    test: paired_t
"""
RATES_HZ = {"Fz": 256, "Cz": 256, "ECG": 256, "EMG": 1000}


@pytest.fixture
def study_text() -> str:
    """Return the text of study.yaml, to be edited."""
    return STUDY


@pytest.fixture
def rows() -> tuple[RecordingRow, ...]:
    """Return the recordings of two participants, each by day and by night."""
    pairs = [(person, condition) for person in ("p1", "p2") for condition in ("day", "night")]
    return tuple(
        RecordingRow(
            f"{person}_{condition}",
            person,
            f"raw/{person}_{condition}.edf",
            None,
            None,
            {"condition": condition},
            line,
        )
        for line, (person, condition) in enumerate(pairs, start=2)
    )


@pytest.fixture
def segments() -> tuple[SegmentRow, ...]:
    """Return two segments of each recording, in the order of time."""
    names = [f"{person}_{condition}" for person in ("p1", "p2") for condition in ("day", "night")]
    return tuple(
        SegmentRow(recording, segment, start_s, stop_s, row)
        for recording in names
        for row, (segment, start_s, stop_s) in enumerate((("rest", 0.0, 10.0), ("hold", 10.0, 50.0)), start=2)
    )


@pytest.fixture
def load() -> Callable[[str, Sequence[RecordingRow], Sequence[SegmentRow]], LoadedStudy]:
    """Return a study from the text of its description and the rows of its tables."""

    def loaded(text: str, rows: Sequence[RecordingRow], segments: Sequence[SegmentRow] = ()) -> LoadedStudy:
        description = StudyDescription.model_validate(yaml.safe_load(text))
        return LoadedStudy(Path("study"), description, tuple(rows), tuple(segments), "segments.csv", {})

    return loaded


@pytest.fixture
def content() -> Callable[..., RawContent]:
    """Return the content of a raw file: `content(seed, unit="uV", rates_hz=..., annotated=())`."""

    def found(
        seed: str,
        unit: str | None = "uV",
        rates_hz: dict[str, Fraction | int | None] | None = None,
        annotated: tuple[tuple[str, float, float], ...] = (),
    ) -> RawContent:
        rates = rates_hz or RATES_HZ
        channels = tuple(
            ChannelFacts(label, None if rate is None else Fraction(rate), unit, 60_000)
            for label, rate in rates.items()
        )
        digests = {label: hashlib.sha256(f"{seed} {label}".encode()).hexdigest() for label in rates}
        return RawContent(FileFacts(channels, ()), digests, annotated)

    return found


@pytest.fixture
def plan(
    load: Callable[..., LoadedStudy],
    content: Callable[..., RawContent],
    rows: tuple[RecordingRow, ...],
    segments: tuple[SegmentRow, ...],
) -> Plan:
    """Return the plan of the study as it stands."""
    return build_plan(load(STUDY, rows, segments), {row.recording: content(row.recording) for row in rows})
