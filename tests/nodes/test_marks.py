"""What events and decisions do to the plan: they touch the recordings they are about, and no others (F4, F5)."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import pytest

from bandcairn.nodes.marks import recipe_of_decisions, touched_channels
from bandcairn.nodes.plan import build_plan
from bandcairn.signal import Annotation
from bandcairn.study.marks import DecisionRow, EventRow
from bandcairn.study.models import StudyDescription

if TYPE_CHECKING:
    from collections.abc import Callable

    from bandcairn.nodes.plan import Plan
    from bandcairn.nodes.survey import RawContent
    from bandcairn.study.description import LoadedStudy
    from bandcairn.study.models import AnySignal
    from bandcairn.study.tables import RecordingRow, SegmentRow

BELOW_EPOCH = {"epoch", "spectrum", "features"}
LOOSE = DecisionRow("p1_day", "eeg", "Fz", None, None, "AB", "2024-05-03", "electrode loose", 2)
COUGH = DecisionRow("p1_night", "", "", 10.0, 12.0, "AB", "2024-05-03", "coughing", 3)


@pytest.fixture
def study(
    load: Callable[..., LoadedStudy],
    study_text: str,
    rows: tuple[RecordingRow, ...],
    segments: tuple[SegmentRow, ...],
) -> LoadedStudy:
    """Return the study as it stands."""
    return load(study_text, rows, segments)


@pytest.fixture
def contents(content: Callable[..., RawContent], rows: tuple[RecordingRow, ...]) -> dict[str, RawContent]:
    """Return the content of every raw file."""
    return {row.recording: content(row.recording) for row in rows}


def moved(before: Plan, after: Plan) -> set[tuple[str, str, str]]:
    """Return recording, signal and step of the nodes that are not what they were."""
    return {place for place, key in after.slots.items() if before.slots[place] != key}


def eeg_of(study: LoadedStudy, **blocks: object) -> AnySignal:
    """Return the EEG signal with other blocks."""
    signal = study.description.signals["eeg"].model_dump(exclude_none=True)
    text = {**study.description.model_dump(exclude_none=True), "signals": {"eeg": {**signal, **blocks}}}
    return StudyDescription.model_validate({**text, "questions": []}).signals["eeg"]


def test_f4_a_decision_moves_its_recording_and_signal_alone(
    study: LoadedStudy, contents: dict[str, RawContent]
) -> None:
    """A bad channel of the EEG concerns neither the heart nor another recording; samples stay."""
    plain, decided = (build_plan(replace(study, decisions=found), contents) for found in ((), (LOOSE,)))

    assert moved(plain, decided) == {("p1_day", "eeg", step) for step in BELOW_EPOCH}


def test_f4_one_decision_undone_moves_its_recording_alone(
    study: LoadedStudy, contents: dict[str, RawContent]
) -> None:
    """The others stand, whatever row they are in."""
    both = build_plan(replace(study, decisions=(LOOSE, COUGH)), contents)
    one = build_plan(replace(study, decisions=(replace(LOOSE, row=9),)), contents)

    assert moved(both, one) == {
        ("p1_night", signal, step) for signal in ("eeg", "heart", "arm") for step in BELOW_EPOCH
    }


def test_f4_who_when_and_why_move_nothing(study: LoadedStudy, contents: dict[str, RawContent]) -> None:
    """Words may be mended: no number depends on them."""
    mended = replace(LOOSE, who="CD", when="2025", why="electrode off")

    assert (
        build_plan(replace(study, decisions=(LOOSE,)), contents).slots
        == build_plan(replace(study, decisions=(mended,)), contents).slots
    )


def test_a_decision_about_a_signal_without_the_channel_does_not_touch_it(study: LoadedStudy) -> None:
    """A blank signal means every signal that has the channel."""
    anywhere = replace(LOOSE, signal="")

    assert touched_channels(anywhere, "eeg", study.description.signals["eeg"]) == ("Fz",)
    assert touched_channels(anywhere, "heart", study.description.signals["heart"]) == ()


def test_a_bad_channel_takes_its_pairs_with_it(study: LoadedStudy) -> None:
    """What is measured against it is as bad as it is."""
    pairs = eeg_of(
        study, channels=["Fz", "Cz", "Pz"], reference={"pairs": {"front": ["Fz", "Cz"], "back": ["Cz", "Pz"]}}
    )
    named = eeg_of(study, channels=["Fz", "Cz", "Pz"], reference=["Fz"])

    assert touched_channels(LOOSE, "eeg", pairs) == ("front",)
    assert touched_channels(LOOSE, "eeg", named) == ("Cz", "Pz")


def test_a_bad_channel_in_the_average_is_told_to_the_others(study: LoadedStudy) -> None:
    """It leaves the signal, but it has been in the mean."""
    signal = eeg_of(study, reference="average")

    assert recipe_of_decisions((LOOSE,), "eeg", signal) == {"channels": ["Fz"], "in_average": ["Fz"]}


def test_f1_events_of_the_annotations_enter_the_recipe_by_their_times(
    study: LoadedStudy, contents: dict[str, RawContent]
) -> None:
    """Of the wanted texts, each time once; with a table, its rows instead."""
    signal = eeg_of(study, epoch={"around": ["tone", "beep"], "start_s": -0.2, "stop_s": 3.8})
    description = study.description.model_copy(update={"signals": {"eeg": signal}, "questions": ()})
    notes = tuple(
        Annotation(at, 0.0, text)
        for at, text in ((1.5, "tone"), (1.5, "beep"), (3.0, "cough"), (9.25, "beep"))
    )
    marked = {
        name: replace(found, facts=replace(found.facts, annotations=notes))
        for name, found in contents.items()
    }
    annotated = replace(study, description=description)
    table = (EventRow("p1_day", 4.0, "tone", 2), EventRow("p2_day", 5.0, "tone", 3))
    by_table = replace(annotated, events=table, events_file="events.csv")

    assert recipe(build_plan(annotated, marked), "p1_day")["events"] == [1.5, 9.25]
    assert recipe(build_plan(by_table, marked), "p1_day")["events"] == [4]
    assert recipe(build_plan(by_table, marked), "p1_night")["events"] == []


def test_f1_an_event_that_moves_moves_its_recording_alone(
    study: LoadedStudy, contents: dict[str, RawContent]
) -> None:
    """The recipe holds the times of its own recording."""
    signal = eeg_of(study, epoch={"around": "tone", "start_s": -0.2, "stop_s": 3.8})
    description = study.description.model_copy(update={"signals": {"eeg": signal}, "questions": ()})
    plans = [
        build_plan(
            replace(
                study,
                description=description,
                events=(EventRow("p1_day", onset_s, "tone", 2), EventRow("p2_day", 5.0, "tone", 3)),
                events_file="events.csv",
            ),
            contents,
        )
        for onset_s in (4.0, 4.5)
    ]

    assert moved(*plans) == {("p1_day", "eeg", step) for step in BELOW_EPOCH}


def test_f5_another_least_number_of_epochs_lays_no_epoch_anew(
    study: LoadedStudy, contents: dict[str, RawContent]
) -> None:
    """It decides whether there is a value, and nothing before it."""
    signal = eeg_of(
        study, epoch={"length_s": 4, "overlap": 0.5, "reject": {"peak_to_peak_uv": 150}, "least": 10}
    )
    signals = {**study.description.signals, "eeg": signal}
    other = replace(study, description=study.description.model_copy(update={"signals": signals}))

    assert {step for _, _, step in moved(build_plan(study, contents), build_plan(other, contents))} == {
        "features"
    }


def recipe(plan: Plan, recording: str) -> dict[str, list[float]]:
    """Return the parameters of a recording's epochs."""
    import json

    found: dict[str, list[float]] = json.loads(
        plan.recording_nodes[plan.slots[recording, "eeg", "epoch"]].parameters
    )
    return found
