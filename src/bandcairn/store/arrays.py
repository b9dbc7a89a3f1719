"""Columns as arrays of Arrow, made from their bytes.

Arrow's own conversion of lists, and of numbers with nulls, loads pandas: more than half a second that a run needs for
nothing else.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray


def text_array(values: Sequence[str | None]) -> pa.Array:
    """Return text; None is null."""
    encoded = [b"" if value is None else value.encode() for value in values]
    ends = np.zeros(len(values) + 1, dtype=np.int32)
    np.cumsum([len(text) for text in encoded], out=ends[1:])
    return _array(
        pa.string(), len(values), _given(values), pa.py_buffer(ends), pa.py_buffer(b"".join(encoded))
    )


def number_array(values: NDArray[Any], given: NDArray[np.bool_] | None = None) -> pa.Array:
    """Return numbers as they are, not copied; null where `given` is False.

    Raises
    ------
    TypeError
        If the values are no numbers: text comes as a tuple.
    """
    if values.dtype.kind not in "biuf":
        raise TypeError(f"a column of {values.dtype} holds no numbers")
    values = np.ascontiguousarray(values)
    if values.dtype == np.bool_:
        return _array(pa.bool_(), len(values), given, pa.py_buffer(np.packbits(values, bitorder="little")))
    return _array(pa.from_numpy_dtype(values.dtype), len(values), given, pa.py_buffer(values))


def optional_numbers(values: Sequence[float | None], dtype: type[np.number[Any]]) -> pa.Array:
    """Return numbers of a type; None is null."""
    filled = np.array([0 if value is None else value for value in values], dtype=dtype)
    return number_array(filled, _given(values))


def optional_flags(values: Sequence[bool | None]) -> pa.Array:
    """Return yes and no; None is null."""
    flags = np.array([bool(value) for value in values], dtype=np.bool_)
    packed = pa.py_buffer(np.packbits(flags, bitorder="little"))
    return _array(pa.bool_(), len(values), _given(values), packed)


def numbers_of(array: pa.Array) -> NDArray[Any]:
    """Return the numbers of an array, read-only and if possible not copied; null is NaN."""
    bitmap, data = array.buffers()
    if pa.types.is_boolean(array.type):
        numbers: NDArray[Any] = _bits(data, array)
    else:
        whole = np.frombuffer(data, dtype=array.type.to_pandas_dtype())
        numbers = whole[array.offset : array.offset + len(array)]
    if array.null_count:
        numbers = np.where(_bits(bitmap, array), numbers, np.nan)
    numbers.flags.writeable = False
    return numbers


def _bits(buffer: pa.Buffer, array: pa.Array) -> NDArray[np.bool_]:
    bits = np.unpackbits(np.frombuffer(buffer, dtype=np.uint8), bitorder="little")
    return bits[array.offset : array.offset + len(array)].astype(np.bool_)


def _given(values: Sequence[Any]) -> NDArray[np.bool_]:
    return np.fromiter((value is not None for value in values), dtype=np.bool_, count=len(values))


def _array(kind: pa.DataType, length: int, given: NDArray[np.bool_] | None, *buffers: pa.Buffer) -> pa.Array:
    """Return an array from its buffers; a bitmap of what is given goes before them unless all is."""
    if given is None or given.all():
        return pa.Array.from_buffers(kind, length, [None, *buffers], null_count=0)
    bitmap = pa.py_buffer(np.packbits(given, bitorder="little"))
    return pa.Array.from_buffers(kind, length, [bitmap, *buffers])
