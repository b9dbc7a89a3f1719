"""The digest of a node's data: blind to how they are held, awake to what they are."""

from __future__ import annotations

import struct
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest

from bandcairn.store.frame import Frame, data_digest

if TYPE_CHECKING:
    from collections.abc import Mapping

COLUMNS: Mapping[str, Any] = {
    "Fz": np.array([0.0, 1.5, np.nan]),
    "count": np.array([1, 2, 3], dtype=np.int64),
    "note": ("kept", None, "zu groß"),
}
FACTS = {"rate_hz": "128", "runs": [[0, 3, "0"]]}
# Computed once, by these very functions: a change would make every node on disk look damaged.
GOLDEN = "d5e16db85a71fba7c489fa18359979885837e0ef02c2b74d42d5ca45a3bb27a8"


def digest(columns: Mapping[str, Any] = COLUMNS, facts: Mapping[str, Any] = FACTS) -> str:
    """Return the digest of a frame."""
    return data_digest(Frame(columns, facts))


def test_the_digest_of_a_known_frame_stands_frozen() -> None:
    """Stores and seals of years hold digests: how they are computed never changes unnoticed."""
    assert digest() == GOLDEN


@pytest.mark.parametrize(
    "same",
    [
        {"Fz": np.array([-0.0, 1.5, np.nan])},
        {"Fz": np.array([0.0, 1.5, struct.unpack("<d", b"\1\2\0\0\0\0\xf8\xff")[0]])},
        {"Fz": np.array([0.0, 9.0, 1.5, 9.0, np.nan])[::2]},
        {"count": np.array([[1, 2, 3], [7, 7, 7]], dtype=np.int64).T[:, 0]},
    ],
)
def test_the_digest_is_blind_to_how_a_value_is_held(same: dict[str, Any]) -> None:
    """The sign of zero, the payload of NaN and the layout in memory are no part of the data."""
    assert digest({**COLUMNS, **same}) == GOLDEN


def test_the_digest_is_blind_to_the_order_of_facts() -> None:
    """Facts are looked up by name."""
    assert digest(facts=dict(list(FACTS.items())[::-1])) == GOLDEN


@pytest.mark.parametrize(
    "columns",
    [
        {**COLUMNS, "Fz": np.array([0.0, np.nextafter(1.5, 2), np.nan])},
        {**COLUMNS, "Fz": np.array([0.0, np.nan, 1.5])},
        {**COLUMNS, "Fz": np.array([0.0, 1.5, np.nan], dtype=np.float32)},
        {**COLUMNS, "count": np.array([1, 2, 3], dtype=np.int32)},
        {**COLUMNS, "count": np.array([1, 2, 3], dtype=np.uint64)},
        {**COLUMNS, "count": np.array([1.0, 2.0, 3.0])},
        {**COLUMNS, "note": ("kept", "", "zu groß")},
        {**COLUMNS, "note": ("kept", "None", "zu groß")},
        {**COLUMNS, "note": ("kept", None, "zu gross")},
        {("Cz" if name == "Fz" else name): column for name, column in COLUMNS.items()},
        dict(list(COLUMNS.items())[::-1]),
        {name: column[:2] for name, column in COLUMNS.items()},
        {name: column for name, column in COLUMNS.items() if name != "count"},
    ],
)
def test_the_digest_tells_every_change_of_the_data(columns: dict[str, Any]) -> None:
    """One bit of a value, a type, a null, a name, the order or number of columns or rows."""
    assert digest(columns) != GOLDEN


@pytest.mark.parametrize("facts", [{}, {**FACTS, "rate_hz": "256"}, {**FACTS, "unit": "uV"}])
def test_the_digest_covers_the_facts(facts: dict[str, Any]) -> None:
    """Samples at another rate are other data."""
    assert digest(facts=facts) != GOLDEN


@pytest.mark.parametrize(
    ("first", "second"),
    [
        ({"a": ("x", "y"), "b": ()}, {"a": ("x",), "b": ("y",)}),
        ({"ab": np.arange(2)}, {"a": np.arange(2)}),
        (
            {"a": np.zeros(2, np.int8), "b": np.zeros(0, np.int8)},
            {"a": np.zeros(0, np.int8), "b": np.zeros(2, np.int8)},
        ),
        ({"a": np.array([False, True])}, {"a": np.array([0, 1], np.int8)}),
    ],
)
def test_values_cannot_wander_from_column_to_column(first: dict[str, Any], second: dict[str, Any]) -> None:
    """Each column states its name, its type and its length before its values."""
    assert digest(first) != digest(second)


def test_a_column_longer_than_a_chunk_is_covered_to_its_end() -> None:
    """Long columns are digested in pieces, none of which is left out."""
    samples = np.random.default_rng(4).standard_normal(100_003)
    whole = digest({"Fz": samples})
    for place in (0, 32_767, 32_768, 100_002):
        changed = samples.copy()
        changed[place] += 1e-9
        assert digest({"Fz": changed}) != whole


def test_numbers_and_text_are_told_apart() -> None:
    """A column of the other kind is a mistake of the caller."""
    frame = Frame(COLUMNS)
    with pytest.raises(TypeError, match="column note holds text"):
        frame.numbers("note")
    with pytest.raises(TypeError, match="column Fz holds numbers"):
        frame.text("Fz")


def test_the_size_of_a_frame_bounds_the_memory_it_takes() -> None:
    """Eight bytes a number; text is counted generously."""
    assert Frame(COLUMNS).nbytes == 24 + 24 + 3 * 64
