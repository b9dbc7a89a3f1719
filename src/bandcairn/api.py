"""The Python side: a study to be run, and its results as data frames."""

from __future__ import annotations

import os
from pathlib import Path
from typing import TYPE_CHECKING

from bandcairn.errors import StudyError
from bandcairn.execution.launch import RunReport, run_project
from bandcairn.execution.project import Project, open_project
from bandcairn.execution.publish import published
from bandcairn.provenance.changes import Reason, reasons
from bandcairn.provenance.ledger import read_ledger

if TYPE_CHECKING:
    import pandas as pd


class Study:
    """A study folder.

    Parameters
    ----------
    folder : str or Path
        The folder that holds ``study.yaml``.

    Examples
    --------
    >>> study = Study("demo-study")  # doctest: +SKIP
    >>> study.run(cores=2)  # doctest: +SKIP
    >>> study.features().query("feature == 'rmssd'")  # doctest: +SKIP
    """

    def __init__(self, folder: str | os.PathLike[str]) -> None:
        self.folder = Path(folder)

    def __repr__(self) -> str:
        return f"Study({str(self.folder)!r})"

    def open(self) -> Project:
        """Return the study, read, checked and planned.

        Raises
        ------
        StudyError
            With every problem of the description, the tables and the files.
        """
        return open_project(self.folder)

    def plan(self) -> list[Reason]:
        """Return the nodes that `run` would compute, each with its reasons."""
        project = self.open()
        return reasons(project.missing(), read_ledger(project.results_folder))

    def run(self, cores: int | None = None) -> RunReport:
        """Bring the study up to date.

        Parameters
        ----------
        cores : int, optional
            Number of jobs at a time; as many as there are processors if not given.

        Raises
        ------
        StudyError
            If the study or its files are at fault.
        """
        return run_project(self.open(), cores or os.cpu_count() or 1)

    def features(self) -> pd.DataFrame:
        """Return ``results/features``: one row a number."""
        return self._table("features")

    def statistics(self) -> pd.DataFrame:
        """Return ``results/statistics``: one row an answer."""
        return self._table("statistics")

    def descriptives(self) -> pd.DataFrame:
        """Return ``results/descriptives``: one row a cell of an answer, or its differences."""
        return self._table("descriptives")

    def quality(self) -> pd.DataFrame:
        """Return ``results/quality``: one row a channel and measure."""
        return self._table("quality")

    def epochs(self) -> pd.DataFrame:
        """Return ``results/epochs``: how many epochs of each channel and segment are kept, and why not the others."""
        return self._table("epochs")

    def exclusions(self) -> pd.DataFrame:
        """Return ``results/exclusions``: all that was left out, with its reason."""
        return self._table("exclusions")

    def ledger(self) -> pd.DataFrame:
        """Return ``results/ledger``: one row a node."""
        return self._table("ledger")

    def _table(self, name: str) -> pd.DataFrame:
        """Return a table of the results, refused unless it is that of the study as it stands."""
        import pandas as pd

        from bandcairn.errors import Problem

        project = self.open()
        if not published(project):
            problem = Problem(
                f"results/{name}.parquet",
                "",
                "results",
                "results that are missing or older than the study",
                "results of the study as it stands",
                "Run the study first: study.run()",
            )
            raise StudyError((problem,))
        return pd.read_parquet(project.results_folder / f"{name}.parquet")
