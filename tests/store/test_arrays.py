"""Columns made of their bytes hold what Arrow's own conversion would give, and load no pandas."""

from __future__ import annotations

import subprocess
import sys
from typing import Any

import numpy as np
import pyarrow as pa
import pytest
from hypothesis import given
from hypothesis import strategies as st

from bandcairn.store.arrays import number_array, numbers_of, optional_flags, optional_numbers, text_array

NUMBERS = st.one_of(st.none(), st.floats(allow_nan=False))


@given(st.lists(st.one_of(st.none(), st.text(st.characters(exclude_categories=["Cs"])))))
def test_text_is_as_arrow_makes_it(values: list[str | None]) -> None:
    """Of any length, in any script, with nulls anywhere."""
    assert text_array(values).equals(pa.array(values, pa.string()))


@given(st.lists(NUMBERS))
def test_numbers_with_nulls_are_as_arrow_makes_them(values: list[float | None]) -> None:
    """None is null; every other number keeps its bits."""
    assert optional_numbers(values, np.float64).equals(pa.array(values, pa.float64()))


@given(st.lists(st.one_of(st.none(), st.integers(-(2**63), 2**63 - 1))))
def test_counts_are_as_arrow_makes_them(values: list[int | None]) -> None:
    """To the last of 64 bits."""
    assert optional_numbers(values, np.int64).equals(pa.array(values, pa.int64()))


@given(st.lists(st.one_of(st.none(), st.booleans())))
def test_flags_are_as_arrow_makes_them(values: list[bool | None]) -> None:
    """Eight to a byte, nulls apart."""
    assert optional_flags(values).equals(pa.array(values, pa.bool_()))


@given(st.lists(NUMBERS, min_size=1), st.integers(0, 10))
def test_numbers_come_back_with_nan_for_null_wherever_a_slice_begins(
    values: list[float | None], start: int
) -> None:
    """An array may begin within its buffers."""
    array = optional_numbers(values, np.float64)[start:]

    expected = [np.nan if value is None else value for value in values[start:]]
    assert np.array_equal(numbers_of(array), np.array(expected, dtype=np.float64), equal_nan=True)


@pytest.mark.parametrize("dtype", [np.int8, np.int16, np.int32, np.int64, np.float32, np.float64, np.bool_])
def test_every_type_of_number_comes_back(dtype: type) -> None:
    """Integers as the recorder gave them, floats and flags."""
    values: np.ndarray[Any, Any] = np.arange(100).astype(dtype)

    found = numbers_of(number_array(values))

    assert found.dtype == dtype
    assert np.array_equal(found, values)
    assert not found.flags.writeable


def test_storing_and_reading_loads_no_pandas() -> None:
    """It would take half a second of every run."""
    program = (
        "import sys, tempfile, pathlib, numpy as np\n"
        "from bandcairn.store.frame import Frame\n"
        "from bandcairn.store.store import Store\n"
        "from bandcairn.store.tables import read_table, write_table\n"
        "folder = pathlib.Path(tempfile.mkdtemp())\n"
        "frame = Frame({'a': ('x', None), 'b': np.array([1.0, np.nan]), 'c': np.array([1, 2])})\n"
        "Store(folder / 'nodes').put('table', 'k', frame, {'key': 'k'})\n"
        "Store(folder / 'nodes').get('table', 'k')\n"
        "write_table(folder, 't', {'a': 'text', 'b': 'number'}, [{'a': 'x'}, {'b': 1.0}])\n"
        "read_table(folder / 't.parquet')\n"
        "sys.exit('pandas' in sys.modules)\n"
    )
    assert subprocess.run([sys.executable, "-c", program], check=False).returncode == 0
