"""What the study declares of its files: aliases, units with a reason, missing samples; pains P1, P2 and P14."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from typing import TYPE_CHECKING

import pytest

from bandcairn.errors import StudyError
from bandcairn.signal import ChannelFacts, FileDetails, FileFacts, Gap
from bandcairn.study.aliases import labels_for
from bandcairn.study.description import load_study
from bandcairn.study.facts_check import check_facts

if TYPE_CHECKING:
    from pathlib import Path

    from bandcairn.errors import Problem

RECORDINGS = ("p1d", "p1n", "p2d", "p2n", "p3d", "p3n", "p4d", "p4n")
ALIASES = "aliases: {Cz: [EEG Cz, CZ, Cz-A1]}\n"


def facts(*labels: str, unit: str | None = "uV", form: str = "EDF") -> FileFacts:
    """Return ten minutes at 1000 Hz under the given labels."""
    channels = tuple(ChannelFacts(label, Fraction(1000), unit, 600_000) for label in labels)
    return FileFacts(channels, (), Fraction(600), details=FileDetails(form, left_out=("Status",)))


def check(folder: Path, first: FileFacts, above: str = "", *changes: tuple[str, str]) -> tuple[Problem, ...]:
    """Check the study, with `above` before its signals, against `first` and sound files."""
    file = folder / "study.yaml"
    text = file.read_text("utf-8").replace("signals:\n", above + "signals:\n", 1)
    for before, after in changes:
        assert before in text
        text = text.replace(before, after)
    file.write_text(text, "utf-8")
    sound = facts("Fz", "Cz", "ECG", "EMG")
    return check_facts(load_study(folder), dict.fromkeys(RECORDINGS, sound) | {"p1d": first})


@pytest.mark.parametrize(
    ("labels", "expected"),
    [
        (("Cz", "Fz"), ("Cz",)),
        (("EEG Cz", "Fz"), ("EEG Cz",)),
        (("EEG Cz", "Cz"), ("Cz",)),
        (("EEG Cz", "CZ"), ("EEG Cz", "CZ")),
        (("Cz", "Cz"), ("Cz", "Cz")),
        (("cz", "Fz"), ()),
    ],
)
def test_p14_the_exact_label_wins_and_two_aliases_are_both_told(
    labels: tuple[str, ...], expected: tuple[str, ...]
) -> None:
    """Case counts: cz is no alias unless it is listed."""
    assert labels_for("Cz", labels, {"Cz": ("EEG Cz", "CZ", "Cz-A1")}) == expected


@pytest.mark.parametrize("label", ["Cz", "EEG Cz", "CZ", "Cz-A1"])
def test_p14_three_rigs_are_one_channel(study_folder: Path, label: str) -> None:
    """Each names it in its own way."""
    assert check(study_folder, facts("Fz", label, "ECG", "EMG"), ALIASES) == ()


def test_p14_two_labels_for_one_channel_are_refused(study_folder: Path) -> None:
    """Which is meant cannot be told."""
    (problem,) = check(study_folder, facts("Fz", "CZ", "Cz-A1", "ECG", "EMG"), ALIASES)
    assert problem.field == "signals.eeg.channels[1]"
    assert problem.found == "CZ, Cz-A1 for Cz"


def test_p14_a_label_twice_in_a_file_is_refused(study_folder: Path) -> None:
    """Also under an alias."""
    (problem,) = check(study_folder, facts("Fz", "CZ", "CZ", "ECG", "EMG"), ALIASES)
    assert problem.found == "2 channels named CZ"


@pytest.mark.parametrize(
    ("aliases", "found"),
    [
        ("aliases: {Cz: [E1], Fz: [E1]}\n", "E1 with two meanings"),
        ("aliases: {Cz: [Fz], Fz: [E1]}\n", "Fz with two meanings"),
        ("aliases: {Cy: [E1]}\n", "Cy"),
    ],
)
def test_p14_aliases_that_are_unclear_are_refused(study_folder: Path, aliases: str, found: str) -> None:
    """A label under two names, or a name that no signal uses."""
    with pytest.raises(StudyError) as error:
        check(study_folder, facts("Fz", "Cz", "ECG", "EMG"), aliases)
    assert (found, "aliases") in {(problem.found, problem.field) for problem in error.value.problems}


def test_p13_a_trigger_channel_asked_for_is_named_as_one(study_folder: Path) -> None:
    """Not as a misspelling."""
    change = ("channels: [ECG]", "channels: [Status]")
    problems = check(study_folder, facts("Fz", "Cz", "ECG", "EMG"), "", change)
    assert {problem.found for problem in problems} == {"Status, which holds annotations or triggers"}


@pytest.mark.parametrize("unit", [None, ".V"])
@pytest.mark.parametrize("form", ["EDF", "BDF"])
def test_p1_a_blank_or_unknown_unit_needs_a_unit_and_a_reason(
    study_folder: Path, unit: str | None, form: str
) -> None:
    """A unit that is meant for tables does not slip in; with a reason it counts."""
    unclear = facts("Fz", "Cz", "ECG", "EMG", unit=unit, form=form)
    problems = check(study_folder, unclear, "load: {unit: uV}\n")
    assert {problem.field for problem in problems} == {
        f"signals.{name}.load.unit" for name in ("eeg", "heart", "biceps")
    }
    assert all("unit_reason" in problem.remedy for problem in problems)
    change = ("load: {unit: uV}", "load: {unit: uV, unit_reason: the recorder writes none}")
    assert check(study_folder, unclear, "", change) == ()


def test_p7_a_rate_declared_for_tables_is_not_held_against_an_edf_file(study_folder: Path) -> None:
    """A blank unit does not make a table of it."""
    unclear = facts("Fz", "Cz", "ECG", "EMG", unit=None)
    load = "load: {rate_hz: 500, unit: uV, unit_reason: the recorder writes none}\n"
    assert check(study_folder, unclear, load) == ()


def test_p1_a_reason_without_a_unit_is_refused(study_folder: Path) -> None:
    """It explains nothing."""
    with pytest.raises(StudyError, match="A unit_reason needs a unit"):
        check(study_folder, facts("Fz", "Cz", "ECG", "EMG"), "load: {unit_reason: because}\n")


def test_p4_gaps_of_a_table_must_be_declared_and_those_of_edf_need_not(study_folder: Path) -> None:
    """EDF+D says itself that it has gaps; a clock that jumps may be a fault."""
    gap = (Gap(Fraction(100), Fraction(103)),)
    table = replace(facts("Fz", "Cz", "ECG", "EMG", unit=None, form="delimited"), gaps=gap)
    edf = replace(facts("Fz", "Cz", "ECG", "EMG"), gaps=gap)
    assert check(study_folder, edf) == ()
    problems = check(study_folder, table, "load: {unit: uV}\n")
    assert {problem.found for problem in problems} == {"1 gaps in time_s, the first from 100 to 103 s"}
    assert check(study_folder, table, "", ("{unit: uV}", "{unit: uV, missing: gap}")) == ()


def test_p4_epochs_must_fit_between_the_gaps(study_folder: Path) -> None:
    """Ten minutes with a gap in the middle hold no epoch of five: the longest stretch is told, by true time."""
    halves = replace(
        facts("Fz", "Cz", "ECG", "EMG"),
        duration_s=Fraction(1000),
        gaps=(Gap(Fraction(299), Fraction(701)),),
    )
    (problem,) = check(study_folder, halves)
    assert problem.field == "signals.heart.epoch.length_s"
    assert problem.allowed == "at most 299 s, the longest stretch of this recording"


def test_p4_tables_of_times_may_reach_to_the_true_end(study_folder: Path) -> None:
    """600 s of samples that end at 1000 s: a cut at 900 s lies inside."""
    gapped = replace(
        facts("Fz", "Cz", "ECG", "EMG"),
        duration_s=Fraction(1000),
        gaps=(Gap(Fraction(400), Fraction(800)),),
    )
    table = study_folder / "recordings.csv"
    lines = table.read_text("utf-8").splitlines()
    lines = [f"{lines[0]},stop_s", f"{lines[1]},900", *(f"{line}," for line in lines[2:])]
    table.write_text("\n".join(lines) + "\n", "utf-8")
    assert check(study_folder, gapped) == ()


@pytest.mark.parametrize(
    ("start_s", "stop_s", "expected"),
    [
        (0, 50, ((0, 10), (20, 30), (45, 50))),
        (12, 44, ((20, 30),)),
        (12, 18, ()),
        (5, 25, ((5, 10), (20, 25))),
        (10, 20, ()),
    ],
)
def test_stretches_are_what_the_gaps_leave(
    start_s: float, stop_s: float, expected: tuple[tuple[float, float], ...]
) -> None:
    """Closed on neither side by a gap that only touches."""
    gaps = (Gap(Fraction(10), Fraction(20)), Gap(Fraction(30), Fraction(45)))
    assert FileFacts((), (), gaps=gaps).stretches(start_s, stop_s) == expected
