"""results/descriptives: a row for every cell of every answer, whoever is in it."""

from __future__ import annotations

from typing import Any

from bandcairn.execution.descriptives import DESCRIPTIVES_SCHEMA, descriptives_rows
from bandcairn.nodes.key import canonical_json
from bandcairn.nodes.node import make_node

_TABLE = "0" * 64
_QUESTION = {
    "name": "alpha",
    "signal": "eeg",
    "feature": "band_power",
    "band": "alpha",
    "channels": "each",
    "channel_names": ["Fz", "Cz"],
    "scale": "log10",
    "confidence": 0.95,
    "within": "condition",
    "contrast": ["night", "day"],
    "test": "paired_t",
}


def _row(person: str, level: str, channel: str, value: float | None) -> dict[str, Any]:
    place = {"recording": person + level, "participant": person, "channel": channel, "segment": None}
    told = {"feature": "band_power", "band": "alpha", "value": value, "unit": "uV^2", "epochs_used": 9}
    return {**place, **told, "design/condition": level}


def test_every_channel_has_its_cells_and_an_empty_one_has_nobody_in_it() -> None:
    """Fz has two pairs, Cz no value by day: its cells are there all the same, and name the table they come from."""
    node = make_node(
        "statistics",
        parameters=canonical_json({"family": "alpha", "adjustment": "holm", "questions": [_QUESTION]}),
        parents=(("table/eeg", _TABLE),),
    )
    rows = [
        _row(person, level, channel, None if (channel, level) == ("Cz", "day") else value)
        for channel in ("Fz", "Cz")
        for person in ("p1", "p2")
        for level, value in (("night", 100.0), ("day", 10.0))
    ]

    found = list(descriptives_rows([node], {_TABLE: rows}))

    assert all(set(row) == set(DESCRIPTIVES_SCHEMA) for row in found)
    assert [(row["channel"], row["level"], row["scale"], row["n"], row["n_available"]) for row in found] == [
        (channel, level, scale, n, available)
        for channel, n, by_day in (("Fz", 2, 2), ("Cz", 0, 0))
        for scale in ("identity", "log10")
        for level, available in (("night", 2), ("day", by_day), ("night - day", n))
    ]
    assert {row["node"] for row in found} == {_TABLE}
    assert [row["mean"] for row in found][:6] == [100.0, 10.0, 90.0, 2.0, 1.0, 1.0]
