"""The ledger: one row a node, which holds its whole recipe."""

from __future__ import annotations

import json
import shutil
from typing import TYPE_CHECKING, Any

import pytest

from bandcairn.nodes.catalogue import VERSIONS
from bandcairn.nodes.key import key_of, recipe_json
from bandcairn.nodes.node import Node, make_node
from bandcairn.provenance.ledger import LEDGER_SCHEMA, ledger_rows, raw_of, read_ledger, records_of
from bandcairn.store.tables import write_table

if TYPE_CHECKING:
    from pathlib import Path

RAW = tuple(f"{number:02}" * 32 for number in range(12))
LOAD = make_node("load", parameters='{"channels":["a"]}', raw=RAW, recording="p1", signal="eeg")
TABLE = make_node("table", parameters='{"rows":[]}', parents=(("features/p1", LOAD.key),), signal="eeg")


def record_of(node: Node) -> dict[str, Any]:
    """Return a record as the store gives it."""
    return {
        "key": node.key,
        "data_digest": f"digest of {node.step}",
        "step_version": VERSIONS[node.step],
        "software": {"python": "3.11.1", "numpy": "2.0.0"},
        "started": "2001-02-03T04:05:06.789+00:00",
        "seconds": 0.25,
        "peak_memory_mb": 81.5,
    }


@pytest.fixture
def rows() -> list[dict[str, Any]]:
    """Return the ledger of two nodes."""
    return ledger_rows((LOAD, TABLE), {node.key: record_of(node) for node in (LOAD, TABLE)})


def test_a_row_has_the_columns_of_the_contract(rows: list[dict[str, Any]]) -> None:
    """In their order; a node of the study has no recording."""
    assert list(rows[1]) == list(LEDGER_SCHEMA)
    assert rows[1] == {
        "key": TABLE.key,
        "step": "table",
        "recording": None,
        "signal": "eeg",
        "path": f"nodes/table/{TABLE.key}.parquet",
        "parents": f'{{"features/p1":"{LOAD.key}"}}',
        "parameters": '{"rows":[]}',
        "data_digest": "digest of table",
        "step_version": VERSIONS["table"],
        "software": '{"numpy":"2.0.0","python":"3.11.1"}',
        "started": "2001-02-03T04:05:06.789+00:00",
        "seconds": 0.25,
        "peak_memory_mb": 81.5,
    }


def test_rows_stand_in_the_order_of_the_nodes(rows: list[dict[str, Any]]) -> None:
    """Parents before children: the ledger can be read from top to bottom."""
    assert [row["step"] for row in rows] == ["load", "table"]


def test_raw_content_keeps_the_order_of_the_channels(rows: list[dict[str, Any]]) -> None:
    """Also beyond ten channels, where the names of the rows sort otherwise."""
    assert raw_of(rows[0]) == RAW
    assert raw_of(rows[1]) == ()


def test_a_key_can_be_recomputed_from_its_row(rows: list[dict[str, Any]]) -> None:
    """The ledger alone proves what each node was made from."""
    for row in rows:
        parents = [
            (role, key) for role, key in json.loads(row["parents"]).items() if not role.startswith("raw/")
        ]
        recipe = recipe_json(row["step"], row["step_version"], row["parameters"], parents, raw_of(row))
        assert key_of(recipe) == row["key"]


def test_records_are_read_back_from_rows(rows: list[dict[str, Any]], tmp_path: Path) -> None:
    """Through the file and back: a second run tells of nodes that it has not computed."""
    write_table(tmp_path, "ledger", LEDGER_SCHEMA, rows)
    known = records_of(read_ledger(tmp_path))
    assert ledger_rows((LOAD, TABLE), known) == rows


def test_the_first_run_finds_an_empty_ledger(tmp_path: Path) -> None:
    """No results yet."""
    assert read_ledger(tmp_path / "results") == []


@pytest.mark.parametrize("content", [b"", b"PAR1", b"no table at all, though long enough to look like one"])
def test_a_damaged_ledger_is_an_empty_one(tmp_path: Path, content: bytes) -> None:
    """It only explains; the nodes themselves decide what is to be done."""
    (tmp_path / "ledger.parquet").write_bytes(content)
    assert read_ledger(tmp_path) == []


def test_a_ledger_of_another_format_is_an_empty_one(tmp_path: Path, rows: list[dict[str, Any]]) -> None:
    """One that an older version has written, with other columns."""
    columns = {name: kind for name, kind in LEDGER_SCHEMA.items() if name != "seconds"}
    write_table(tmp_path, "ledger", columns, rows)
    assert read_ledger(tmp_path) == []


def test_the_ledger_of_a_run_has_every_node(finished_study: Path, tmp_path: Path) -> None:
    """As many rows as the plan has nodes, and every path leads to a file."""
    from bandcairn.execution.project import open_project

    shutil.copytree(finished_study, tmp_path / "copy")
    rows = read_ledger(tmp_path / "copy" / "results")
    assert [row["key"] for row in rows] == list(open_project(tmp_path / "copy").plan.nodes)
    assert all((tmp_path / "copy" / row["path"]).is_file() for row in rows)
