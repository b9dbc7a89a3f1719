"""The memory of files: each state of a file is opened once; anything doubtful is looked at again."""

from __future__ import annotations

import json
import os
import shutil
import stat
import time
from typing import TYPE_CHECKING, Any

import pytest

from bandcairn.errors import RecordingError
from bandcairn.recordings import RawIndex, content_digests, index, inspect

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    Build = Callable[..., Path]
    Make = Callable[..., Any]

LISTS = (b"+0\x14\x14\0+0.5\x1530\x14eyes closed\x14", b"+1\x14\x14")


def settle() -> None:
    """Wait until a file just written is old enough to be remembered."""
    time.sleep(0.12)


@pytest.fixture
def recording(build: Build, channel: Make) -> Path:
    """Write a sound file."""
    return build([channel("Cz"), channel("Fz")], reserved="EDF+C", lists=LISTS)


@pytest.fixture
def opened(monkeypatch: pytest.MonkeyPatch) -> list[str]:
    """Names of the functions that opened a file, in order."""
    calls: list[str] = []
    for name, function in (("inspect", inspect), ("content_digests", content_digests)):

        def counting(path: Path, name: str = name, function: Callable[[Path], Any] = function) -> Any:  # noqa: ANN401
            calls.append(name)
            return function(path)

        monkeypatch.setattr(index, name, counting)
    return calls


def look(memory: RawIndex, path: Path, root: Path) -> tuple[Any, Any]:
    """Ask for all there is."""
    return memory.facts(path, root), memory.content(path, root)


def test_settled_file_is_opened_once_and_remembered_across_starts(
    recording: Path, tmp_path: Path, opened: list[str]
) -> None:
    """What comes from memory equals what comes from the file."""
    settle()
    memory = RawIndex.load(tmp_path / "index.json")
    first = look(memory, recording, tmp_path)
    assert look(memory, recording, tmp_path) == first == (inspect(recording), content_digests(recording))
    memory.save()
    assert look(RawIndex.load(tmp_path / "index.json"), recording, tmp_path) == first
    assert opened == ["inspect", "content_digests"]


def test_facts_of_text_without_a_rate_survive(delimited: Build, tmp_path: Path) -> None:
    """None is remembered as None."""
    path = delimited("Fz\n1\n2\n")
    settle()
    memory = RawIndex.load(tmp_path / "index.json")
    first = look(memory, path, tmp_path)
    memory.save()
    assert look(RawIndex.load(tmp_path / "index.json"), path, tmp_path) == first


def test_file_younger_than_a_clock_tick_is_not_trusted(
    recording: Path, tmp_path: Path, opened: list[str]
) -> None:
    """It might change again without its times telling."""
    os.utime(recording)
    memory = RawIndex.load(tmp_path / "index.json")
    memory.facts(recording, tmp_path)
    memory.facts(recording, tmp_path)
    assert opened == ["inspect", "inspect"]


@pytest.mark.parametrize("what", ["content", "touch", "size", "status"])
def test_changed_file_is_opened_again(recording: Path, tmp_path: Path, opened: list[str], what: str) -> None:
    """Any of size, time of modification and time of status change; even bytes changed behind a kept mtime."""
    settle()
    memory = RawIndex.load(tmp_path / "index.json")
    before = memory.content(recording, tmp_path)
    times = recording.stat()
    content = bytearray(recording.read_bytes())
    if what == "content":
        content[-60] ^= 1
        recording.write_bytes(content)
        os.utime(recording, ns=(times.st_atime_ns, times.st_mtime_ns))
    elif what == "touch":
        os.utime(recording)
    elif what == "size":
        content[236:244] = b"1       "
        recording.write_bytes(content[: 1024 + (len(content) - 1024) // 2])
    else:
        recording.chmod(0o600)
    after = memory.content(recording, tmp_path)
    assert opened == ["content_digests"] * 2
    assert (after == before) is (what in {"touch", "status"})


def test_failure_is_never_remembered(recording: Path, tmp_path: Path, opened: list[str]) -> None:
    """A file that is mended is read at once, and a faulty one is judged anew each time."""
    recording.write_bytes(recording.read_bytes()[:700])
    settle()
    memory = RawIndex.load(tmp_path / "index.json")
    for _ in range(2):
        with pytest.raises(RecordingError, match="bytes in the file"):
            memory.facts(recording, tmp_path)
    assert opened == ["inspect", "inspect"]
    with pytest.raises(RecordingError, match="no such file"):
        memory.content(tmp_path / "absent.edf", tmp_path)


def test_file_that_changes_while_it_is_read_is_refused(
    recording: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """A recorder may still be writing."""

    def slow(path: Path) -> Any:  # noqa: ANN401
        facts = inspect(path)
        os.utime(path)
        return facts

    settle()
    monkeypatch.setattr(index, "inspect", slow)
    with pytest.raises(RecordingError, match="changed while it was read"):
        RawIndex.load(tmp_path / "index.json").facts(recording, tmp_path)


def test_moved_study_keeps_its_memory(build: Build, channel: Make, tmp_path: Path, opened: list[str]) -> None:
    """Paths are remembered relative to the study folder; renaming the folder touches no file."""
    study = tmp_path / "study"
    study.mkdir()
    shutil.move(build([channel("Cz")]), study / "one.edf")
    settle()
    memory = RawIndex.load(study / "index.json")
    look(memory, study / "one.edf", study)
    memory.save()
    moved = study.rename(tmp_path / "moved")
    look(RawIndex.load(moved / "index.json"), moved / "one.edf", moved)
    assert opened == ["inspect", "content_digests"]


@pytest.mark.parametrize(
    "damage",
    [
        b"",
        b"{",
        b"\xff\xfe",
        b"[]",
        b"null",
        b'{"format": "0", "entries": {}}',
        b'{"format": "2.1", "entries": []}',
        b'{"format": "2.1", "entries": {"one.edf": 5}}',
        b"[" * 100_000,
    ],
)
def test_damaged_or_older_memory_is_rebuilt(recording: Path, tmp_path: Path, damage: bytes) -> None:
    """It is only a memory."""
    settle()
    place = tmp_path / "index.json"
    place.write_bytes(damage)
    memory = RawIndex.load(place)
    assert look(memory, recording, tmp_path) == (inspect(recording), content_digests(recording))
    memory.save()
    assert json.loads(place.read_bytes())["entries"].keys() == {"one.edf"}


@pytest.mark.parametrize(
    "value",
    [None, 5, "x", [], ["[]"], ['["Cz"]', "a b"], {}, "[[[1]],[]]", '[[["Cz","1/0","uV",1]],[]]'],
)
@pytest.mark.parametrize("field", ["facts", "content"])
def test_damaged_entry_is_rebuilt(recording: Path, tmp_path: Path, field: str, value: object) -> None:
    """Whatever stands in one entry, the file has the last word."""
    settle()
    place = tmp_path / "index.json"
    memory = RawIndex.load(place)
    look(memory, recording, tmp_path)
    memory.save()
    content = json.loads(place.read_bytes())
    content["entries"]["one.edf"][field] = value
    place.write_text(json.dumps(content), encoding="utf-8")
    damaged = RawIndex.load(place)
    assert damaged.recall(recording, tmp_path) is None
    assert look(damaged, recording, tmp_path) == (inspect(recording), content_digests(recording))


def test_memory_is_private_and_leaves_nothing_beside(recording: Path, tmp_path: Path) -> None:
    """Annotation texts may name people."""
    settle()
    place = tmp_path / "nodes" / "index.json"
    memory = RawIndex.load(place)
    look(memory, recording, tmp_path)
    memory.save()
    assert stat.S_IMODE(place.stat().st_mode) == 0o600
    assert [one.name for one in place.parent.iterdir()] == ["index.json"]


def test_save_that_fails_leaves_the_old_memory(
    recording: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Written beside, then renamed: never half, never in the way."""
    settle()
    place = tmp_path / "memory" / "index.json"
    memory = RawIndex.load(place)
    memory.facts(recording, tmp_path)
    memory.save()
    before = place.read_bytes()
    memory.content(recording, tmp_path)

    def full(*_: object, **__: object) -> int:
        raise OSError(28, "No space left on device")

    with monkeypatch.context() as patch:
        patch.setattr("bandcairn.recordings.index.Path.replace", full)
        memory.save()
    assert place.read_bytes() == before
    assert [one.name for one in place.parent.iterdir()] == ["index.json"]
    memory.save()
    assert place.read_bytes() != before


def test_unchanged_memory_is_not_written(recording: Path, tmp_path: Path) -> None:
    """A start that finds nothing new leaves the file alone."""
    settle()
    place = tmp_path / "index.json"
    memory = RawIndex.load(place)
    look(memory, recording, tmp_path)
    memory.save()
    before = place.stat().st_ino
    again = RawIndex.load(place)
    look(again, recording, tmp_path)
    again.save()
    assert place.stat().st_ino == before
