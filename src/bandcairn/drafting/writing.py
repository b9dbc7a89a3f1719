"""Write a draft into its folder: all files or none, and never over another's work."""

from __future__ import annotations

import os
import tempfile
from pathlib import Path
from typing import TYPE_CHECKING

from bandcairn.errors import Problem, StudyError

if TYPE_CHECKING:
    from bandcairn.drafting.draft import Draft

_STUDY_FILES = ("study.yaml", "recordings.csv", "segments.csv")


def refuse_existing(folder: Path) -> None:
    """Refuse a folder that holds a study already.

    Parameters
    ----------
    folder : Path
        The study folder.

    Raises
    ------
    StudyError
        Naming each file that is in the way.
    """
    present = [name for name in _STUDY_FILES if (folder / name).exists()]
    if present:
        remedy = "Move it away, or rename it, to draft the study anew; nothing is ever overwritten."
        where = str(folder)
        raise StudyError(
            tuple(Problem(where, "", name, "a file of this name", "none yet", remedy) for name in present)
        )


def write_draft(folder: Path, draft: Draft) -> tuple[str, ...]:
    """Write the files of a draft.

    Parameters
    ----------
    folder : Path
        The study folder.
    draft : Draft
        What to write.

    Returns
    -------
    tuple of str
        Names of the files written.

    Raises
    ------
    StudyError
        If the folder holds a study already.
    OSError
        If the folder cannot be written to; nothing is left behind.
    """
    refuse_existing(folder)
    beside: dict[Path, Path] = {}
    placed: list[Path] = []
    try:
        for name, text in draft.files.items():
            beside[folder / name] = _written_beside(folder / name, text)
        for target, temporary in beside.items():
            temporary.replace(target)
            placed.append(target)
    except BaseException:
        for path in (*beside.values(), *placed):
            path.unlink(missing_ok=True)
        raise
    return tuple(draft.files)


def _written_beside(target: Path, text: str) -> Path:
    handle, beside = tempfile.mkstemp(prefix=f".{target.name}.", dir=target.parent)
    try:
        with os.fdopen(handle, "w", encoding="utf-8", newline="") as file:
            file.write(text)
    except BaseException:
        Path(beside).unlink(missing_ok=True)
        raise
    return Path(beside)
