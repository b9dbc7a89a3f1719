"""The store: what was put is what one gets, or nothing."""

from __future__ import annotations

import json
import shutil
import stat
import threading
from typing import TYPE_CHECKING, Any

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
import pytest

from bandcairn.errors import DamagedNodeError
from bandcairn.store.frame import Frame, data_digest
from bandcairn.store.store import Store

if TYPE_CHECKING:
    from collections.abc import Mapping
    from pathlib import Path

KEY = "ab" * 32
RECORD = {"key": KEY, "step": "filter", "seconds": 0.25, "parents": {"signal": "cd" * 32}}
FRAME = Frame(
    {
        "Fz": np.array([0.1, -0.0, np.nan, 1e-300]),
        "whole": np.array([1.0, 2.0, 3.0, 4.0]),
        "count": np.array([1, -2, 3, 2**62], dtype=np.int64),
        "raw": np.array([-32768, 32767, 0, 1], dtype=np.int16),
        "kept": np.array([True, False, True, True]),
        "note": ("flach", None, "", "µV"),
    },
    {"rate_hz": "128", "runs": [[0, 4, "1/3"]], "gain_uv": [0.1]},
)


@pytest.fixture
def store(tmp_path: Path) -> Store:
    """Return a store that does not exist yet."""
    return Store(tmp_path / "study" / "nodes")


def afresh(store: Store) -> Store:
    """Return the same store with nothing held in memory."""
    return Store(store.folder)


def assert_same(found: Frame, expected: Frame) -> None:
    """Hold two frames against each other: names, order, types, values and facts."""
    assert list(found.columns) == list(expected.columns)
    for name, column in expected.columns.items():
        if isinstance(column, tuple):
            assert found.text(name) == column
        else:
            assert found.numbers(name).dtype == column.dtype
            np.testing.assert_array_equal(found.numbers(name), column)
    assert found.facts == expected.facts


def test_a_node_comes_back_as_it_was_put(store: Store) -> None:
    """Numbers of every type, text, nulls and facts, from disk and from memory."""
    store.put("filter", KEY, FRAME, RECORD)
    assert_same(store.get("filter", KEY), FRAME)
    assert_same(afresh(store).get("filter", KEY), FRAME)


@pytest.mark.parametrize(
    "columns",
    [
        {"Fz": np.empty(0)},
        {"count": np.empty(0, np.int64), "note": ()},
        {"note": (None, None)},
        {"Fz": np.array([np.nan, np.nan])},
        {"Fz": np.arange(3.0), "ECG": np.arange(5.0)[::2]},
        {"a/b": np.arange(2), "": np.arange(2), "é": ("x", "y")},
        {"reason": np.array([0, 1, 2], np.int8), "rate": np.array([1.5, 2.5, np.nan], np.float32)},
    ],
)
def test_a_node_of_an_unusual_shape_comes_back_as_it_was_put(
    store: Store, columns: Mapping[str, Any]
) -> None:
    """No rows, nothing but nulls, strides, odd names, small types."""
    frame = Frame(columns)
    store.put("features", KEY, frame, RECORD)
    assert_same(afresh(store).get("features", KEY), frame)


def test_the_record_comes_back_with_the_digest_of_the_data(store: Store) -> None:
    """What `put` returns is what stands in the file."""
    stored = store.put("filter", KEY, FRAME, RECORD)
    assert stored == {**RECORD, "data_digest": data_digest(FRAME)}
    assert store.record("filter", KEY) == stored


def test_data_read_from_disk_cannot_be_changed(store: Store) -> None:
    """A step that wrote into its input would change it for every other step."""
    store.put("filter", KEY, FRAME, RECORD)
    with pytest.raises(ValueError, match="read-only"):
        afresh(store).get("filter", KEY).numbers("Fz")[0] = 1.0


def test_any_parquet_reader_can_read_a_node(store: Store) -> None:
    """Columns under their own names, NaN as null; nothing of ours is needed."""
    store.put("filter", KEY, FRAME, RECORD)
    table = pq.read_table(store.path("filter", KEY))
    assert table.column("Fz").to_pylist() == [0.1, 0.0, None, 1e-300]
    assert table.column("note").to_pylist() == ["flach", None, "", "µV"]
    assert table.column("raw").type == pa.int16()


def test_integers_are_packed_below_their_own_size(store: Store) -> None:
    """Loaded samples take less room than in the raw file."""
    samples = np.cumsum(np.random.default_rng(3).integers(-8, 9, 100_000)).astype(np.int16)
    store.put("load", KEY, Frame({"Fz": samples}), RECORD)
    assert store.path("load", KEY).stat().st_size < samples.nbytes


def test_files_and_folders_are_private(store: Store) -> None:
    """Recordings of people are in them."""
    store.put("filter", KEY, FRAME, RECORD)
    path = store.path("filter", KEY)
    assert stat.S_IMODE(path.stat().st_mode) == 0o600
    assert {stat.S_IMODE(folder.stat().st_mode) for folder in path.parents[:2]} == {0o700}


def test_a_flipped_byte_is_detected_or_harmless(store: Store) -> None:
    """A node is never read with other data or another record than were put, wherever the file is altered.

    The digests cover values, types, names, facts and the record. What they cannot cover is Parquet's own: the name of
    the library, sizes nobody reads, the encoding's spare bits. Where such a byte is flipped the node may be read, and
    then it is exactly the node that was put.
    """
    stored = store.put("filter", KEY, FRAME, RECORD)
    path = store.path("filter", KEY)
    content = path.read_bytes()
    detected = 0
    for place in np.linspace(0, len(content) - 1, 60).astype(int):
        damaged = bytearray(content)
        damaged[place] ^= 0x55
        path.write_bytes(damaged)
        try:
            found, record = afresh(store).get("filter", KEY), store.record("filter", KEY)
        except DamagedNodeError:
            detected += 1
        else:
            assert_same(found, FRAME)
            assert record == stored
    assert detected >= 45


@pytest.mark.parametrize(
    "text", [b"flach", b'"runs"', b'"seconds": 0.25', b"data_digest", b'"key"', b"1/3", b"note"]
)
def test_an_altered_text_is_detected(store: Store, text: bytes) -> None:
    """Data, facts and record alike: a time or a parent in the record is no more to be forged by chance."""
    store.put("filter", KEY, FRAME, RECORD)
    path = store.path("filter", KEY)
    content = path.read_bytes()
    assert text in content
    path.write_bytes(content.replace(text, bytes([text[0] ^ 1]) + text[1:]))
    with pytest.raises(DamagedNodeError):
        afresh(store).get("filter", KEY)


@pytest.mark.parametrize("share", [0.0, 0.3, 0.9, 0.999])
def test_a_truncated_file_is_detected(store: Store, share: float) -> None:
    """As a full disk or a broken copy leaves it."""
    store.put("filter", KEY, FRAME, RECORD)
    path = store.path("filter", KEY)
    content = path.read_bytes()
    path.write_bytes(content[: int(share * len(content))])
    with pytest.raises(DamagedNodeError, match="filter node abababababab cannot be read"):
        afresh(store).get("filter", KEY)
    with pytest.raises(DamagedNodeError, match="cannot be read"):
        store.record("filter", KEY)


def test_a_missing_file_is_told(store: Store) -> None:
    """It is the same to a caller as a damaged one: the node is to be computed."""
    assert not store.has("filter", KEY)
    with pytest.raises(DamagedNodeError, match="cannot be read"):
        store.get("filter", KEY)


def test_a_file_of_another_node_is_detected(store: Store) -> None:
    """A file copied under another key is whole, and still not that node."""
    store.put("filter", KEY, FRAME, RECORD)
    other = "ef" * 32
    shutil.copy(store.path("filter", KEY), store.path("filter", other))
    with pytest.raises(DamagedNodeError, match="efefefefefef does not match"):
        store.get("filter", other)
    with pytest.raises(DamagedNodeError, match="efefefefefef holds node abababababab"):
        store.record("filter", other)


@pytest.mark.parametrize(
    "metadata", [None, {"bandcairn": "[1]"}, {"bandcairn": "[1]", "bandcairn_record": "{}"}]
)
def test_a_parquet_file_that_is_no_node_is_detected(store: Store, metadata: dict[str, str] | None) -> None:
    """Somebody's table under the name of a node is not taken for one."""
    path = store.path("filter", KEY)
    path.parent.mkdir(parents=True)
    pq.write_table(pa.table({"Fz": [1.0]}).replace_schema_metadata(metadata), path)
    with pytest.raises(DamagedNodeError, match="cannot be read"):
        store.get("filter", KEY)
    with pytest.raises(DamagedNodeError, match="cannot be read"):
        store.record("filter", KEY)


def test_a_write_that_fails_leaves_nothing_behind(store: Store, monkeypatch: pytest.MonkeyPatch) -> None:
    """Neither a half-written node nor its beginning under another name."""

    def fill_the_disk(path: Path, *_: object) -> None:
        path.write_bytes(b"PAR1 half a no")
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("bandcairn.store.store.write_frame", fill_the_disk)
    with pytest.raises(OSError, match="No space left"):
        store.put("filter", KEY, FRAME, RECORD)
    assert list(store.path("filter", KEY).parent.iterdir()) == []
    monkeypatch.undo()
    with pytest.raises(DamagedNodeError):
        store.get("filter", KEY)


def test_a_failed_rewrite_leaves_the_old_node(store: Store, monkeypatch: pytest.MonkeyPatch) -> None:
    """A reader sees the old or the new file, never half of one."""
    store.put("filter", KEY, FRAME, RECORD)
    monkeypatch.setattr("bandcairn.store.store.write_frame", lambda path, *_: path.write_bytes(b"half"))
    with pytest.raises(pa.ArrowInvalid):
        store.put("filter", KEY, FRAME, RECORD)
    monkeypatch.undo()
    assert_same(afresh(store).get("filter", KEY), FRAME)
    assert [path.name for path in store.path("filter", KEY).parent.iterdir()] == [f"{KEY}.parquet"]


@pytest.mark.parametrize(
    "written",
    [
        Frame({**FRAME.columns, "whole": np.array([1.0, 2.0, 3.0, 5.0])}, FRAME.facts),
        Frame({**FRAME.columns, "whole": np.array([1, 2, 3, 4])}, FRAME.facts),
        Frame(FRAME.columns, {**FRAME.facts, "rate_hz": "256"}),
        Frame(dict(list(FRAME.columns.items())[::-1]), FRAME.facts),
    ],
)
def test_a_disk_that_returns_something_else_is_found_out_at_once(
    store: Store, monkeypatch: pytest.MonkeyPatch, written: Frame
) -> None:
    """Every file is read back before it gets its name."""
    from bandcairn.store.parquet import write_frame

    def write(path: Path, _: Frame, record: Mapping[str, Any]) -> None:
        write_frame(path, written, record)

    monkeypatch.setattr("bandcairn.store.store.write_frame", write)
    with pytest.raises(DamagedNodeError, match="reads back otherwise"):
        store.put("filter", KEY, FRAME, RECORD)
    assert not store.has("filter", KEY)


def test_a_column_that_would_come_back_as_another_type_is_refused(store: Store) -> None:
    """An array of text would be read as a tuple, and never match its digest: nothing is written."""
    with pytest.raises(TypeError, match="a column of <U1 holds no numbers"):
        store.put("filter", KEY, Frame({"note": np.array(["a", "b"])}), RECORD)


def test_two_writers_of_one_node_do_no_harm(store: Store) -> None:
    """Both write the same data; whoever comes last replaces like by like."""
    frame = Frame({"Fz": np.random.default_rng(5).standard_normal(200_000)}, FRAME.facts)
    start = threading.Barrier(4)
    stored: list[dict[str, Any]] = []

    def write() -> None:
        start.wait()
        stored.append(afresh(store).put("filter", KEY, frame, RECORD))

    threads = [threading.Thread(target=write) for _ in range(4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert [json.dumps(record) for record in stored] == [json.dumps(stored[0])] * 4
    assert_same(afresh(store).get("filter", KEY), frame)
    assert [path.name for path in store.path("filter", KEY).parent.iterdir()] == [f"{KEY}.parquet"]


def test_a_removed_node_is_gone_from_memory_and_disk(store: Store) -> None:
    """What was removed is not remembered; removing it once more is no error."""
    store.put("filter", KEY, FRAME, RECORD)
    store.remove("filter", KEY)
    store.remove("filter", KEY)
    assert not store.has("filter", KEY)
    with pytest.raises(DamagedNodeError):
        store.get("filter", KEY)
