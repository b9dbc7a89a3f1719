"""How long the missing nodes will take, from the times that the last run wrote into the ledger."""

from __future__ import annotations

from statistics import mean
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from bandcairn.nodes.node import Node


def estimated_seconds(
    missing: Sequence[Node], ledger: Sequence[Mapping[str, Any]], cores: int
) -> float | None:
    """Estimate the time of computing the missing nodes.

    Parameters
    ----------
    missing : sequence of Node
        Nodes to be computed.
    ledger : sequence of mapping
        Rows of the last run's ledger.
    cores : int
        Jobs at a time.

    Returns
    -------
    float or None
        Seconds; None if a step is missing that no earlier run has timed.
    """
    times: dict[tuple[str, str], list[float]] = {}
    for row in ledger:
        for place in ((row["step"], row["signal"] or ""), (row["step"], "")):
            times.setdefault(place, []).append(row["seconds"])
    means = {place: mean(seconds) for place, seconds in times.items()}
    seconds = [means.get((node.step, node.signal), means.get((node.step, ""))) for node in missing]
    known = [value for value in seconds if value is not None]
    return sum(known) / cores if len(known) == len(seconds) else None
