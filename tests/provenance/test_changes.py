"""Why a node would run, in words."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING, Any

import pytest

from bandcairn.nodes.catalogue import VERSIONS
from bandcairn.nodes.key import canonical_json
from bandcairn.nodes.node import Node, make_node
from bandcairn.provenance.changes import differences, reasons
from bandcairn.provenance.ledger import ledger_rows

if TYPE_CHECKING:
    from collections.abc import Sequence

RAW = tuple(f"{number:02}" * 32 for number in range(12))
STAGES = [
    {"type": "highpass", "cutoff_hz": 20, "order": 4},
    {"type": "lowpass", "cutoff_hz": 400, "order": 2},
]


def load(raw: tuple[str, ...] = RAW, signal: str = "arm") -> Node:
    """Return a load node."""
    return make_node("load", parameters='{"channels":["EMG"]}', raw=raw, recording="p1", signal=signal)


def node(step: str, parent: Node, signal: str = "arm", **parameters: object) -> Node:
    """Return a node that reads another."""
    return make_node(
        step,
        parameters=canonical_json(parameters),
        parents=(("signal", parent.key),),
        recording="p1",
        signal=signal,
    )


def statistics(parent: Node, family: str, **parameters: object) -> Node:
    """Return a statistics node; it has no signal, and is known by its family."""
    text = canonical_json({"family": family, **parameters})
    return make_node("statistics", parameters=text, parents=(("table/arm", parent.key),))


def ledger_of(nodes: Sequence[Node]) -> list[dict[str, Any]]:
    """Return the ledger of a run that has computed the nodes."""
    record = {
        "data_digest": "0" * 64,
        "software": {},
        "started": "2001-02-03T04:05:06.789+00:00",
        "seconds": 1.0,
        "peak_memory_mb": 1.0,
    }
    return ledger_rows(nodes, {node.key: {**record, "step_version": VERSIONS[node.step]} for node in nodes})


def why(missing: Sequence[Node], before: Sequence[Node]) -> list[tuple[str, ...]]:
    """Return the reasons of missing nodes, in their order."""
    return [reason.why for reason in reasons(missing, ledger_of(before))]


def test_without_an_earlier_run_everything_is_new() -> None:
    """There is nothing to compare with."""
    first = load()
    assert why([first, node("filter", first)], []) == [("new",), ("new",)]


def test_a_node_at_a_place_where_none_stood_is_new() -> None:
    """A recording or signal that was added."""
    assert why([load(RAW[:3], "leg")], [load()]) == [("new",)]


def test_a_node_whose_file_was_removed_is_told_so() -> None:
    """Its key is in the ledger; nothing has changed."""
    first = load()
    assert why([first], [first]) == [("its file is missing",)]


def test_a_changed_parameter_is_told_with_its_place_and_both_values() -> None:
    """Also inside a list of stages."""
    parent = load()
    changed = [STAGES[0], {**STAGES[1], "cutoff_hz": 350}]
    found = why([node("filter", parent, stages=changed)], [parent, node("filter", parent, stages=STAGES)])
    assert found == [("stages[1].cutoff_hz changed from 400 to 350",)]


def test_two_changed_parameters_are_both_told() -> None:
    """In the order of the former recipe."""
    parent = load()
    before = node("epoch", parent, length_s=4, overlap=0.5, segments=[])
    after = node("epoch", parent, length_s=2, overlap=0, segments=[])
    assert why([after], [parent, before]) == [
        ("length_s changed from 4 to 2", "overlap changed from 0.5 to 0"),
    ]


def test_changed_raw_data_are_told() -> None:
    """One channel of twelve is enough."""
    changed = (*RAW[:11], "f" * 64)
    assert why([load(changed)], [load()]) == [("raw data changed",)]


def test_raw_data_of_many_channels_are_not_told_as_changed_when_they_are_not() -> None:
    """Beyond ten channels the ledger names them in another order than the node."""
    before = load()
    after = make_node(
        "load", parameters='{"channels":["EMG"],"stop_s":9}', raw=RAW, recording="p1", signal="arm"
    )
    assert why([after], [before]) == [("stop_s added (9)",)]


def test_exchanged_channels_are_told_as_changed_raw_data() -> None:
    """The order of the channels is part of the recipe."""
    assert why([load(RAW[::-1])], [load()]) == [("raw data changed",)]


def test_a_raised_step_version_is_told(monkeypatch: pytest.MonkeyPatch) -> None:
    """With both versions."""
    parent = load()
    ledger = ledger_of([parent, node("filter", parent, stages=STAGES)])
    present = VERSIONS["filter"]
    monkeypatch.setitem(VERSIONS, "filter", present + 1)
    found = reasons([node("filter", parent, stages=STAGES)], ledger)
    assert found[0].why == (f"step version raised from {present} to {present + 1}",)


def test_a_child_follows_the_steps_above_it_that_run() -> None:
    """In the order of the chain, and only those that it reads itself."""
    before = [load(), node("filter", load(), stages=STAGES)]
    first = load(RAW[:3])
    filtered = node("filter", first, stages=STAGES)
    parents = (("signal", filtered.key), ("epochs", first.key))
    spectrum = make_node("spectrum", parameters="{}", parents=parents, recording="p1", signal="arm")
    old = make_node(
        "spectrum", parameters="{}", parents=(("signal", before[1].key),), recording="p1", signal="arm"
    )
    found = why([first, filtered, spectrum], [*before, old])
    assert found == [("raw data changed",), ("follows load",), ("follows load, filter",)]


def test_a_child_with_a_change_of_its_own_tells_that_alone() -> None:
    """That it follows as well goes without saying."""
    before = [load(), node("epoch", load(), length_s=4)]
    first = load(RAW[:3])
    assert why([first, node("epoch", first, length_s=2)], before) == [
        ("raw data changed",),
        ("length_s changed from 4 to 2",),
    ]


def test_a_child_of_nodes_that_stand_reads_other_nodes() -> None:
    """A parameter changed back: the parent is in the store, the child was pruned."""
    before = [load(), node("filter", load(), stages=STAGES)]
    other = load(RAW[:3])
    assert why([node("filter", other, stages=STAGES)], before) == [("reads other nodes than before",)]


def test_statistics_are_compared_with_their_own_family() -> None:
    """Several stand at the same place: they have neither recording nor signal."""
    table = node("table", load())
    before = [
        table,
        statistics(table, "heart", adjustment="holm"),
        statistics(table, "watch", adjustment="holm"),
    ]
    changed = statistics(table, "heart", adjustment="none")
    assert why([changed], before) == [('adjustment changed from "holm" to "none"',)]
    assert why([statistics(table, "arms")], before) == [("new",)]


@pytest.mark.parametrize(
    ("former", "present", "told"),
    [
        ({"a": 1}, {"a": 1}, []),
        ({"a": 1}, {"a": 1.0}, []),
        ({"a": {"b": 1}}, {"a": {"b": None}}, ["a.b changed from 1 to null"]),
        ({}, {"reject": {"flat_uv": 1}}, ['reject added ({"flat_uv": 1})']),
        ({"phase": "zero"}, {}, ['phase dropped (was "zero")']),
        ({"a": 1, "b": 2}, {"b": 3, "c": 4}, ["a dropped (was 1)", "b changed from 2 to 3", "c added (4)"]),
        ({"cutoff_hz": [1, 40]}, {"cutoff_hz": [2, 40]}, ["cutoff_hz changed from [1, 40] to [2, 40]"]),
        ({"name": "µ"}, {"name": "Ω"}, ['name changed from "µ" to "Ω"']),
        ({"s": [{"a": 1}]}, {"s": [{"a": 2, "b": 3}]}, ["s[0].a changed from 1 to 2", "s[0].b added (3)"]),
        ({"s": [{"a": 1}]}, {"s": []}, ['s changed from [{"a": 1}] to []']),
        ({"s": [1]}, {"s": [{"a": 1}]}, ['s changed from [1] to [{"a": 1}]']),
    ],
)
def test_differences_are_told_in_words(former: object, present: object, told: list[str]) -> None:
    """Each with its path, what was and what is."""
    assert differences(former, present) == told


def test_a_long_value_is_cut_short() -> None:
    """A table of a thousand rows is not to fill the screen."""
    told = differences({"rows": []}, {"rows": ["recording"] * 1000})
    assert len(told) == 1
    assert told[0].startswith('rows changed from [] to ["recording", ')
    assert told[0].endswith("…")
    assert len(told[0]) < 120


def test_a_change_of_the_table_of_recordings_names_the_row() -> None:
    """Rows are compared one by one."""
    row = {"recording": "p1_day", "participant": "p1", "design": {"condition": "day"}}
    told = differences({"rows": [row]}, {"rows": [json.loads(json.dumps(row).replace("day", "dusk"))]})
    assert told == [
        'rows[0].recording changed from "p1_day" to "p1_dusk"',
        'rows[0].design.condition changed from "day" to "dusk"',
    ]
