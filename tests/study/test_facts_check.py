"""A study against what its files say of themselves."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING

import pytest

from bandcairn.signal import Annotation, ChannelFacts, FileFacts
from bandcairn.study.description import load_study
from bandcairn.study.facts_check import check_facts

if TYPE_CHECKING:
    from pathlib import Path

    from bandcairn.errors import Problem

RATE = Fraction(1000)
RECORDINGS = ("p1d", "p1n", "p2d", "p2n", "p3d", "p3n", "p4d", "p4n")


def channel(
    label: str, rate_hz: Fraction | None = RATE, unit: str | None = "uV", n_samples: int = 600_000
) -> ChannelFacts:
    """Return a channel of ten minutes."""
    return ChannelFacts(label, rate_hz, unit, n_samples)


def facts(*channels: ChannelFacts, notes: tuple[Annotation, ...] = ()) -> FileFacts:
    """Return a file with the channels of the study, those given put in the place of their namesakes."""
    given = {each.label for each in channels}
    rest = tuple(channel(label) for label in ("Fz", "Cz", "ECG", "EMG") if label not in given)
    return FileFacts((*channels, *rest), notes)


def check(
    folder: Path, first: FileFacts, *, replaced: tuple[tuple[str, str], ...] = ()
) -> tuple[Problem, ...]:
    """Check the study, changed at some words, with `first` as its first file and sound files else."""
    for old, new in replaced:
        for path in (folder / "study.yaml", folder / "recordings.csv"):
            path.write_text(path.read_text(encoding="utf-8").replace(old, new), encoding="utf-8")
    files = dict.fromkeys(RECORDINGS, facts()) | {"p1d": first}
    return check_facts(load_study(folder), files)


def test_files_that_hold_what_the_study_declares_pass(study_folder: Path) -> None:
    """A sound study has no problem, and a recording without facts is left to others."""
    assert check(study_folder, facts()) == ()
    assert check_facts(load_study(study_folder), {}) == ()


def test_an_absent_channel_is_told_with_what_the_file_has(study_folder: Path) -> None:
    """The closest name is offered, and the line of study.yaml named."""
    file = FileFacts(tuple(channel(label) for label in ("FZ", "Cz", "ECG", "EMG")), ())

    (problem,) = check(study_folder, file)

    assert (problem.file, problem.where) == ("raw/p1d.edf", "recording p1d")
    assert problem.field == "signals.eeg.channels[0]"
    assert problem.allowed == "a channel of the file: FZ, Cz, ECG, EMG"
    assert problem.remedy == "Did you mean FZ? (study.yaml, line 6)"


LOAD = ("kind: emg", "kind: emg\n    load: {rate_hz: 1000, unit: uV}")

CASES = {
    "a channel twice": (
        facts(channel("Fz"), channel("Fz")),
        (),
        "signals.eeg.channels[0]",
        "2 channels named Fz",
    ),
    "two rates in one signal": (
        facts(channel("Fz", Fraction(500), n_samples=300_000)),
        (),
        "signals.eeg.channels",
        "Fz at 500 Hz, Cz at 1000 Hz",
    ),
    "no rate": (facts(channel("EMG", None)), (), "signals.biceps.load.rate_hz", "no rate for EMG"),
    "no unit": (facts(channel("EMG", unit=None)), (), "signals.biceps.load.unit", "no unit for EMG"),
    "a blank unit": (facts(channel("EMG", unit=" ")), (), "signals.biceps.load.unit", "' ' for EMG"),
    "an unknown unit": (facts(channel("EMG", unit="kg")), (), "signals.biceps.load.unit", "'kg' for EMG"),
    "a declared rate that the file's clock contradicts": (
        facts(channel("EMG", Fraction(2000), unit=None, n_samples=1_200_000)),
        (LOAD, ("epoch: {length_s: 1}", "epoch: {length_s: 1}\n    resample: {rate_hz: 500}")),
        "signals.biceps.load.rate_hz",
        "1000 Hz declared, but the file states 2000 Hz",
    ),
    "a cut-off beyond half the file's rate": (
        facts(),
        (
            (
                "kind: emg",
                "kind: emg\n    filter: [{type: lowpass, cutoff_hz: 500, design: butterworth, order: 2}]",
            ),
        ),
        "signals.biceps.filter[0].cutoff_hz",
        "500 Hz",
    ),
    "a rate above the file's": (
        facts(),
        (("rate_hz: 128", "rate_hz: 1024"),),
        "signals.eeg.resample.rate_hz",
        "1024",
    ),
    "an epoch longer than the file": (
        facts(channel("ECG", n_samples=299_000)),
        (),
        "signals.heart.epoch.length_s",
        "300 s",
    ),
}


def test_what_is_declared_for_delimited_files_leaves_an_edf_file_alone(study_folder: Path) -> None:
    """A study may mix both: a file that states its rate and unit is read by its own word."""
    stated = facts(channel("EMG", Fraction(2000), unit="mV", n_samples=1_200_000))
    resampled = ("epoch: {length_s: 1}", "epoch: {length_s: 1}\n    resample: {rate_hz: 500}")

    assert check(study_folder, stated, replaced=(LOAD, resampled)) == ()


@pytest.mark.parametrize(("first", "replaced", "field", "found"), CASES.values(), ids=CASES)
def test_a_file_that_does_not_fit_the_study_is_refused(
    study_folder: Path, first: FileFacts, replaced: tuple[tuple[str, str], ...], field: str, found: str
) -> None:
    """Each contradiction names recording, key, what was found, what is allowed and the remedy."""
    problems = check(study_folder, first, replaced=replaced)

    assert {problem.field for problem in problems} == {field}
    assert problems[0].where == "recording p1d"
    assert found in problems[0].found
    assert problems[0].allowed
    assert "study.yaml, line" in problems[0].remedy


def test_a_declared_rate_and_unit_serve_a_file_that_states_none(study_folder: Path) -> None:
    """Delimited files are understood by what the study declares."""
    assert check(study_folder, facts(channel("EMG", None, None)), replaced=(LOAD,)) == ()


def test_a_band_beyond_half_the_rate_of_the_file_is_refused(study_folder: Path) -> None:
    """Without resampling, the file's own rate decides."""
    text = (study_folder / "study.yaml").read_text(encoding="utf-8")
    start, stop = text.index("    resample:"), text.index("    epoch:\n")
    (study_folder / "study.yaml").write_text(text[:start] + text[stop:], encoding="utf-8")
    slow = [channel(label, Fraction(20), n_samples=12_000) for label in ("Fz", "Cz")]

    fields = [problem.field for problem in check(study_folder, facts(*slow))]

    assert fields == ["signals.eeg.features.bands_hz.alpha", "signals.eeg.resample"]


def test_recordings_of_different_rates_must_be_resampled(study_folder: Path) -> None:
    """Spectra of one signal are compared on one frequency grid."""
    (problem,) = check(study_folder, facts(channel("EMG", Fraction(500), n_samples=300_000)))

    assert (problem.file, problem.field) == ("study.yaml", "signals.biceps.resample")
    assert problem.found == "500 Hz (p1d), 1000 Hz (p1n)"
    assert "rate_hz: 500" in problem.remedy


def test_a_stretch_beyond_the_end_of_the_file_is_refused(study_folder: Path) -> None:
    """The row of the table is named."""
    replaced = (
        ("condition,group\n", "condition,group,stop_s\n"),
        ("day,crew\np1n", "day,crew,700\np1n"),
        (",crew\n", ",crew,\n"),
        (",office\n", ",office,\n"),
    )

    (problem,) = check(study_folder, facts(), replaced=replaced)

    assert (problem.file, problem.where) == ("recordings.csv", "row 2, column stop_s")
    assert "600 s" in problem.allowed


def test_a_segment_beyond_the_end_of_the_file_is_refused(study_folder: Path) -> None:
    """The row of the segments table is named."""
    others = "".join(f"{name},rest,100,600\n" for name in RECORDINGS[1:])
    table = f"recording,segment,start_s,stop_s\np1d,rest,100,601\n{others}"
    (study_folder / "segments.csv").write_text(table, encoding="utf-8")

    (problem,) = check(study_folder, facts())

    assert (problem.file, problem.where) == ("segments.csv", "row 2, column stop_s")


def test_a_recording_without_the_segments_that_others_have_is_refused(study_folder: Path) -> None:
    """Else its whole length would stand, unnoticed, beside the segments of the others."""
    others = "".join(f"{name},rest,100,600\n" for name in RECORDINGS[1:])
    (study_folder / "segments.csv").write_text(
        f"recording,segment,start_s,stop_s\n{others}", encoding="utf-8"
    )

    problems = check(study_folder, facts(), replaced=(("kind: ecg", "kind: ecg\n    segments: []"),))

    assert {(problem.where, problem.field) for problem in problems} == {
        ("recording p1d", "signals.eeg.segments"),
        ("recording p1d", "signals.biceps.segments"),
    }
    assert {problem.found for problem in problems} == {"no segment"}
    assert "segments: []" in problems[0].remedy


def test_a_recording_without_a_segment_that_the_signal_names_is_refused(study_folder: Path) -> None:
    """It is named with the segment it lacks."""
    rows = "p1n,work,0,300\n"
    (study_folder / "segments.csv").write_text(f"recording,segment,start_s,stop_s\n{rows}", encoding="utf-8")
    named = (
        ("kind: ecg", "kind: ecg\n    segments: [work]"),
        ("feature: heart_rate", "feature: heart_rate\n    segment: work"),
    )

    problems = check(study_folder, facts(), replaced=named)

    lacking = {problem.where for problem in problems if problem.found == "no segment work"}
    assert lacking == {f"recording {name}" for name in RECORDINGS if name != "p1n"}


def test_an_annotation_that_no_file_holds_is_refused(study_folder: Path) -> None:
    """A misspelt text would give no segment anywhere."""
    notes = (Annotation(0.0, 400.0, "eyes closed"), Annotation(400.0, 0.0, "blink"))
    replaced = (
        ("mains_hz: 50", "mains_hz: 50\nsegments: {annotations: [eyes closd, blink]}"),
        ("scale: log10", "segment: blink"),
        ("feature: heart_rate", "feature: heart_rate\n    segment: blink"),
    )

    problems = check(study_folder, facts(notes=notes), replaced=replaced)

    by_field = {problem.field: problem for problem in problems}
    assert by_field["segments.annotations[0]"].remedy == "Did you mean eyes closed?"
    assert "lasts 0 s" in by_field["segments.annotations[1]"].found
