"""Batches: every recording in one of them, and the same ones in every process."""

from __future__ import annotations

import pytest

from bandcairn.execution.batches import make_batches
from bandcairn.nodes.node import Node, make_node


def _nodes(recordings: int) -> list[Node]:
    """Return a chain of two steps for each recording, names in descending order."""
    nodes = []
    for number in reversed(range(recordings)):
        name = f"r{number:04d}"
        load = make_node("load", parameters="{}", raw=(name,), recording=name, signal="eeg")
        nodes += [
            load,
            make_node(
                "filter", parameters="{}", parents=(("signal", load.key),), recording=name, signal="eeg"
            ),
        ]
    return nodes


@pytest.mark.parametrize(
    ("recordings", "largest"), [(1, 1), (2, 1), (12, 1), (24, 2), (100, 8), (500, 16), (1000, 16)]
)
def test_every_node_is_in_one_batch_of_bounded_size(recordings: int, largest: int) -> None:
    """Batches share the recordings out: a dozen or more of them as soon as there are enough, none above sixteen."""
    nodes = _nodes(recordings)
    batches = make_batches(nodes)
    shared = [node for batch in batches.values() for step in batch.steps.values() for node in step]
    assert sorted(node.key for node in shared) == sorted(node.key for node in nodes)
    sizes = [len(batch.steps["load"]) for batch in batches.values()]
    assert max(sizes) == largest


def test_batches_do_not_depend_on_the_order_of_the_nodes() -> None:
    """Two processes that plan the same study name the same batches."""
    nodes = _nodes(30)
    assert list(make_batches(nodes)) == list(make_batches(sorted(nodes, key=lambda node: node.recording)))


def test_steps_of_a_batch_stand_in_the_order_of_the_chain() -> None:
    """The step before another is that of the chain, and the first has none."""
    (batch,) = make_batches(_nodes(1)).values()
    assert list(batch.steps) == ["load", "filter"]
    assert batch.before("filter") == "load"
    assert batch.before("load") is None
    assert batch.last_step == "filter"


def test_batch_of_changed_content_has_another_name() -> None:
    """The name of a batch follows the keys of its nodes."""
    first = make_node("load", parameters="{}", raw=("a",), recording="r")
    second = make_node("load", parameters="{}", raw=("b",), recording="r")
    assert make_batches([first]).keys().isdisjoint(make_batches([second]))


def test_no_recordings_make_no_batch() -> None:
    """Where every recording is unreadable there is nothing to share out."""
    assert make_batches([]) == {}
