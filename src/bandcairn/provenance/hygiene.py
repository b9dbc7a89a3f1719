"""Which files of the store no node of the study needs."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from bandcairn.store.layout import node_path, stored_files

if TYPE_CHECKING:
    from collections.abc import Iterable
    from pathlib import Path

    from bandcairn.nodes.node import Node


@dataclass(frozen=True, slots=True)
class Leftover:
    """A file of the store that no node needs, with its size in bytes."""

    path: Path
    n_bytes: int


def leftovers(store: Path, needed: Iterable[Node]) -> tuple[Leftover, ...]:
    """Return the files of a store that belong to none of the needed nodes.

    Parameters
    ----------
    store : Path
        The folder of the nodes.
    needed : iterable of Node
        Every node to be kept.
    """
    kept = {node_path(store, node.step, node.key) for node in needed}
    return tuple(Leftover(path, path.stat().st_size) for path in stored_files(store) if path not in kept)
