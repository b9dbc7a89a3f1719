"""The plan: what each change touches, and nothing else."""

from __future__ import annotations

import json
from collections import Counter
from dataclasses import replace
from fractions import Fraction
from typing import TYPE_CHECKING, Any

import pytest

from bandcairn.nodes.catalogue import STUDY_STEPS, VERSIONS
from bandcairn.nodes.plan import build_plan, design_columns, families, plan_study_nodes
from bandcairn.study.models import StudyDescription

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from bandcairn.nodes.plan import Plan
    from bandcairn.nodes.survey import RawContent
    from bandcairn.study.description import LoadedStudy
    from bandcairn.study.tables import RecordingRow, SegmentRow

    Rows = tuple[RecordingRow, ...]
    Segments = tuple[SegmentRow, ...]
    Content = Callable[..., RawContent]
    Load = Callable[..., LoadedStudy]

BELOW_FILTER = {"filter", "epoch", "spectrum", "features", "table"}
JUDGED = {"quality", "verdict", "table"}


@pytest.fixture
def study(load: Load, study_text: str, rows: Rows, segments: Segments) -> LoadedStudy:
    """Return the study as it stands."""
    return load(study_text, rows, segments)


@pytest.fixture
def contents(content: Content, rows: Rows) -> dict[str, RawContent]:
    """Return the content of every raw file."""
    return {row.recording: content(row.recording) for row in rows}


@pytest.fixture
def edited(
    load: Load, study_text: str, rows: Rows, segments: Segments, contents: Mapping[str, RawContent]
) -> Callable[[str, str], Plan]:
    """Return the plan of the study with one text of its description changed."""

    def plan_of(before: str, after: str) -> Plan:
        assert study_text.count(before) == 1
        return build_plan(load(study_text.replace(before, after), rows, segments), contents)

    return plan_of


def places(plan: Plan) -> dict[tuple[str, str, str], str]:
    """Return the keys of a plan by recording, signal (or family of questions) and step."""
    study_places = {
        ("", node.signal or json.loads(node.parameters)["family"], node.step): node.key
        for node in plan.study_nodes.values()
    }
    return {**plan.slots, **study_places}


def touched(before: Plan, after: Plan) -> set[tuple[str, str]]:
    """Return signal (or family of questions) and step of every place whose key differs."""
    first, second = places(before), places(after)
    return {place[1:] for place in first.keys() | second.keys() if first.get(place) != second.get(place)}


def of(signal: str, *steps: str) -> set[tuple[str, str]]:
    """Return places of one signal."""
    return {(signal, step) for step in steps}


WATCH = of("watch", "statistics")
FATIGUE = of("fatigue by shift", "statistics")


@pytest.mark.parametrize(
    ("before", "after", "expected"),
    [
        # What filters and bands ask of a recording is held against its quality, which is not measured anew.
        ("cutoff_hz: 400", "cutoff_hz: 350", of("arm", *BELOW_FILTER, "verdict") | FATIGUE),
        ("alpha: [8, 13]", "alpha: [8, 12]", of("eeg", "features", "verdict", "table") | WATCH),
        ("rate_hz: 128", "rate_hz: 64", of("eeg", "resample", *BELOW_FILTER, "verdict") | WATCH),
        (
            "peak_to_peak_uv: 150",
            "peak_to_peak_uv: 100",
            of("eeg", "epoch", "spectrum", "features", "table") | WATCH,
        ),
        ("segment_s: 30", "segment_s: 20", of("heart", "spectrum", "features", "table") | WATCH),
        (
            "    segments: [hold]\n",
            "    segments: [hold]\n    quality: {flat_share: 0.1}\n",
            of("arm", "verdict", "table") | FATIGUE,
        ),
        (
            "    segments: [hold]\n",
            "    segments: [hold]\n    quality: {on_failure: flag}\n",
            of("arm", "table") | FATIGUE,
        ),
        (
            "segments: [hold]",
            "segments: [rest]",
            of("arm", "epoch", "spectrum", "features", "table") | FATIGUE,
        ),
        ("scale: log10", "scale: ln", WATCH),
        (
            "feature: median_frequency\n",
            "feature: median_frequency\n    adjustment: benjamini_hochberg\n",
            FATIGUE,
        ),
        ("feature: median_frequency\n", "feature: median_frequency\n    adjustment: holm\n", set()),
        ("feature: median_frequency\n", "feature: median_frequency\n    role: primary\n", set()),
        ("name: fatigue by shift", "name: fatigue at night", FATIGUE | of("fatigue at night", "statistics")),
        ("study: Harbour", "study: Lighthouse", set()),
        (
            "mains_hz: 50",
            "mains_hz: 60",
            of("eeg", *JUDGED) | of("heart", *JUDGED) | of("arm", *JUDGED) | WATCH | FATIGUE,
        ),
        ("mains_hz: 50\n", "mains_hz: 50\nload: {unit: mV}\n", set()),
        (
            "    segments: [hold]\n",
            "    segments: [hold]\n    recorder: {lowpass_hz: 300}\n",
            of("arm", *JUDGED) | FATIGUE,
        ),
        (
            "    segments: [hold]\n",
            "    segments: [hold]\n    quality: {on_band_failure: exclude}\n",
            of("arm", "table") | FATIGUE,
        ),
    ],
)
def test_an_edit_touches_its_own_step_and_what_is_below_it(
    plan: Plan, edited: Callable[[str, str], Plan], before: str, after: str, expected: set[tuple[str, str]]
) -> None:
    """An edit costs what it must: the step that it names and its children, in its own signal."""
    assert touched(plan, edited(before, after)) == expected


@pytest.mark.parametrize("reference", ["average", "[Cz]", "{pairs: {Fz-Cz: [Fz, Cz]}}"])
def test_a_reference_is_a_step_before_the_filter(
    plan: Plan, edited: Callable[[str, str], Plan], reference: str
) -> None:
    """Absent, it leaves no node; quality is measured as recorded, whatever the reference."""
    after = edited("channels: [Fz, Cz]", f"channels: [Fz, Cz]\n    reference: {reference}")

    assert touched(plan, after) == of("eeg", "reference", *BELOW_FILTER) | WATCH
    node = after.nodes[after.slots["p1_day", "eeg", "reference"]]
    assert node.parents == (("signal", after.slots["p1_day", "eeg", "resample"]),)
    assert after.nodes[after.slots["p1_day", "eeg", "filter"]].parents == (("signal", node.key),)


def test_questions_are_answered_for_the_channels_that_a_reference_leaves(
    edited: Callable[[str, str], Plan],
) -> None:
    """Pairs take the place of the channels."""
    after = edited("channels: [Fz, Cz]", "channels: [Fz, Cz]\n    reference: {pairs: {Fz-Cz: [Fz, Cz]}}")

    asked = next(node for node in after.study_nodes.values() if "alpha by shift" in node.parameters)
    question = next(q for q in json.loads(asked.parameters)["questions"] if q["name"] == "alpha by shift")
    assert question["channel_names"] == ["Fz-Cz"]


def test_a_notch_alone_knows_the_frequency_of_the_mains(
    load: Load, study_text: str, rows: Rows, contents: Mapping[str, RawContent]
) -> None:
    """The key of any other filter is the same on either side of the ocean."""
    notch = study_text.replace("    epoch: {length_s: 4", "      - {type: notch}\n    epoch: {length_s: 4")
    first, second = (
        build_plan(load(text, rows), contents)
        for text in (notch, notch.replace("mains_hz: 50", "mains_hz: 60"))
    )

    assert {place for place in touched(first, second) if place[1] == "filter"} == {("eeg", "filter")}
    stages = json.loads(second.nodes[second.slots["p1_day", "eeg", "filter"]].parameters)["stages"]
    assert [stage.get("mains_hz") for stage in stages] == [None, 60]


def test_an_edit_undone_returns_to_the_keys_of_before(plan: Plan, edited: Callable[[str, str], Plan]) -> None:
    """A parameter changed back costs nothing."""
    assert edited("cutoff_hz: 400", "cutoff_hz: 400.0").id == plan.id


def test_filter_stages_exchanged_are_another_filter(plan: Plan, edited: Callable[[str, str], Plan]) -> None:
    """The same numbers under other names are another recipe."""
    after = edited(
        "highpass, cutoff_hz: 20, design: butterworth, order: 4}\n"
        "      - {type: lowpass, cutoff_hz: 400, design: butterworth, order: 2}",
        "highpass, cutoff_hz: 20, design: butterworth, order: 2}\n"
        "      - {type: lowpass, cutoff_hz: 400, design: butterworth, order: 4}",
    )
    assert touched(plan, after) == of("arm", *BELOW_FILTER) | FATIGUE


def test_a_filter_taken_away_leaves_no_node(plan: Plan, edited: Callable[[str, str], Plan]) -> None:
    """A step that is absent passes its input on: the epochs are then laid over the loaded samples."""
    after = edited(
        "    filter:\n      - {type: bandpass, cutoff_hz: [1, 40], design: butterworth, order: 2}\n", ""
    )
    assert touched(plan, after) == of("heart", "beats", *BELOW_FILTER, "verdict") | WATCH
    assert ("p1_day", "heart", "filter") not in after.slots
    beats = after.nodes[after.slots["p1_day", "heart", "beats"]]
    assert beats.parents == (("signal", after.slots["p1_day", "heart", "load"]),)


def test_defaults_written_out_have_the_same_keys(
    plan: Plan, study: LoadedStudy, contents: Mapping[str, RawContent]
) -> None:
    """A study with every default made explicit is the same study, to the last key."""
    written = json.loads(study.description.model_dump_json())
    assert written["signals"]["arm"]["filter"][0]["phase"] == "zero"
    explicit = replace(study, description=StudyDescription.model_validate(written))
    assert places(build_plan(explicit, contents)) == places(plan)


def test_keys_of_the_description_in_another_order_have_the_same_keys(
    plan: Plan, edited: Callable[[str, str], Plan]
) -> None:
    """The order in which a block is written means nothing."""
    after = edited("{type: bandpass, cutoff_hz: [1, 40],", "{cutoff_hz: [1, 40], type: bandpass,")
    assert places(after) == places(plan)


def test_a_step_version_raised_touches_the_step_and_all_below(
    plan: Plan, study: LoadedStudy, contents: Mapping[str, RawContent], monkeypatch: pytest.MonkeyPatch
) -> None:
    """New numbers of a step are new numbers of all that reads them, in every signal."""
    monkeypatch.setitem(VERSIONS, "spectrum", 2)
    found = touched(plan, build_plan(study, contents))
    below = {
        pair for signal in ("eeg", "heart", "arm") for pair in of(signal, "spectrum", "features", "table")
    }
    assert found == below | WATCH | FATIGUE


def test_a_participant_renamed_touches_tables_and_statistics_alone(
    plan: Plan, study: LoadedStudy, contents: Mapping[str, RawContent]
) -> None:
    """Who it was is no matter of the samples."""
    renamed = tuple(
        replace(row, participant=row.participant.replace("p2", "zoe")) for row in study.recordings
    )
    after = build_plan(replace(study, recordings=renamed), contents)
    tables = {pair for signal in ("eeg", "heart", "arm") for pair in of(signal, "table")}
    assert touched(plan, after) == tables | WATCH | FATIGUE


def test_the_order_and_the_file_names_of_the_recordings_table_mean_nothing(
    plan: Plan, study: LoadedStudy, contents: Mapping[str, RawContent]
) -> None:
    """A table sorted otherwise, and files moved, are the same study."""
    moved = tuple(replace(row, file=f"moved/{row.recording}.edf", row=9) for row in study.recordings[::-1])
    after = build_plan(replace(study, recordings=moved), contents)
    assert places(after) == places(plan)
    assert after.id == plan.id


def test_the_order_of_the_segments_table_means_nothing(
    plan: Plan, study: LoadedStudy, contents: Mapping[str, RawContent]
) -> None:
    """Segments are taken in the order of time."""
    after = build_plan(replace(study, segments=study.segments[::-1]), contents)
    assert places(after) == places(plan)


def test_a_signal_renamed_keeps_the_nodes_of_its_recordings(
    *,
    plan: Plan,
    load: Load,
    study_text: str,
    rows: Rows,
    segments: Segments,
    contents: Mapping[str, RawContent],
) -> None:
    """Only what prints the name is made anew."""
    text = study_text.replace("  arm:\n", "  forearm:\n").replace("signal: arm", "signal: forearm")
    after = build_plan(load(text, rows, segments), contents)
    assert after.recording_nodes.keys() == plan.recording_nodes.keys()
    assert touched(plan, after) == (
        {place[1:] for place in places(plan) if place[1] == "arm"}
        | {place[1:] for place in places(after) if place[1] == "forearm"}
        | FATIGUE
    )


def test_one_raw_channel_changed_touches_that_recording_and_signal_alone(
    plan: Plan, study: LoadedStudy, contents: Mapping[str, RawContent]
) -> None:
    """A sample of the EMG of one recording leaves its EEG, and everybody else, as they were."""
    whole = contents["p2_day"]
    after = build_plan(
        study, {**contents, "p2_day": replace(whole, digests={**whole.digests, "EMG": "0" * 64})}
    )
    first, second = places(plan), places(after)
    changed = {place for place in first if first[place] != second[place]}
    steps = {"load", "quality", "filter", "epoch", "spectrum", "features"}
    assert changed == {("p2_day", "arm", step) for step in steps} | {
        ("", "arm", "verdict"),
        ("", "arm", "table"),
        ("", "fatigue by shift", "statistics"),
    }


def test_a_stretch_of_the_file_enters_the_key_of_its_recording(
    plan: Plan, study: LoadedStudy, contents: Mapping[str, RawContent]
) -> None:
    """A recording cut at another time is another recording."""
    rows = (replace(study.recordings[0], stop_s=55.0), *study.recordings[1:])
    after = build_plan(replace(study, recordings=rows), contents)
    first, second = places(plan), places(after)
    changed = {place[0] for place in first if place[0] and first[place] != second[place]}
    assert changed == {"p1_day"}


@pytest.mark.parametrize("unit", ["uV", None])
def test_a_declared_load_block_enters_the_keys_of_files_that_state_nothing(
    study: LoadedStudy, content: Content, study_text: str, load: Load, unit: str | None
) -> None:
    """Rate and unit declared for delimited files are no part of the recipe of a file that states its own."""
    declares_itself = unit is not None
    rates = dict.fromkeys(("Fz", "Cz", "ECG", "EMG"), 1000 if declares_itself else None)
    contents = {row.recording: content(row.recording, unit, rates) for row in study.recordings}
    first, second = (
        build_plan(
            load(
                study_text.replace("signals:\n", f"load: {{rate_hz: 1000, unit: {declared}}}\nsignals:\n", 1),
                study.recordings,
                study.segments,
            ),
            contents,
        )
        for declared in ("uV", "mV")
    )
    assert (places(first) == places(second)) is declares_itself
    parameters = json.loads(first.nodes[first.slots["p1_day", "arm", "load"]].parameters)
    assert parameters == {"channels": ["EMG"]} | ({} if declares_itself else {"rate_hz": 1000, "unit": "uV"})


def test_an_absent_option_is_no_part_of_a_recipe(plan: Plan) -> None:
    """An option that a later version adds, absent by default, leaves every key as it was."""
    assert [node.step for node in plan.nodes.values() if "null" in node.parameters] == []


@pytest.mark.parametrize(
    ("target", "own", "steps"),
    [
        ("128", Fraction(256), {"resample"}),
        ("256", Fraction(256), set()),
        ("256.0", Fraction(256), set()),
        ("102.4", Fraction(1024, 10), set()),
    ],
)
def test_a_rate_that_the_file_has_already_needs_no_resampling(
    *,
    study: LoadedStudy,
    content: Content,
    load: Load,
    study_text: str,
    target: str,
    own: Fraction,
    steps: set[str],
) -> None:
    """Rates are compared as the decimals they are written as: 102.4 is 1024/10, though no float is."""
    rates = {"Fz": own, "Cz": own, "ECG": 256, "EMG": 1000}
    text = study_text.replace("rate_hz: 128", f"rate_hz: {target}")
    plan = build_plan(
        load(text, study.recordings),
        {row.recording: content(row.recording, "uV", rates) for row in study.recordings},
    )
    assert {step for _, signal, step in plan.slots if signal == "eeg" and step == "resample"} == steps


def test_parents_come_before_their_children(plan: Plan) -> None:
    """The order of the plan is an order in which it can be carried out, and every parent is in it."""
    seen: set[str] = set()
    for node in plan.nodes.values():
        assert {key for _, key in node.parents} <= seen
        seen.add(node.key)


def test_every_recording_node_is_at_its_place(plan: Plan) -> None:
    """A slot names a node of that very recording, signal and step."""
    for (recording, signal, step), key in plan.slots.items():
        node = plan.recording_nodes[key]
        assert (node.recording, node.signal, node.step) == (recording, signal, step)
    assert {node.step for node in plan.study_nodes.values()} == set(STUDY_STEPS)


def test_a_recording_that_cannot_be_read_is_left_out(
    plan: Plan, study: LoadedStudy, contents: Mapping[str, RawContent]
) -> None:
    """The others keep their nodes; tables and statistics stand on the readable ones."""
    readable = {recording: found for recording, found in contents.items() if recording != "p1_day"}
    after = build_plan(study, readable)
    assert after.slots == {place: key for place, key in plan.slots.items() if place[0] != "p1_day"}
    table = next(node for node in after.study_nodes.values() if node.step == "table")
    assert [row["recording"] for row in json.loads(table.parameters)["rows"]] == [
        "p1_night",
        "p2_day",
        "p2_night",
    ]


def test_study_nodes_are_planned_over_the_recordings_that_have_features(
    plan: Plan, study: LoadedStudy
) -> None:
    """A recording that failed in one signal is missing in that signal's table alone."""
    failed = plan.slots["p2_night", "heart", "features"]
    nodes = plan_study_nodes(study, plan.slots, lambda key: key != failed)
    tables = {node.signal: node for node in nodes.values() if node.step == "table"}
    recordings = {
        signal: [row["recording"] for row in json.loads(table.parameters)["rows"]]
        for signal, table in tables.items()
    }
    everyone = [row.recording for row in study.recordings]
    assert recordings == {"eeg": everyone, "heart": everyone[:3], "arm": everyone}
    verdict = next(node for node in nodes.values() if node.step == "verdict" and node.signal == "heart")
    assert [role for role, _ in verdict.parents] == [f"quality/{name}" for name in everyone[:3]]
    assert {role for role, _ in tables["heart"].parents} == {
        "verdict",
        *(f"features/{name}" for name in everyone[:3]),
    }


def test_a_study_of_which_nothing_succeeded_still_has_its_tables(plan: Plan, study: LoadedStudy) -> None:
    """Empty tables and unanswered questions are results too."""
    nodes = plan_study_nodes(study, plan.slots, lambda _: False)
    assert Counter(node.step for node in nodes.values()) == {"verdict": 3, "table": 3, "statistics": 2}
    assert all(json.loads(n.parameters)["rows"] == [] for n in nodes.values() if n.step == "table")


def test_questions_are_grouped_by_family_and_else_stand_alone(study: LoadedStudy) -> None:
    """The family decides which p values are adjusted together."""
    grouped = {family: [question.name for question in asked] for family, asked in families(study).items()}
    assert grouped == {
        "watch": ["alpha by shift", "heart rate by shift"],
        "fatigue by shift": ["fatigue by shift"],
    }


def test_statistics_read_the_tables_of_the_signals_they_ask_for(plan: Plan) -> None:
    """One node answers a family, whatever signals its questions name."""
    roles = {
        json.loads(node.parameters)["family"]: [role for role, _ in node.parents]
        for node in plan.study_nodes.values()
        if node.step == "statistics"
    }
    assert roles == {"watch": ["table/eeg", "table/heart"], "fatigue by shift": ["table/arm"]}


def test_design_columns_stand_in_the_order_of_the_table(study: LoadedStudy) -> None:
    """They travel with every row of the results in that order."""
    rows = tuple(replace(row, design={"group": "crew", "age": "40"}) for row in study.recordings)
    assert design_columns(replace(study, recordings=rows)) == ("group", "age")


def test_recordings_of_equal_content_share_their_nodes(study: LoadedStudy, content: Content) -> None:
    """What is the same recipe on the same samples is computed once."""
    same = {row.recording: content("one and the same") for row in study.recordings}
    plan = build_plan(study, same)
    assert len(plan.recording_nodes) == len(plan.slots) // len(study.recordings)
    assert plan.slots["p1_day", "eeg", "features"] == plan.slots["p2_night", "eeg", "features"]


def segments_of(plan: Plan, recording: str, signal: str) -> list[Any]:
    """Return the segments of an epoch node."""
    found: list[Any] = json.loads(plan.nodes[plan.slots[recording, signal, "epoch"]].parameters)["segments"]
    return found


def test_a_signal_uses_the_segments_it_names(plan: Plan) -> None:
    """Absent means all that are declared, an empty list the whole recording, names those."""
    assert segments_of(plan, "p1_day", "heart") == [["rest", 0, 10], ["hold", 10, 50]]
    assert segments_of(plan, "p1_day", "eeg") == []
    assert segments_of(plan, "p1_day", "arm") == [["hold", 10, 50]]


def test_segments_are_taken_from_the_annotations_of_a_file_where_no_table_names_any(
    study: LoadedStudy, content: Content
) -> None:
    """A row of the segments table wins over the file's own marks."""
    marks = (("hold", 5.0, 15.0), ("rest", 20.0, 30.0))
    only_p1 = tuple(row for row in study.segments if row.recording.startswith("p1"))
    contents = {row.recording: content(row.recording, annotated=marks) for row in study.recordings}
    plan = build_plan(replace(study, segments=only_p1), contents)
    assert segments_of(plan, "p1_day", "arm") == [["hold", 10, 50]]
    assert segments_of(plan, "p2_day", "arm") == [["hold", 5, 15]]
    assert segments_of(plan, "p2_day", "heart") == [["hold", 5, 15], ["rest", 20, 30]]


def test_a_thousand_recordings_of_three_signals_have_all_their_nodes(
    load: Load, content: Content, study_text: str
) -> None:
    """Seven nodes for the resampled EEG and for the ECG with its beats, six for the EMG, and the study's own."""
    from bandcairn.study.tables import RecordingRow

    rows = [
        RecordingRow(f"r{n:04}", f"p{n // 2:03}", f"raw/r{n}.edf", None, None, {"condition": str(n % 2)}, n)
        for n in range(1000)
    ]
    plan = build_plan(load(study_text, rows), {row.recording: content(row.recording) for row in rows})
    per_step = Counter(node.step for node in plan.nodes.values())
    assert per_step == {
        **dict.fromkeys(("load", "quality", "filter", "epoch", "spectrum", "features"), 3000),
        **dict.fromkeys(("resample", "beats"), 1000),
        **dict.fromkeys(("verdict", "table"), 3),
        "statistics": 2,
    }
