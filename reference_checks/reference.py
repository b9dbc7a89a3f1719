"""Published values, read from values/*.yaml, each with its tolerance and its source."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import yaml

_VALUES = Path(__file__).parent / "values"


@dataclass(frozen=True, slots=True)
class Published:
    """One entry of values/*.yaml.

    Attributes
    ----------
    id, quantity, source : str
        Which number it is and where it was printed.
    inputs : dict
        What it was computed from.
    expected : object
        The value as printed: a number, a list, or a mapping of names to them.
    tolerance : dict
        ``abs``, ``rel`` and ``abs_by_key`` (which replaces ``abs`` for single keys); 0 where absent.
    """

    id: str
    quantity: str
    inputs: dict[str, Any]
    expected: Any
    tolerance: dict[str, Any]
    source: str

    def assert_close(self, found: object, *keys: str) -> None:
        """Hold `found` against the expected value, or against the one that `keys` lead to."""
        expected = self.expected
        for key in keys:
            expected = expected[key]
        by_key = self.tolerance.get("abs_by_key", {})
        atol = next((by_key[key] for key in keys if key in by_key), self.tolerance.get("abs", 0))
        np.testing.assert_allclose(
            np.asarray(found, dtype=float),
            np.asarray(expected, dtype=float),
            atol=atol,
            rtol=self.tolerance.get("rel", 0),
            err_msg=f"{self.id} {' '.join(keys)}: {self.quantity} ({self.source})",
        )


@cache
def load(table: str) -> dict[str, Published]:
    """Return the entries of ``values/<table>.yaml`` by their id."""
    entries = yaml.safe_load((_VALUES / f"{table}.yaml").read_text(encoding="utf-8"))
    return {
        entry["id"]: Published(
            id=entry["id"],
            quantity=entry["quantity"],
            inputs=entry.get("inputs", {}),
            expected=entry["expected"],
            tolerance=entry["tolerance"],
            source=entry["source"],
        )
        for entry in entries
    }


def published(table: str, entry_id: str) -> Published:
    """Return one entry of ``values/<table>.yaml``."""
    return load(table)[entry_id]
