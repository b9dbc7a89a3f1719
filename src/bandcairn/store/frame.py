"""What a node holds: named columns of equal length and a few facts about them."""

from __future__ import annotations

import hashlib
import json
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    Column = NDArray[Any] | tuple[str | None, ...]

# Chunks small enough to stay in a core's cache while a column is normalised and hashed.
_CHUNK = 1 << 15


@dataclass(frozen=True, slots=True)
class Frame:
    """The data of one node.

    Attributes
    ----------
    columns : mapping of str to ndarray or tuple of str or None
        Numbers as one-dimensional arrays, text as tuples; all of one length unless the node says otherwise.
        A float that cannot be given is NaN in memory and null on disk.
    facts : mapping of str to JSON value
        Rates, units, runs: what the columns need to be understood.
    """

    columns: Mapping[str, Column]
    facts: Mapping[str, Any] = field(default_factory=dict)

    def numbers(self, name: str) -> NDArray[Any]:
        """Return a column of numbers."""
        column = self.columns[name]
        if isinstance(column, tuple):
            raise TypeError(f"column {name} holds text")
        return column

    def text(self, name: str) -> tuple[str | None, ...]:
        """Return a column of text."""
        column = self.columns[name]
        if not isinstance(column, tuple):
            raise TypeError(f"column {name} holds numbers")
        return column

    @property
    def nbytes(self) -> int:
        """Bytes of the numbers, for bounding memory."""
        return sum(c.nbytes if isinstance(c, np.ndarray) else 64 * len(c) for c in self.columns.values())


def data_digest(frame: Frame) -> str:
    """Return the SHA-256 over facts, schema and values of a frame.

    It is blind to how a file holds them: compression, encodings and library versions do not enter. -0.0 counts as
    0.0, and every NaN is alike.
    """
    digest = hashlib.sha256()
    digest.update(json.dumps(dict(frame.facts), sort_keys=True, separators=(",", ":")).encode())
    for name, column in frame.columns.items():
        kind = "text" if isinstance(column, tuple) else column.dtype.newbyteorder("<").str
        digest.update(f"\n{json.dumps(name)}:{kind}:{len(column)}\n".encode())
        if isinstance(column, tuple):
            digest.update(json.dumps(column, separators=(",", ":")).encode())
        elif column.dtype.kind == "f":
            _hash_floats(digest, column)
        else:
            digest.update(np.ascontiguousarray(column).data)
    return digest.hexdigest()


def _hash_floats(digest: Any, column: NDArray[np.floating]) -> None:  # noqa: ANN401 - hashlib's own type is private
    buffer = np.empty(min(_CHUNK, len(column)), column.dtype)
    for start in range(0, len(column), _CHUNK):
        part = column[start : start + _CHUNK]
        chunk = np.add(part, 0.0, out=buffer[: len(part)])  # -0.0 + 0.0 is 0.0
        if has_nan(chunk):
            chunk[np.isnan(chunk)] = np.nan
        digest.update(chunk.data)


def has_nan(column: NDArray[Any]) -> bool:
    """Tell whether floats hold a NaN: their minimum is one then, which takes no mask to find out."""
    return bool(np.isnan(np.min(column, initial=np.inf)))
