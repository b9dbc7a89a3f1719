"""A sound study on disk, which the tests damage one place at a time."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pytest

if TYPE_CHECKING:
    from pathlib import Path

STUDY = """\
study: Harbour
mains_hz: 50
signals:
  eeg:
    kind: eeg
    channels: [Fz, Cz]
    resample: {rate_hz: 128}
    filter:
      - {type: bandpass, cutoff_hz: [0.5, 45], design: butterworth, order: 4}
    epoch:
      length_s: 4
      overlap: 0.5
    spectrum:
      method: welch
      segment_s: 2
    features:
      bands_hz:
        theta: [4, 8]
        alpha: [8, 13]
  heart:
    kind: ecg
    channels: [ECG]
    epoch: {length_s: 300}
    spectrum: {method: welch, segment_s: 120}
  biceps:
    kind: emg
    channels: [EMG]
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
  - name: heart rate by crew
    signal: heart
    feature: heart_rate
    between: group
    contrast: [crew, office]
    test: welch_t
"""
RECORDINGS = """\
recording,participant,file,condition,group
p1d,p1,raw/p1d.edf,day,crew
p1n,p1,raw/p1n.edf,night,crew
p2d,p2,raw/p2d.edf,day,crew
p2n,p2,raw/p2n.edf,night,crew
p3d,p3,raw/p3d.edf,day,office
p3n,p3,raw/p3n.edf,night,office
p4d,p4,raw/p4d.edf,day,office
p4n,p4,raw/p4n.edf,night,office
"""


@pytest.fixture
def study_folder(tmp_path: Path) -> Path:
    """Return the folder of a study without fault."""
    (tmp_path / "study.yaml").write_text(STUDY, encoding="utf-8")
    (tmp_path / "recordings.csv").write_text(RECORDINGS, encoding="utf-8")
    (tmp_path / "raw").mkdir()
    for line in RECORDINGS.splitlines()[1:]:
        (tmp_path / line.split(",")[2]).touch()
    return tmp_path
