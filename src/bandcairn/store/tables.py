"""The tables a paper prints, each as Parquet and as CSV with the same values."""

from __future__ import annotations

import csv
import io
import os
from functools import partial
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq

from bandcairn.errors import DamagedNodeError
from bandcairn.store.arrays import optional_flags, optional_numbers, text_array
from bandcairn.store.layout import PRIVATE_FILE, make_private_folder, temporary_path

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Mapping, Sequence
    from pathlib import Path

_ARRAYS: dict[str, Callable[[Sequence[Any]], pa.Array]] = {
    "text": text_array,
    "number": partial(optional_numbers, dtype=np.float64),
    "count": partial(optional_numbers, dtype=np.int64),
    "yes_no": optional_flags,
}


def write_table(
    folder: Path, name: str, schema: Mapping[str, str], rows: Sequence[Mapping[str, Any]]
) -> tuple[Path, Path]:
    """Write a table as ``<name>.parquet`` and ``<name>.csv``; each is replaced as a whole.

    Parameters
    ----------
    folder : Path
        Made if missing.
    name : str
        File name without suffix.
    schema : mapping of str to str
        Columns in order, each ``text``, ``number``, ``count`` or ``yes_no``.
    rows : sequence of mapping
        One mapping a row; a missing or None value is null.

    Returns
    -------
    tuple of Path
        The two files.
    """
    make_private_folder(folder)
    columns = {column: [row.get(column) for row in rows] for column in schema}
    table = pa.table({column: _ARRAYS[kind](columns[column]) for column, kind in schema.items()})
    parquet, text = folder / f"{name}.parquet", folder / f"{name}.csv"
    replace_file(parquet, lambda path: pq.write_table(table, path, compression="zstd"))
    replace_file(text, lambda path: path.write_text(csv_text(list(schema), columns.values()), "utf-8"))
    return parquet, text


def read_table(path: Path) -> list[dict[str, Any]]:
    """Return the rows of a table's Parquet file.

    Raises
    ------
    OSError
        If there is no such file.
    DamagedNodeError
        If it cannot be read as a table.
    """
    try:
        # Not by pq.read_table: it loads pandas, three quarters of a second.
        with pq.ParquetFile(path) as file:
            rows: list[dict[str, Any]] = file.read(use_threads=False).to_pylist()
    except (pa.ArrowException, ValueError) as error:
        raise DamagedNodeError(f"{path.name} cannot be read: {error}") from error
    return rows


def csv_text(header: list[str], columns: Iterable[Sequence[Any]]) -> str:
    """Return a table as CSV: shortest exact numbers, empty cells for null, a newline a row."""
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(header)
    writer.writerows([_cell(value) for value in row] for row in zip(*columns, strict=True))
    return text.getvalue()


def replace_file(path: Path, write: Callable[[Path], object]) -> None:
    """Write a file beside its place and rename it; a reader sees the old or the new one, never half of it."""
    temporary = temporary_path(path, str(os.getpid()))
    try:
        os.close(os.open(temporary, os.O_CREAT | os.O_WRONLY | os.O_TRUNC, PRIVATE_FILE))
        write(temporary)
        temporary.replace(path)
    finally:
        temporary.unlink(missing_ok=True)


def _cell(value: Any) -> str:  # noqa: ANN401 - any cell
    if value is None:
        return ""
    if isinstance(value, bool):
        return "true" if value else "false"
    return repr(value) if isinstance(value, float) else str(value)
