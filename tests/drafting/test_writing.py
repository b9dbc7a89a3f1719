"""All files of a draft are written, or none."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import pytest

from bandcairn.drafting import draft_study, write_draft
from bandcairn.errors import StudyError

if TYPE_CHECKING:
    from collections.abc import Callable


@pytest.fixture
def folder(tmp_path: Path, put_edf: Callable[..., None]) -> Path:
    """Return a folder with one recording."""
    put_edf(tmp_path / "p1.edf", {"Fz": 256})
    return tmp_path


def _names(folder: Path) -> set[str]:
    return {path.name for path in folder.iterdir()}


@pytest.mark.parametrize("name", ["study.yaml", "recordings.csv", "segments.csv"])
def test_another_study_is_never_overwritten(folder: Path, name: str) -> None:
    """The file in the way is named, and nothing is written beside it."""
    (folder / name).write_text("mine", "utf-8")
    with pytest.raises(StudyError, match=name):
        write_draft(folder, draft_study(folder))
    assert _names(folder) == {"p1.edf", name}
    assert (folder / name).read_text("utf-8") == "mine"


def test_a_failure_leaves_nothing_behind(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Also where the first file is in its place already."""
    draft = draft_study(folder)
    replace = Path.replace

    def fail_at_the_last(self: Path, target: Path) -> Path:
        if target.name == "study.yaml":
            raise OSError(28, "No space left on device")
        return replace(self, target)

    monkeypatch.setattr(Path, "replace", fail_at_the_last)
    with pytest.raises(OSError, match="No space"):
        write_draft(folder, draft)
    assert _names(folder) == {"p1.edf"}


def test_the_draft_of_a_folder_depends_on_the_folder_alone(folder: Path) -> None:
    """Twice the same text."""
    assert draft_study(folder).files == draft_study(folder).files
