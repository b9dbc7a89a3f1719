"""The record of a node: its recipe, and where and when it was carried out."""

from __future__ import annotations

import json
from datetime import UTC, datetime, timedelta
from importlib.metadata import version

from bandcairn.nodes.catalogue import VERSIONS
from bandcairn.nodes.key import canonical_json, key_of, recipe_json
from bandcairn.nodes.node import make_node
from bandcairn.provenance.record import make_record, now, peak_memory_mb, software

NODE = make_node(
    "load",
    parameters='{"channels":["Fz"],"stop_s":50.5}',
    parents=(("signal", "1" * 64), ("epochs", "2" * 64)),
    raw=("a" * 64, "b" * 64),
    recording="p1_day",
    signal="eeg",
)
STARTED = datetime(2001, 2, 3, 4, 5, 6, 789_123, tzinfo=UTC)


def test_a_record_is_complete() -> None:
    """All that is needed to say what was computed, from what, with what, when and at what cost."""
    record = make_record(NODE, STARTED, 0.123_456_789)
    assert record.pop("peak_memory_mb") > 10
    assert record == {
        "key": NODE.key,
        "step": "load",
        "recording": "p1_day",
        "signal": "eeg",
        "step_version": VERSIONS["load"],
        "parameters": {"channels": ["Fz"], "stop_s": 50.5},
        "parents": {"epochs": "2" * 64, "signal": "1" * 64},
        "raw": ["a" * 64, "b" * 64],
        "software": software(),
        "started": "2001-02-03T04:05:06.789+00:00",
        "seconds": 0.123457,
    }


def test_the_key_can_be_recomputed_from_the_record() -> None:
    """A record read back from a file holds the whole recipe."""
    record = json.loads(json.dumps(make_record(NODE, STARTED, 1.0)))
    recipe = recipe_json(
        record["step"],
        record["step_version"],
        canonical_json(record["parameters"]),
        record["parents"].items(),
        record["raw"],
    )
    assert key_of(recipe) == NODE.key


def test_the_software_is_all_that_may_touch_a_number() -> None:
    """Interpreter and libraries with their versions, and nothing of the machine or its user."""
    versions = software()
    assert {"python", "bandcairn", "numpy", "scipy", "pyarrow", "edfio", "snakemake"} <= versions.keys()
    assert versions["numpy"] == version("numpy")
    assert all(set(text) <= set("0123456789.abcdefghijklmnopqrstuvwxyz+") for text in versions.values())


def test_time_is_told_in_utc() -> None:
    """Ledgers of labs in different zones can be laid side by side."""
    assert now().utcoffset() == timedelta(0)


def test_peak_memory_is_told_in_megabytes() -> None:
    """Of 10^6 bytes: a process that holds 64 of them says at least that, and no thousand times more."""
    block = bytearray(b"x" * 64_000_000)
    assert len(block) / 1e6 <= peak_memory_mb() < 64_000
