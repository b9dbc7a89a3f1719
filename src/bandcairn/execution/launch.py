"""Run a study: plan first, and start the workflow engine only if something is missing."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from bandcairn.errors import EngineError
from bandcairn.execution.progress import PIPE_VARIABLE
from bandcairn.execution.publish import Outcome, publish, published, read_run
from bandcairn.execution.wiring import clear_receipts
from bandcairn.store.layout import STORE_NAME, make_private_folder

if TYPE_CHECKING:
    from collections.abc import Callable

    from bandcairn.execution.project import Project

LOG_NAME = f"{STORE_NAME}/last_run.log"

# One thread each: two cores are kept busy by two jobs, and spinning helper threads would only take from them.
_ONE_THREAD = dict.fromkeys(
    ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS", "VECLIB_MAXIMUM_THREADS"), "1"
)


@dataclass(frozen=True, slots=True)
class RunReport:
    """What `run_project` has done.

    Attributes
    ----------
    computed : int
        Number of nodes that were computed; 0 if all of them stood.
    rewritten : bool
        Whether the results were written.
    outcome : Outcome
        The failures.
    """

    computed: int
    rewritten: bool
    outcome: Outcome


def run_project(
    project: Project, cores: int, on_node: Callable[[str, str], None] = lambda *_: None
) -> RunReport:
    """Bring a study up to date.

    Parameters
    ----------
    project : Project
        The opened study.
    cores : int
        Number of jobs at a time.
    on_node : callable
        Called with step and recording of each node when it has been computed.

    Returns
    -------
    RunReport

    Raises
    ------
    EngineError
        If the engine ends without having written the results.
    """
    if not project.missing():
        return RunReport(0, *_refresh_results(project))
    clear_receipts(project.folder)
    before = read_run(project.results_folder).get("finished"), _run_stamp(project)
    code, computed = _run_engine(project.folder, cores, on_node)
    clear_receipts(project.folder)
    run = read_run(project.results_folder)
    if run.get("plan") != project.plan.id or (run.get("finished"), _run_stamp(project)) == before:
        if code in (130, -2):
            raise KeyboardInterrupt
        raise EngineError(f"the workflow engine ended with code {code}; its log is {LOG_NAME}")
    return RunReport(computed, rewritten=True, outcome=Outcome.of_run(run))


def _refresh_results(project: Project) -> tuple[bool, Outcome]:
    """Write the results of a study whose nodes all stand, unless they stand too. No engine is needed."""
    if published(project):
        return False, Outcome.of_run(read_run(project.results_folder))
    from bandcairn.store.store import Store

    nodes = list(project.plan.study_nodes.values())
    return True, publish(project, nodes, Store(project.store_folder), {}, ())


def _run_stamp(project: Project) -> int:
    """Return when the last run was written: tells this run's file from an older one."""
    try:
        return (project.results_folder / "run.json").stat().st_mtime_ns
    except OSError:
        return 0


def workflow_folder() -> Path:
    """Return the folder of the workflow: inside an installed package, or beside ``src`` in a clone."""
    package = Path(__file__).resolve().parent.parent
    installed = package / "workflow"
    return installed if installed.is_dir() else package.parent.parent / "workflow"


def engine_command(study_folder: Path, cores: int) -> list[str]:
    """Return the command that runs the study by plain Snakemake; the profile beside the Snakefile tunes it."""
    snakefile = workflow_folder() / "Snakefile"
    command = [sys.executable, "-m", "snakemake", "--snakefile", str(snakefile)]
    return [*command, "--directory", str(study_folder), "--cores", str(cores), "--nocolor"]


def _run_engine(study_folder: Path, cores: int, on_node: Callable[[str, str], None]) -> tuple[int, int]:
    """Start the engine and follow it; return its exit code and the number of nodes it has computed."""
    log = study_folder / LOG_NAME
    make_private_folder(log.parent)
    reading, writing = os.pipe()
    environment = {**_ONE_THREAD, **os.environ, PIPE_VARIABLE: str(writing)}
    computed = 0
    with log.open("wb") as output:
        engine = subprocess.Popen(  # noqa: S603 - our own interpreter and Snakefile
            engine_command(study_folder.resolve(), cores),
            stdin=subprocess.DEVNULL,
            stdout=output,
            stderr=output,
            pass_fds=(writing,),
            env=environment,
        )
        os.close(writing)
        with os.fdopen(reading, encoding="utf-8") as events:
            for line in events:
                event: dict[str, Any] = json.loads(line)
                computed += 1
                on_node(event["step"], event["recording"])
        return engine.wait(), computed
