"""Batches of recordings: what one job of the workflow engine takes through a step."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from bandcairn.nodes.catalogue import RECORDING_STEPS
from bandcairn.nodes.key import canonical_json, key_of

if TYPE_CHECKING:
    from collections.abc import Iterable

    from bandcairn.nodes.node import Node

# A job costs the engine some 5 ms whatever it does: a batch spreads that over recordings, and a dozen batches or more
# keep every core busy to the end. The size depends on the study alone, so that every process names the same batches.
_MOST_RECORDINGS = 16
_WANTED_BATCHES = 12


@dataclass(frozen=True, slots=True)
class Batch:
    """Some recordings of a study, with their nodes.

    Attributes
    ----------
    name : str
        Its place and a digest of its keys; the same in every process that plans the same study.
    steps : dict of str to tuple of Node
        The nodes by step, in the order of the chain; only steps that have nodes.
    """

    name: str
    steps: dict[str, tuple[Node, ...]]

    def before(self, step: str) -> str | None:
        """Return the step that comes before another in this batch, or None for the first."""
        names = list(self.steps)
        place = names.index(step)
        return names[place - 1] if place else None

    @property
    def last_step(self) -> str:
        """The last step of the batch."""
        return list(self.steps)[-1]


def make_batches(nodes: Iterable[Node]) -> dict[str, Batch]:
    """Return the batches of a plan's recording nodes, by name.

    Parameters
    ----------
    nodes : iterable of Node
        Nodes of recordings, parents before children.
    """
    by_recording: dict[str, list[Node]] = {}
    for node in nodes:
        by_recording.setdefault(node.recording, []).append(node)
    recordings = sorted(by_recording)
    size = min(_MOST_RECORDINGS, max(1, len(recordings) // _WANTED_BATCHES))
    groups = (recordings[start : start + size] for start in range(0, len(recordings), size))
    batches = (
        _batch(index, [node for recording in group for node in by_recording[recording]])
        for index, group in enumerate(groups)
    )
    return {batch.name: batch for batch in batches}


def _batch(index: int, nodes: list[Node]) -> Batch:
    steps = {step: tuple(node for node in nodes if node.step == step) for step in RECORDING_STEPS}
    digest = key_of(canonical_json([node.key for node in nodes]))[:12]
    return Batch(f"{index:04d}-{digest}", {step: found for step, found in steps.items() if found})
