"""Where the nodes of a study lie: ``nodes/<step>/<key>.parquet``. Light: no pyarrow."""

from __future__ import annotations

import os
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator
    from pathlib import Path

    from bandcairn.nodes.node import Node

STORE_NAME = "nodes"
SUFFIX = ".parquet"
_TEMPORARY = ".tmp"
PRIVATE_FOLDER = 0o700
PRIVATE_FILE = 0o600


def store_folder(study_folder: Path) -> Path:
    """Return the store of a study."""
    return study_folder / STORE_NAME


def node_path(store: Path, step: str, key: str) -> Path:
    """Return the file of a node."""
    return store / step / f"{key}{SUFFIX}"


def make_private_folder(folder: Path) -> None:
    """Make a folder and its missing parents, readable by its owner alone: recordings of people lie in it."""
    if not folder.is_dir():
        make_private_folder(folder.parent)
        folder.mkdir(mode=PRIVATE_FOLDER, exist_ok=True)


def present_keys(store: Path, nodes: Iterable[Node]) -> set[str]:
    """Return the keys of those nodes whose files exist. One look into each step's folder, however many nodes."""
    wanted: dict[str, list[str]] = {}
    for node in nodes:
        wanted.setdefault(node.step, []).append(node.key)
    present: set[str] = set()
    for step, keys in wanted.items():
        names = _names(store / step)
        present.update(key for key in keys if f"{key}{SUFFIX}" in names)
    return present


def stored_files(store: Path) -> Iterator[Path]:
    """Yield every file that lies in the steps' folders: nodes and what a killed run has left half-written."""
    if not store.is_dir():
        return
    for folder in sorted(path for path in store.iterdir() if path.is_dir()):
        for path in sorted(folder.iterdir()):
            if path.name.endswith((SUFFIX, _TEMPORARY)):
                yield path


def temporary_path(path: Path, writer: str) -> Path:
    """Return a name beside a file under which it is written before it is renamed."""
    return path.with_name(f".{path.name}.{writer}{_TEMPORARY}")


def _names(folder: Path) -> set[str]:
    try:
        return set(os.listdir(folder))  # noqa: PTH208 - a set of names of 20,000 nodes, not Path objects
    except FileNotFoundError:
        return set()
