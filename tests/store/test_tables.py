"""The tables a paper prints: Parquet and CSV say the same."""

from __future__ import annotations

import csv
import math
import stat
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow.parquet as pq
import pytest

from bandcairn.errors import DamagedNodeError
from bandcairn.store.tables import read_table, replace_file, write_table

if TYPE_CHECKING:
    from pathlib import Path

SCHEMA = {"recording": "text", "value": "number", "epochs": "count", "passed": "yes_no"}
ROWS: list[dict[str, Any]] = [
    {"recording": "p1", "value": 0.1, "epochs": 3, "passed": True},
    {"recording": 'a "b", c\nd', "value": 1 / 3, "epochs": 2**60, "passed": False},
    {"recording": "µ", "value": 1e-300, "epochs": 0, "passed": None},
    {"recording": None, "value": None, "epochs": None},
    {"recording": "last", "value": 5e-324, "epochs": -1, "passed": True, "ignored": "no column"},
]


def read_csv(path: Path) -> list[dict[str, str]]:
    """Return the rows of a CSV file as text."""
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def test_rows_come_back_in_order_with_nulls(tmp_path: Path) -> None:
    """A cell that is missing or None is null; columns outside the schema are left out."""
    parquet, _ = write_table(tmp_path, "features", SCHEMA, ROWS)
    assert read_table(parquet) == [{column: row.get(column) for column in SCHEMA} for row in ROWS]


def test_csv_and_parquet_hold_the_same_values(tmp_path: Path) -> None:
    """Numbers in their shortest exact form, empty cells for null, true and false in words."""
    rng = np.random.default_rng(6)
    numbers = [
        *(rng.standard_normal(500) * 10.0 ** rng.integers(-30, 30, 500)).tolist(),
        0.1 + 0.2,
        1e22,
        -0.0,
        3.0,
    ]
    rows = [*ROWS, *({"recording": f"r{n}", "value": value} for n, value in enumerate(numbers))]
    parquet, text = write_table(tmp_path, "features", SCHEMA, rows)
    told = {None: "", True: "true", False: "false"}
    for printed, row in zip(read_csv(text), pq.read_table(parquet).to_pylist(), strict=True):
        assert printed["recording"] == (row["recording"] or "")
        assert printed["value"] == ("" if row["value"] is None else repr(row["value"]))
        assert printed["epochs"] == ("" if row["epochs"] is None else str(row["epochs"]))
        assert printed["passed"] == told[row["passed"]]
        if row["value"] is not None:
            assert float(printed["value"]) == row["value"]


def test_a_table_without_rows_has_its_header(tmp_path: Path) -> None:
    """No exclusions is an answer too, and its columns keep their types."""
    parquet, text = write_table(tmp_path, "exclusions", SCHEMA, [])
    assert text.read_text("utf-8") == "recording,value,epochs,passed\n"
    assert read_table(parquet) == []
    assert [str(kind) for kind in pq.read_schema(parquet).types] == ["string", "double", "int64", "bool"]


def test_lines_end_alike_on_every_system(tmp_path: Path) -> None:
    """A file under version control is not to differ from machine to machine."""
    _, text = write_table(
        tmp_path, "features", {"recording": "text"}, [{"recording": "a"}, {"recording": "b"}]
    )
    assert text.read_bytes() == b"recording\na\nb\n"


def test_equal_rows_give_equal_bytes(tmp_path: Path) -> None:
    """Neither a date nor a path of the machine enters a table."""
    first = write_table(tmp_path / "one", "features", SCHEMA, ROWS)
    second = write_table(tmp_path / "two", "features", SCHEMA, ROWS)
    assert [path.read_bytes() for path in first] == [path.read_bytes() for path in second]


def test_a_table_is_replaced_as_a_whole_and_private(tmp_path: Path) -> None:
    """Nothing is left of the old one, nor of the writing."""
    write_table(tmp_path / "results", "features", SCHEMA, ROWS)
    files = write_table(tmp_path / "results", "features", SCHEMA, ROWS[:1])
    assert [len(read_table(files[0])), len(read_csv(files[1]))] == [1, 1]
    assert sorted(path.name for path in (tmp_path / "results").iterdir()) == [
        "features.csv",
        "features.parquet",
    ]
    assert {stat.S_IMODE(path.stat().st_mode) for path in files} == {0o600}
    assert stat.S_IMODE((tmp_path / "results").stat().st_mode) == 0o700


def test_a_file_whose_writing_fails_stays_as_it_was(tmp_path: Path) -> None:
    """A reader sees the old file until the new one is whole."""
    path = tmp_path / "run.json"
    replace_file(path, lambda beside: beside.write_text("old"))

    def fail(beside: Path) -> None:
        beside.write_text("half of the n")
        raise OSError(28, "No space left on device")

    with pytest.raises(OSError, match="No space left"):
        replace_file(path, fail)
    assert path.read_text() == "old"
    assert list(tmp_path.iterdir()) == [path]


def test_a_number_of_the_wrong_type_is_refused(tmp_path: Path) -> None:
    """A table never turns what it got into something else."""
    with pytest.raises(ValueError, match="three"):
        write_table(tmp_path, "features", {"epochs": "count"}, [{"epochs": "three"}])
    assert list(tmp_path.iterdir()) == []


def test_nan_is_no_null(tmp_path: Path) -> None:
    """A value that cannot be given is None; NaN would be printed, and is the caller's mistake to see."""
    parquet, text = write_table(tmp_path, "features", {"value": "number"}, [{"value": math.nan}])
    assert math.isnan(read_table(parquet)[0]["value"])
    assert read_csv(text) == [{"value": "nan"}]


def test_a_missing_table_is_told_apart_from_a_damaged_one(tmp_path: Path) -> None:
    """The first run has none; a torn one is a fault."""
    with pytest.raises(OSError, match="none"):
        read_table(tmp_path / "none.parquet")
    parquet, _ = write_table(tmp_path, "features", SCHEMA, ROWS)
    parquet.write_bytes(parquet.read_bytes()[:-40])
    with pytest.raises(DamagedNodeError, match=r"features\.parquet cannot be read"):
        read_table(parquet)
