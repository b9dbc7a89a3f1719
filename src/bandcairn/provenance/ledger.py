"""The ledger: one row a node of the study, with its whole recipe and where its numbers came from."""

from __future__ import annotations

import json
from pathlib import Path
from typing import TYPE_CHECKING, Any

from bandcairn.errors import DamagedNodeError
from bandcairn.nodes.key import canonical_json
from bandcairn.store.layout import STORE_NAME, node_path

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

    from bandcairn.nodes.node import Node

LEDGER_SCHEMA = {
    "key": "text",
    "step": "text",
    "recording": "text",
    "signal": "text",
    "path": "text",
    "parents": "text",
    "parameters": "text",
    "data_digest": "text",
    "step_version": "count",
    "software": "text",
    "started": "text",
    "seconds": "number",
    "peak_memory_mb": "number",
}

_RAW = "raw/"


def ledger_rows(nodes: Iterable[Node], records: Mapping[str, Mapping[str, Any]]) -> list[dict[str, Any]]:
    """Return the rows of the ledger in the order of the nodes.

    Parameters
    ----------
    nodes : iterable of Node
        The plan as far as it has been carried out.
    records : mapping of str to mapping
        Provenance record of each node by key.
    """
    return [_row(node, records[node.key]) for node in nodes]


def _row(node: Node, record: Mapping[str, Any]) -> dict[str, Any]:
    # The raw content stands among the parents: with it a row holds the whole recipe.
    parents = dict(node.parents) | {f"{_RAW}{index}": digest for index, digest in enumerate(node.raw)}
    return {
        "key": node.key,
        "step": node.step,
        "recording": node.recording or None,
        "signal": node.signal or None,
        "path": node_path(Path(STORE_NAME), node.step, node.key).as_posix(),
        "parents": canonical_json(parents),
        "parameters": node.parameters,
        "data_digest": record["data_digest"],
        "step_version": record["step_version"],
        "software": canonical_json(record["software"]),
        "started": record["started"],
        "seconds": record["seconds"],
        "peak_memory_mb": record["peak_memory_mb"],
    }


def raw_of(row: Mapping[str, Any]) -> tuple[str, ...]:
    """Return the digests of the raw content that a row names, in the order of the channels."""
    # The names are sorted as text in a row: raw/10 stands before raw/2.
    parents = json.loads(row["parents"])
    return tuple(parents[f"{_RAW}{index}"] for index in range(sum(role.startswith(_RAW) for role in parents)))


def records_of(rows: Iterable[Mapping[str, Any]]) -> dict[str, dict[str, Any]]:
    """Return what an earlier ledger knows of each node, by key: the inverse of `ledger_rows`."""
    return {
        row["key"]: {
            "data_digest": row["data_digest"],
            "step_version": row["step_version"],
            "software": json.loads(row["software"]),
            "started": row["started"],
            "seconds": row["seconds"],
            "peak_memory_mb": row["peak_memory_mb"],
        }
        for row in rows
    }


def read_ledger(results: Path) -> list[dict[str, Any]]:
    """Return the rows of the last run's ledger; none if there was no run, or its file is damaged."""
    from bandcairn.store.tables import read_table

    try:
        rows = read_table(results / "ledger.parquet")
    except (OSError, DamagedNodeError):
        return []
    return rows if all(row.keys() == LEDGER_SCHEMA.keys() for row in rows[:1]) else []
