"""The store: put a node, get a node. What cannot be verified does not exist."""

from __future__ import annotations

import json
import os
import threading
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa

from bandcairn.errors import DamagedNodeError
from bandcairn.store.frame import data_digest
from bandcairn.store.layout import PRIVATE_FILE, make_private_folder, node_path, temporary_path
from bandcairn.store.memory import FrameMemory
from bandcairn.store.parquet import read_frame, read_record, write_frame

if TYPE_CHECKING:
    from collections.abc import Mapping
    from pathlib import Path

    from bandcairn.store.frame import Frame

_MEMORY_BYTES = 384 << 20
# What the reading of a torn or altered file raises, wherever the damage lies.
_DAMAGE = (OSError, pa.ArrowException, KeyError, TypeError, ValueError)


class Store:
    """The nodes of one study on disk.

    Parameters
    ----------
    folder : Path
        The folder ``nodes`` of the study; made when the first node is put.
    """

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self._memory = FrameMemory(_MEMORY_BYTES)

    def path(self, step: str, key: str) -> Path:
        """Return the file of a node."""
        return node_path(self.folder, step, key)

    def has(self, step: str, key: str) -> bool:
        """Tell whether a node's file exists."""
        return self.path(step, key).exists()

    def put(self, step: str, key: str, frame: Frame, record: Mapping[str, Any]) -> dict[str, Any]:
        """Write a node so that it is either whole or absent.

        The file is written beside its place, read back and compared, and renamed. Two writers of one node do no
        harm: both write the same data.

        Parameters
        ----------
        step, key : str
            The node.
        frame : Frame
            Its data.
        record : mapping
            Its provenance; the data digest is added to it.

        Returns
        -------
        dict
            The record as stored.
        """
        path = self.path(step, key)
        make_private_folder(path.parent)
        stored = {**record, "data_digest": data_digest(frame)}
        temporary = temporary_path(path, f"{os.getpid()}-{threading.get_ident()}")
        try:
            os.close(os.open(temporary, os.O_CREAT | os.O_WRONLY | os.O_TRUNC, PRIVATE_FILE))
            write_frame(temporary, frame, stored)
            _verify_written(temporary, frame, key)
            temporary.replace(path)
        finally:
            temporary.unlink(missing_ok=True)
        self._memory.put(key, frame)
        return stored

    def get(self, step: str, key: str) -> Frame:
        """Return the data of a node.

        Raises
        ------
        DamagedNodeError
            If the file is missing, torn, or its data do not match the digest written with them.
        """
        held = self._memory.get(key)
        if held is not None:
            return held
        path = self.path(step, key)
        try:
            frame, record = read_frame(path)
            whole = record["key"] == key and data_digest(frame) == record["data_digest"]
        except _DAMAGE as error:
            raise DamagedNodeError(f"{step} node {key[:12]} cannot be read: {error}") from error
        if not whole:
            raise DamagedNodeError(f"{step} node {key[:12]} does not match the digest written with it")
        self._memory.put(key, frame)
        return frame

    def record(self, step: str, key: str) -> dict[str, Any]:
        """Return the provenance record of a node.

        Raises
        ------
        DamagedNodeError
            If the file cannot be read, or the record is altered or another node's.
        """
        try:
            record = read_record(self.path(step, key))
        except _DAMAGE as error:
            raise DamagedNodeError(f"{step} node {key[:12]} cannot be read: {error}") from error
        if record["key"] != key:
            raise DamagedNodeError(f"the file of {step} node {key[:12]} holds node {record['key'][:12]}")
        return record

    def remove(self, step: str, key: str) -> None:
        """Remove a node, from memory and from disk."""
        self._memory.forget(key)
        self.path(step, key).unlink(missing_ok=True)


def _verify_written(path: Path, frame: Frame, key: str) -> None:
    """Compare a file just written with what was to be written."""
    written, _ = read_frame(path)
    same = (
        list(written.columns) == list(frame.columns)
        and json.dumps(written.facts) == json.dumps(dict(frame.facts))
        and all(_equal(written.columns[name], column) for name, column in frame.columns.items())
    )
    if not same:
        raise DamagedNodeError(
            f"node {key[:12]} reads back otherwise than it was written; is the disk sound?"
        )


def _equal(first: Any, second: Any) -> bool:  # noqa: ANN401 - a column of either kind
    if isinstance(second, tuple):
        return bool(first == second)
    if isinstance(first, tuple) or first.dtype != second.dtype:
        return False
    if np.array_equal(first, second):
        return True
    return second.dtype.kind == "f" and bool(np.array_equal(first, second, equal_nan=True))
