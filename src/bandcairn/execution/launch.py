"""Run a study: plan first, and start the workflow engine only if something is missing."""

from __future__ import annotations

import json
import os
import subprocess
import sys
import tempfile
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path
from typing import IO, TYPE_CHECKING, Any

from bandcairn.errors import EngineError, Problem, StudyError
from bandcairn.execution.progress import PIPE_VARIABLE
from bandcairn.execution.publish import Outcome, publish, published, read_run
from bandcairn.execution.threads import ONE_THREAD
from bandcairn.execution.wiring import RUN_VARIABLE, clear_receipts, run_name
from bandcairn.store.layout import STORE_NAME, make_private_folder

if TYPE_CHECKING:
    from collections.abc import Callable

    from bandcairn.execution.project import Project

LOG_NAME = f"{STORE_NAME}/last_run.log"

# Where the C library of GNU serves memory: let it keep what is freed, for the next recording wants as much. Giving
# megabytes back and asking for them anew, page by page, took a tenth of the time.
_KEEP_MEMORY = dict.fromkeys(("MALLOC_TRIM_THRESHOLD_", "MALLOC_MMAP_THRESHOLD_"), str(1 << 30))

# How long running jobs may take to finish when the run is interrupted.
_PATIENCE_S = 5


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
    StudyError
        If nothing can be written to the study.
    EngineError
        If the engine ends without having written the results.
    """
    if not project.missing():
        return RunReport(0, *_refresh_results(project))
    _refuse_unwritable(project)
    before = read_run(project.results_folder).get("finished"), _run_stamp(project)
    code, computed = _run_engine(project.folder, cores, on_node)
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
    _refuse_unwritable(project)
    from bandcairn.execution.worker import Worker

    worker = Worker(project)
    nodes = list(project.plan.study_nodes.values())
    records = {record["key"]: record for record in worker.heal(nodes)}
    return True, publish(project, nodes, worker.store, records, ())


def _refuse_unwritable(project: Project) -> None:
    """Refuse a study whose store or results cannot be written, before anything is computed."""
    problems = tuple(
        Problem(
            folder.name,
            "",
            "folder",
            "a place that cannot be written to",
            "a folder that this user may write to",
            "Change its owner or permissions, or copy the study to a disk of your own.",
        )
        for folder in (project.store_folder, project.results_folder)
        if not _writable(folder)
    )
    if problems:
        raise StudyError(problems)


def _writable(folder: Path) -> bool:
    standing = folder if folder.exists() else folder.parent
    return standing.is_dir() and os.access(standing, os.W_OK | os.X_OK)


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
    """Run the engine; return its exit code and the number of nodes it has computed. Its log is kept if it fails."""
    run = run_name()
    log = study_folder / LOG_NAME
    make_private_folder(log.parent)
    log.unlink(missing_ok=True)
    with tempfile.TemporaryFile() as output:
        code: int | None = None
        try:
            code, computed = _follow_engine(study_folder, cores, run, output, on_node)
        finally:
            clear_receipts(study_folder, run)
            _remove_engine_logs(study_folder)
            if code != 0:
                output.seek(0)
                _keep_log(log, output.read().decode("utf-8", "replace"), study_folder)
        return code, computed


def _follow_engine(
    study_folder: Path, cores: int, run: str, output: IO[bytes], on_node: Callable[[str, str], None]
) -> tuple[int, int]:
    """Start the engine and follow it to its end; if interrupted, end it before anything else is done."""
    reading, writing = os.pipe()
    environment = {**_KEEP_MEMORY, **os.environ, **ONE_THREAD, PIPE_VARIABLE: str(writing), RUN_VARIABLE: run}
    computed = 0
    with subprocess.Popen(  # noqa: S603 - our own interpreter and Snakefile
        engine_command(study_folder.resolve(), cores),
        stdin=subprocess.DEVNULL,
        stdout=output,
        stderr=output,
        pass_fds=(writing,),
        env=environment,
    ) as engine:
        os.close(writing)
        try:
            with os.fdopen(reading, encoding="utf-8") as events:
                for line in events:
                    event: dict[str, Any] = json.loads(line)
                    computed += 1
                    on_node(event["step"], event["recording"])
            return engine.wait(), computed
        except BaseException:
            _end(engine)
            raise


def _end(engine: subprocess.Popen[bytes]) -> None:
    """End the engine: first by asking, so that running jobs finish their nodes, then by force, which harms no node."""
    engine.terminate()
    try:
        with suppress(subprocess.TimeoutExpired):
            engine.wait(_PATIENCE_S)
    finally:
        engine.kill()


def _keep_log(log: Path, text: str, study_folder: Path) -> None:
    """Keep what the engine has said, without the names of machine, user and folders."""
    private = ("Host: ", "User: ", "Command: ", "Run directory: ", "Working directory: ", "Base directory: ")
    lines = (line for line in text.splitlines() if not line.lstrip().startswith(private))
    cleaned = "\n".join(lines)
    for name, told in ((str(study_folder.resolve()), "STUDY"), (str(Path.home()), "~")):
        cleaned = cleaned.replace(name, told) if len(name) > 1 else cleaned
    from bandcairn.store.tables import replace_file

    with suppress(OSError):
        replace_file(log, lambda path: path.write_text(f"{cleaned}\n", "utf-8"))


def _remove_engine_logs(study_folder: Path) -> None:
    """Remove what the engine logs for itself: it names machine, user and folders."""
    with suppress(OSError):
        for log in (study_folder / ".snakemake" / "log").glob("*.log"):
            log.unlink(missing_ok=True)
