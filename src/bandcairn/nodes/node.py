"""A node: one step applied to one signal of one recording, or to the study."""

from __future__ import annotations

from typing import NamedTuple

from bandcairn.nodes.catalogue import VERSIONS
from bandcairn.nodes.key import key_of, recipe_json


class Node(NamedTuple):
    """One node of the plan. A named tuple, for a large study has 20,000 of them and a data class takes thrice as long.

    Attributes
    ----------
    key : str
        SHA-256 of the recipe.
    step : str
        Name of the step.
    recording : str
        Recording it belongs to; empty for a node of the study.
    signal : str
        Signal it belongs to; empty where it serves several.
    parameters : str
        Canonical JSON of the full parameters.
    parents : tuple of (role, key)
        Sorted by role.
    raw : tuple of str
        Digests of the raw content read, in the order of the channels.
    """

    key: str
    step: str
    recording: str
    signal: str
    parameters: str
    parents: tuple[tuple[str, str], ...]
    raw: tuple[str, ...]


def make_node(
    step: str,
    *,
    parameters: str,
    parents: tuple[tuple[str, str], ...] = (),
    raw: tuple[str, ...] = (),
    recording: str = "",
    signal: str = "",
) -> Node:
    """Return the node of a recipe; `recording` and `signal` are labels and do not enter its key."""
    parents = tuple(sorted(parents))
    key = key_of(recipe_json(step, VERSIONS[step], parameters, parents, raw))
    return Node(key, step, recording, signal, parameters, parents, raw)
