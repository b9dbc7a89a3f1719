"""The key of a node: SHA-256 of one canonical JSON document, its recipe.

The document holds the step, its version, its full parameters, its parents' keys by role and the digests of the
raw content, and the version of this very format. Names of files and folders, library versions and numbers computed
on the way are not in it, names of people and recordings only where rows of a table bear them: the same recipe on the
same samples has the same key everywhere.
"""

from __future__ import annotations

import hashlib
import json
import math
from functools import cache
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Iterable

KEY_FORMAT = 1


def canonical_json(value: Any) -> str:  # noqa: ANN401 - any JSON value
    """Return the one JSON text of a value.

    Keys are sorted, nothing is spaced, 1 and 1.0 are alike, and -0.0 is 0.

    Parameters
    ----------
    value : JSON value
        Tuples count as lists.

    Raises
    ------
    ValueError
        If a number is not finite or a value is not JSON.
    """
    return json.dumps(
        _plain(value), sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False
    )


def _plain(value: Any) -> Any:  # noqa: ANN401
    if value is None or isinstance(value, (bool, int, str)):
        return value
    if isinstance(value, float):
        if not math.isfinite(value):
            raise ValueError(f"{value} cannot stand in a recipe")
        return int(value) if value.is_integer() else value
    if isinstance(value, dict):
        if not all(isinstance(name, str) for name in value):
            raise ValueError(f"only text may name a value of a recipe: {value}")
        return {name: _plain(item) for name, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [_plain(item) for item in value]
    raise ValueError(f"{type(value).__name__} cannot stand in a recipe")


def recipe_json(
    step: str, version: int, parameters: str, parents: Iterable[tuple[str, str]], raw: Iterable[str]
) -> str:
    """Return the canonical recipe of a node.

    Parameters
    ----------
    step : str
        Name of the step.
    version : int
        Version of the step.
    parameters : str
        Canonical JSON of the full parameters. Given as text since thousands of nodes share one.
    parents : iterable of (role, key)
        The nodes that the step reads.
    raw : iterable of str
        Digests of the raw content that the step reads, in the order of the channels.
    """
    by_role = ",".join([f'{_quoted(role)}:"{key}"' for role, key in sorted(parents)])
    digests = ",".join([f'"{digest}"' for digest in raw])
    return (
        f'{{"key_format":{KEY_FORMAT},"parameters":{parameters},"parents":{{{by_role}}},'
        f'"raw":[{digests}],"step":"{step}","version":{version}}}'
    )


@cache
def _quoted(role: str) -> str:
    return json.dumps(role, ensure_ascii=False)


def key_of(recipe: str) -> str:
    """Return the key of a canonical recipe: 64 hexadecimal digits."""
    return hashlib.sha256(recipe.encode()).hexdigest()
