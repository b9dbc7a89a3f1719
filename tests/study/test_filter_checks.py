"""Filters and references against rates, bands, channels and lengths."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING

import pytest

from bandcairn.errors import StudyError
from bandcairn.signal import ChannelFacts, FileFacts
from bandcairn.study.description import load_study
from bandcairn.study.facts_check import check_facts

if TYPE_CHECKING:
    from pathlib import Path

    from bandcairn.errors import Problem

FILTER = "      - {type: bandpass, cutoff_hz: [0.5, 45], design: butterworth, order: 4}\n"
CHANNELS = "channels: [Fz, Cz]"


def changed(folder: Path, *edits: tuple[str, str]) -> None:
    """Replace texts of study.yaml that stand there."""
    file = folder / "study.yaml"
    text = file.read_text("utf-8")
    for old, new in edits:
        assert old in text
        text = text.replace(old, new, 1)
    file.write_text(text, "utf-8")


def problems(folder: Path, *edits: tuple[str, str]) -> tuple[Problem, ...]:
    """Return what is wrong with the study once it is changed."""
    changed(folder, *edits)
    with pytest.raises(StudyError) as caught:
        load_study(folder)
    return caught.value.problems


def filtered(*stages: str) -> tuple[str, str]:
    """Return the edit that puts other stages in the place of the filter."""
    return FILTER, "".join(f"      - {stage}\n" for stage in stages)


@pytest.mark.parametrize(
    ("edits", "field", "found"),
    [
        (
            (filtered("{type: notch}"), ("rate_hz: 128", "rate_hz: 100")),
            "signals.eeg.filter[0]",
            "a notch at 50 Hz",
        ),
        (
            (filtered("{type: lowpass, cutoff_hz: 45, design: butterworth, order: 4}"), ("128", "91.8")),
            "signals.eeg.filter[0].cutoff_hz",
            "45 Hz",
        ),
        (
            (filtered("{type: lowpass, cutoff_hz: 60, design: fir, window: hann, transition_hz: 10}"),),
            "signals.eeg.filter[0].transition_hz",
            "10 Hz",
        ),
        (
            (
                filtered("{type: notch, width_hz: 6}"),
                ("alpha: [8, 13]", "alpha: [48, 52]"),
                ("band: alpha", "band: theta"),
            ),
            "signals.eeg.features.bands_hz.alpha",
            "48 to 52 Hz, all of it in the stop band 47 to 53 Hz",
        ),
        (
            (filtered("{type: bandstop, cutoff_hz: [7, 14], design: butterworth, order: 2}"),),
            "signals.eeg.features.bands_hz.alpha",
            "8 to 13 Hz, all of it in the stop band 7 to 14 Hz",
        ),
        (((CHANNELS, f"{CHANNELS}\n    reference: [Fz, Cz]"),), "signals.eeg.reference", "every channel"),
        (((CHANNELS, f"{CHANNELS}\n    reference: [M1]"),), "signals.eeg.reference[0]", "M1"),
        (
            (("kind: ecg", "kind: ecg\n    reference: average"),),
            "signals.heart.reference",
            "the average of one channel",
        ),
        (
            ((CHANNELS, f"{CHANNELS}\n    reference: {{pairs: {{Fz: [Fz, Cz]}}}}"),),
            "signals.eeg.reference.pairs.Fz",
            "Fz",
        ),
        (
            ((CHANNELS, f"{CHANNELS}\n    reference: {{pairs: {{a: [Fz, Fz]}}}}"),),
            "signals.eeg.reference.pairs.a",
            "Fz twice",
        ),
        (
            ((CHANNELS, f"{CHANNELS}\n    reference: {{pairs: {{a: [Fz, Pz]}}}}"),),
            "signals.eeg.reference.pairs.a[1]",
            "Pz",
        ),
        (
            (
                (CHANNELS, f"{CHANNELS}\n    reference: {{pairs: {{Fz-Cz: [Fz, Cz]}}}}"),
                ("    band: alpha\n", "    band: alpha\n    channels: [Fz]\n"),
            ),
            "questions[0].channels[0]",
            "Fz",
        ),
        (((CHANNELS, f"{CHANNELS}\n    reference: mean"),), "signals.eeg.reference", "'mean'"),
    ],
    ids=lambda value: value if isinstance(value, str) else None,
)
def test_what_does_not_fit_is_told_at_its_key(
    study_folder: Path, edits: tuple[tuple[str, str], ...], field: str, found: str
) -> None:
    """One mistake, one problem."""
    (problem,) = problems(study_folder, *edits)

    assert (problem.field, problem.found) == (field, found)


@pytest.mark.parametrize(
    "edits",
    [
        (filtered("{type: notch}"), ("alpha: [8, 13]", "alpha: [45, 55]")),
        ((CHANNELS, f"{CHANNELS}\n    reference: average"),),
        ((CHANNELS, f"{CHANNELS}\n    reference: [Cz]"),),
        (
            (CHANNELS, f"{CHANNELS}\n    reference: {{pairs: {{Fz-Cz: [Fz, Cz]}}}}"),
            ("    band: alpha\n", "    band: alpha\n    channels: [Fz-Cz]\n"),
        ),
    ],
)
def test_what_fits_is_taken(study_folder: Path, edits: tuple[tuple[str, str], ...]) -> None:
    """A band that loses a part to a notch is told at its feature; questions name the channels that are left."""
    changed(study_folder, *edits)

    load_study(study_folder)


def file_of(length_s: float) -> FileFacts:
    """Return a file at 1000 Hz."""
    channels = (
        ChannelFacts(name, Fraction(1000), "uV", round(1000 * length_s))
        for name in ("Fz", "Cz", "ECG", "EMG")
    )
    return FileFacts(tuple(channels), ())


def test_a_fir_longer_than_a_recording_is_told_before_a_sample_is_read(study_folder: Path) -> None:
    """3.1 / 0.01 Hz are 310 s of taps: they reach 155 s to either side, in ten minutes, but not in two."""
    changed(
        study_folder,
        filtered("{type: highpass, cutoff_hz: 0.1, design: fir, window: hann, transition_hz: 0.01}"),
    )
    study = load_study(study_folder)
    recordings = [row.recording for row in study.recordings]
    assert check_facts(study, dict.fromkeys(recordings, file_of(600))) == ()

    files = dict.fromkeys(recordings, file_of(600)) | {"p1d": file_of(150)}
    found = {problem.field: problem for problem in check_facts(study, files)}

    problem = found["signals.eeg.filter[0].transition_hz"]
    assert problem.found == "0.01 Hz, for which the taps reach 155 s to either side"
    assert problem.allowed == "less than the 150 s of this recording"
