"""Results: what the people behind each answer are like."""

from __future__ import annotations

import json
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence

    from bandcairn.nodes.node import Node

DESCRIPTIVES_SCHEMA = {
    "question": "text",
    "signal": "text",
    "channel": "text",
    "feature": "text",
    "band": "text",
    "level": "text",
    "scale": "text",
    "n": "count",
    "n_available": "count",
    "mean": "number",
    "sd": "number",
    "median": "number",
    "q1": "number",
    "q3": "number",
    "unit": "text",
    "node": "text",
}


def descriptives_rows(
    nodes: Sequence[Node], frames: Mapping[str, Sequence[Mapping[str, Any]]]
) -> Iterator[dict[str, Any]]:
    """Yield a row for each question, channel, scale and cell, and for the differences of pairs.

    Parameters
    ----------
    nodes : sequence of Node
        Nodes of the study, of which the statistics tell what is asked.
    frames : mapping of str to sequence of mapping
        Rows of their tables by key.
    """
    from bandcairn.execution.group_nodes import asked_of, named
    from bandcairn.statistics import describe

    for node in nodes:
        if node.step != "statistics":
            continue
        tables = dict(node.parents)
        for question in json.loads(node.parameters)["questions"]:
            key = tables[f"table/{question['signal']}"]
            for asked in asked_of(question, frames[key]):
                for cell in describe(asked.values, asked.participants, asked.levels, asked.comparison):
                    yield {**asdict(cell), **named(question, asked), "node": key}
