"""An opened study: its description, its raw files and its plan. Light: nothing here computes."""

from __future__ import annotations

import gc
from contextlib import contextmanager
from dataclasses import dataclass
from typing import TYPE_CHECKING

from bandcairn.nodes.plan import Plan, build_plan
from bandcairn.nodes.survey import INDEX_NAME, Survey, inspect_files, survey_study
from bandcairn.recordings import RawIndex
from bandcairn.store.layout import present_keys, store_folder
from bandcairn.study.description import load_study

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator
    from pathlib import Path

    from bandcairn.nodes.node import Node
    from bandcairn.study.description import LoadedStudy

RESULTS_NAME = "results"


@dataclass(frozen=True, slots=True)
class Project:
    """A study that has been read, checked against its files and planned.

    Attributes
    ----------
    folder : Path
        The study folder.
    study : LoadedStudy
        Description and tables.
    survey : Survey
        What the raw files hold, and which cannot be read.
    plan : Plan
        The nodes.
    """

    folder: Path
    study: LoadedStudy
    survey: Survey
    plan: Plan

    @property
    def store_folder(self) -> Path:
        """The folder of the nodes."""
        return store_folder(self.folder)

    @property
    def results_folder(self) -> Path:
        """The folder of what the paper prints."""
        return self.folder / RESULTS_NAME

    def missing(self) -> list[Node]:
        """Return the nodes whose files do not exist, parents before children."""
        nodes = self.plan.nodes
        present = present_keys(self.store_folder, nodes.values())
        return [node for node in nodes.values() if node.key not in present]


def check_project(folder: Path) -> tuple[LoadedStudy, dict[str, str]]:
    """Read a study and check it against its files, without digesting, computing or writing anything.

    Returns
    -------
    tuple of LoadedStudy and dict
        The study, and why the file of a recording cannot be read.

    Raises
    ------
    StudyError
        With every problem of the description, the tables and the files.
    """
    study = load_study(folder)
    _, unreadable = inspect_files(study, RawIndex.load(store_folder(folder) / INDEX_NAME))
    return study, unreadable


def open_project(folder: Path, progress: Callable[[int, int], None] | None = None) -> Project:
    """Read, check and plan a study.

    Parameters
    ----------
    folder : Path
        The study folder.
    progress : callable, optional
        Called with the number of raw files looked at and their total.

    Returns
    -------
    Project

    Raises
    ------
    StudyError
        With every problem of the description, the tables and the files.
    """
    with _all_is_kept():
        study = load_study(folder)
        survey = survey_study(study, store_folder(folder), progress)
        return Project(folder, study, survey, build_plan(study, survey.contents))


@contextmanager
def _all_is_kept() -> Iterator[None]:
    """Let no one look for garbage meanwhile: a plan makes none, and looking for it takes a fifth of the time."""
    was_on = gc.isenabled()
    gc.disable()
    try:
        yield
    finally:
        if was_on:
            gc.enable()
