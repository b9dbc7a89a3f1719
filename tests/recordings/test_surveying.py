"""Surveys: every file has an answer, whatever becomes of the others."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import pytest

from bandcairn.errors import RecordingError
from bandcairn.recordings import RawIndex, Surveyed, content_digests, inspect, survey

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    Build = Callable[..., Path]
    Make = Callable[..., Any]


@pytest.mark.parametrize("workers", [1, 2, 4])
def test_every_file_gets_its_result_or_its_error_in_order(
    build: Build, channel: Make, tmp_path: Path, workers: int
) -> None:
    """One faulty file and one absent one among sound ones; a name given twice counts once."""
    sound = [build([channel("Cz")], name=f"p{number}.edf") for number in range(6)]
    faulty = build([channel("Cz")], name="faulty.edf", n_records="-2")
    paths = [*sound[:3], faulty, tmp_path / "absent.edf", *sound[3:], sound[0]]
    steps: list[tuple[int, int]] = []
    results = survey(
        paths,
        tmp_path,
        RawIndex.load(tmp_path / "i.json"),
        workers,
        lambda done, total: steps.append((done, total)),
    )
    assert list(results) == paths[:-1]
    for path in sound:
        assert results[path] == Surveyed(inspect(path), content_digests(path))
    assert "'-2' as the number" in str(results[faulty])
    assert isinstance(results[tmp_path / "absent.edf"], RecordingError)
    assert steps == [(done, 8) for done in range(1, 9)]


def test_remembered_files_are_answered_from_memory(build: Build, channel: Make, tmp_path: Path) -> None:
    """The second survey opens nothing, and so reports no progress."""
    path = build([channel("Cz")])
    result = Surveyed(inspect(path), content_digests(path))

    class Memory(RawIndex):
        def recall(self, path: Path, root: Path) -> Surveyed | None:  # noqa: ARG002  # answers for any file
            return result

    def progress(done: int, total: int) -> None:
        pytest.fail(f"{done} of {total} files opened")

    assert survey([path], tmp_path, Memory(tmp_path / "i.json", {}), progress=progress) == {path: result}


def test_no_files_give_no_results(tmp_path: Path) -> None:
    """An empty study is no error here."""
    assert survey([], tmp_path, RawIndex.load(tmp_path / "i.json")) == {}


def test_fault_of_the_program_is_not_taken_for_a_faulty_file(
    build: Build, channel: Make, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Only errors of recordings are results."""

    def broken(*_: object) -> None:
        raise ZeroDivisionError

    monkeypatch.setattr(RawIndex, "facts", broken)
    with pytest.raises(ZeroDivisionError):
        survey([build([channel("Cz")])], tmp_path, RawIndex.load(tmp_path / "i.json"))
