"""Where nodes lie, and which are there."""

from __future__ import annotations

import stat
from typing import TYPE_CHECKING

import pytest

from bandcairn.nodes.node import Node, make_node
from bandcairn.store.layout import (
    make_private_folder,
    node_path,
    present_keys,
    store_folder,
    stored_files,
    temporary_path,
)

if TYPE_CHECKING:
    from pathlib import Path


@pytest.fixture
def nodes() -> list[Node]:
    """Return five nodes of two steps."""
    return [make_node(step, parameters=f'{{"n":{n}}}') for step in ("load", "filter") for n in range(5)]


def write(store: Path, node: Node) -> Path:
    """Let the file of a node exist."""
    path = node_path(store, node.step, node.key)
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_bytes(b"")
    return path


def test_a_node_lies_under_its_step_and_key(tmp_path: Path) -> None:
    """The contract of the study folder: nodes/<step>/<key>.parquet."""
    assert (
        node_path(store_folder(tmp_path), "filter", "ab" * 32)
        == tmp_path / f"nodes/filter/{'ab' * 32}.parquet"
    )


def test_present_keys_are_those_of_the_files_that_exist(tmp_path: Path, nodes: list[Node]) -> None:
    """Existence is freshness: nothing else is asked of a file."""
    for node in (nodes[1], nodes[3], nodes[6]):
        write(tmp_path, node)
    assert present_keys(tmp_path, nodes) == {nodes[1].key, nodes[3].key, nodes[6].key}


def test_a_store_that_does_not_exist_holds_nothing(tmp_path: Path, nodes: list[Node]) -> None:
    """Before the first run."""
    assert present_keys(tmp_path / "nodes", nodes) == set()
    assert list(stored_files(tmp_path / "nodes")) == []


def test_a_key_under_another_step_is_not_present(tmp_path: Path, nodes: list[Node]) -> None:
    """A file in the wrong folder is nobody's node."""
    write(tmp_path, nodes[0]).rename(tmp_path / "moved")
    (tmp_path / "filter").mkdir()
    (tmp_path / "moved").rename(node_path(tmp_path, "filter", nodes[0].key))
    assert present_keys(tmp_path, nodes) == set()


def test_a_half_written_file_is_not_present_but_is_found(tmp_path: Path, nodes: list[Node]) -> None:
    """What a killed run leaves is no node, and can be swept away."""
    path = write(tmp_path, nodes[0])
    temporary = temporary_path(path, "77-1")
    path.rename(temporary)
    (tmp_path / "raw_index.json").write_text("{}")
    (tmp_path / "load" / "notes.txt").write_text("mine")
    assert present_keys(tmp_path, nodes) == set()
    assert list(stored_files(tmp_path)) == [temporary]


def test_folders_are_private_from_the_first_that_is_made(tmp_path: Path) -> None:
    """Those that exist already keep their mode: they are the user's."""
    (tmp_path / "mine").mkdir(mode=0o755)
    make_private_folder(tmp_path / "mine" / "nodes" / "load")
    make_private_folder(tmp_path / "mine" / "nodes" / "load")
    modes = [
        stat.S_IMODE((tmp_path / "mine" / below).stat().st_mode) for below in ("", "nodes", "nodes/load")
    ]
    assert modes == [0o755, 0o700, 0o700]
