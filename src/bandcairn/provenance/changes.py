"""Why a node would run: what in its recipe differs from the node that stood at its place in the last run."""

from __future__ import annotations

import json
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from bandcairn.nodes.catalogue import VERSIONS
from bandcairn.provenance.ledger import raw_of

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence

    from bandcairn.nodes.node import Node

NEW = "new"
LOST = "its file is missing"
RAW_CHANGED = "raw data changed"


@dataclass(frozen=True, slots=True)
class Reason:
    """Why one node would run.

    Attributes
    ----------
    node : Node
        The node.
    why : tuple of str
        Its reasons in words, most telling first.
    """

    node: Node
    why: tuple[str, ...]


def reasons(missing: Sequence[Node], ledger: Sequence[Mapping[str, Any]]) -> list[Reason]:
    """Explain why each missing node would run.

    Parameters
    ----------
    missing : sequence of Node
        Nodes whose files do not exist, parents before children.
    ledger : sequence of mapping
        Rows of the last run's ledger; empty if there was none.
    """
    by_key = {row["key"]: row for row in ledger}
    at_place: dict[tuple[str, str, str], Mapping[str, Any]] = {_place(row): row for row in ledger}
    statistics = {_family(row): row for row in ledger if row["step"] == "statistics"}
    running = {node.key: node.step for node in missing}
    return [
        Reason(node, _why(node, by_key, _former(node, at_place, statistics), running)) for node in missing
    ]


def _former(
    node: Node,
    at_place: Mapping[tuple[str, str, str], Mapping[str, Any]],
    statistics: Mapping[str, Mapping[str, Any]],
) -> Mapping[str, Any] | None:
    if node.step == "statistics":
        return statistics.get(json.loads(node.parameters)["family"])
    return at_place.get((node.recording, node.signal, node.step))


def _place(row: Mapping[str, Any]) -> tuple[str, str, str]:
    return row["recording"] or "", row["signal"] or "", row["step"]


def _family(row: Mapping[str, Any]) -> str:
    family: str = json.loads(row["parameters"])["family"]
    return family


def _why(
    node: Node,
    by_key: Mapping[str, Mapping[str, Any]],
    former: Mapping[str, Any] | None,
    running: Mapping[str, str],
) -> tuple[str, ...]:
    if node.key in by_key:
        return (LOST,)
    if former is None:
        return (NEW,)
    found = []
    if former["step_version"] != VERSIONS[node.step]:
        found.append(f"step version raised from {former['step_version']} to {VERSIONS[node.step]}")
    found += differences(json.loads(former["parameters"]), json.loads(node.parameters))
    if raw_of(former) != node.raw:
        found.append(RAW_CHANGED)
    above = sorted({running[key] for _, key in node.parents if key in running}, key=list(VERSIONS).index)
    if not found and above:
        found.append(f"follows {', '.join(above)}")
    return tuple(found) or ("reads other nodes than before",)


def differences(former: Any, present: Any, name: str = "") -> list[str]:  # noqa: ANN401 - any JSON
    """Return each difference of two JSON values in words: ``stages[0].order changed from 4 to 2``.

    Parameters
    ----------
    former, present : JSON value
        The two values.
    name : str
        Path of the values, for the words.
    """
    return list(_differences(former, present, name))


def _differences(former: Any, present: Any, name: str) -> Iterator[str]:  # noqa: ANN401
    if isinstance(former, dict) and isinstance(present, dict):
        for key in [*former, *(key for key in present if key not in former)]:
            below = f"{name}.{key}" if name else key
            if key not in present:
                yield f"{below} dropped (was {_told(former[key])})"
            elif key not in former:
                yield f"{below} added ({_told(present[key])})"
            else:
                yield from _differences(former[key], present[key], below)
    elif _lists_of_blocks(former, present):
        for index, pair in enumerate(zip(former, present, strict=True)):
            yield from _differences(*pair, f"{name}[{index}]")
    elif former != present:
        yield f"{name} changed from {_told(former)} to {_told(present)}"


def _lists_of_blocks(former: Any, present: Any) -> bool:  # noqa: ANN401
    both_lists = isinstance(former, list) and isinstance(present, list)
    return (
        both_lists
        and len(former) == len(present)
        and all(isinstance(item, dict) for item in (*former, *present))
    )


def _told(value: Any, longest: int = 80) -> str:  # noqa: ANN401
    text = json.dumps(value, ensure_ascii=False)
    return text if len(text) <= longest else f"{text[: longest - 1]}…"
