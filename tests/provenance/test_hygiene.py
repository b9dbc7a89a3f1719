"""Which files of the store no node needs."""

from __future__ import annotations

from typing import TYPE_CHECKING

from bandcairn.nodes.node import make_node
from bandcairn.provenance.hygiene import Leftover, leftovers
from bandcairn.store.layout import node_path, temporary_path

if TYPE_CHECKING:
    from pathlib import Path

NODES = [make_node("filter", parameters=f'{{"order":{order}}}') for order in range(4)]


def write(path: Path, n_bytes: int) -> Path:
    """Write a file of some size."""
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_bytes(bytes(n_bytes))
    return path


def test_nodes_that_are_not_needed_are_left_over_with_their_sizes(tmp_path: Path) -> None:
    """Needed nodes that do not exist yet are no matter."""
    paths = [
        write(node_path(tmp_path, node.step, node.key), 10 + index) for index, node in enumerate(NODES[:3])
    ]
    found = leftovers(tmp_path, [NODES[1], NODES[3]])
    assert set(found) == {Leftover(paths[0], 10), Leftover(paths[2], 12)}


def test_a_half_written_file_is_left_over_even_beside_its_node(tmp_path: Path) -> None:
    """A run that was killed has left it."""
    path = write(node_path(tmp_path, "filter", NODES[0].key), 10)
    half = write(temporary_path(path, "77-1"), 4)
    assert leftovers(tmp_path, [NODES[0]]) == (Leftover(half, 4),)


def test_a_node_of_a_step_that_is_needed_under_another_step_is_left_over(tmp_path: Path) -> None:
    """The place of a file is its step and its key."""
    stray = write(node_path(tmp_path, "load", NODES[0].key), 3)
    assert leftovers(tmp_path, [NODES[0]]) == (Leftover(stray, 3),)


def test_files_of_others_are_never_left_over(tmp_path: Path) -> None:
    """Only what the store has written itself may be removed: no note, no memory of raw files, no log."""
    for name in ("raw_index.json", "last_run.log", "filter/notes.txt", ".receipts/filter/0000.json"):
        write(tmp_path / name, 1)
    assert leftovers(tmp_path, []) == ()


def test_a_store_that_does_not_exist_has_none(tmp_path: Path) -> None:
    """Before the first run."""
    assert leftovers(tmp_path / "nodes", NODES) == ()
