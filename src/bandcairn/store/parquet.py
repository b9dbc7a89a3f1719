"""Frames as Parquet files, and back.

Signals are written plain: no dictionary, no codec, no statistics, one row group. Compressing filtered samples costs
two to four times the time for a tenth of the bytes. Integers are delta packed, which is lossless and below the size
of the raw file.
"""

from __future__ import annotations

import hashlib
import json
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq

from bandcairn.store.arrays import number_array, numbers_of, text_array
from bandcairn.store.frame import Frame, has_nan

if TYPE_CHECKING:
    from collections.abc import Mapping
    from pathlib import Path

    from bandcairn.store.frame import Column

_FACTS = b"bandcairn"
_RECORD = b"bandcairn_record"
_RECORD_SHA256 = b"bandcairn_record_sha256"
_WHOLE_FILE = 1 << 62
_LARGE_BYTES = 1 << 20


def write_frame(path: Path, frame: Frame, record: Mapping[str, Any]) -> None:
    """Write a frame with its provenance record into a new file."""
    arrays = [_to_arrow(column) for column in frame.columns.values()]
    # A column declared free of nulls is written and read twice as fast.
    fields = [
        pa.field(name, array.type, nullable=array.null_count > 0)
        for name, array in zip(frame.columns, arrays, strict=True)
    ]
    told = json.dumps(dict(record)).encode()
    metadata = {_FACTS: json.dumps(dict(frame.facts)), _RECORD: told, _RECORD_SHA256: _sha256(told)}
    table = pa.Table.from_arrays(arrays, schema=pa.schema(fields, metadata))
    if frame.nbytes < _LARGE_BYTES:
        # Made in memory and written at once: many small writes cost a small node more than its making.
        content = pa.BufferOutputStream()
        _encode(table, content)
        path.write_bytes(content.getvalue())
    else:
        with pa.OSFile(str(path), "wb") as file:
            _encode(table, file)


def _encode(table: pa.Table, sink: pa.NativeFile) -> None:
    packed = {field.name: "DELTA_BINARY_PACKED" for field in table.schema if pa.types.is_integer(field.type)}
    with pq.ParquetWriter(
        sink,
        table.schema,
        use_dictionary=False,
        compression="none",
        write_statistics=False,
        column_encoding=packed or None,
        data_page_size=64 << 20,
        write_batch_size=1 << 16,
    ) as writer:
        writer.write_table(table, row_group_size=_WHOLE_FILE)


def read_frame(path: Path) -> tuple[Frame, dict[str, Any]]:
    """Return the frame of a file and its provenance record.

    Raises
    ------
    OSError, pyarrow.ArrowException, KeyError, TypeError, ValueError
        If the file is no whole node, or its record does not match the digest written with it.
    """
    with _opened(path) as source, pq.ParquetFile(source, pre_buffer=False) as file:
        table = file.read(use_threads=False)
    metadata = table.schema.metadata or {}
    columns = {name: _from_arrow(table.column(name)) for name in table.column_names}
    return Frame(columns, json.loads(metadata[_FACTS])), _record(metadata)


def _opened(path: Path) -> pa.NativeFile:
    """Open a file for reading: a small one by one read, a large one mapped into memory."""
    if path.stat().st_size < _LARGE_BYTES:
        return pa.BufferReader(path.read_bytes())
    return pa.memory_map(str(path))


def read_record(path: Path) -> dict[str, Any]:
    """Return the provenance record of a node's file without reading its data; errors as in `read_frame`."""
    return _record(pq.read_schema(path, memory_map=True).metadata or {})


def _record(metadata: Mapping[bytes, bytes]) -> dict[str, Any]:
    if _sha256(metadata[_RECORD]) != metadata[_RECORD_SHA256]:
        raise ValueError("its record does not match the digest written with it")
    record: dict[str, Any] = json.loads(metadata[_RECORD])
    return record


def _sha256(content: bytes) -> bytes:
    return hashlib.sha256(content).hexdigest().encode()


def _to_arrow(column: Column) -> pa.Array:
    if isinstance(column, tuple):
        return text_array(column)
    if column.dtype.kind == "f" and has_nan(column):
        return number_array(column, ~np.isnan(column))
    return number_array(column)


def _from_arrow(column: pa.ChunkedArray) -> Column:
    if pa.types.is_string(column.type):
        return tuple(column.to_pylist())
    return numbers_of(column.chunk(0) if column.num_chunks == 1 else column.combine_chunks())
