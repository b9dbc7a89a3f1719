"""What the Snakefile calls: which receipts are wanted, which a job needs first, and the work of one job.

A receipt says that a batch has been through a step. It hands the order of the jobs to the engine, and the records and
failures of the batch to the last job; the nodes themselves decide whether anything is to be done. Receipts live for
one run.
"""

from __future__ import annotations

import os
import shutil
import time
from contextlib import suppress
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING, Any

from bandcairn.errors import EngineError
from bandcairn.execution.batches import make_batches
from bandcairn.execution.progress import reporter
from bandcairn.execution.project import RESULTS_NAME, open_project
from bandcairn.execution.publish import RUN_FILE, publish, published
from bandcairn.store.layout import STORE_NAME, make_private_folder

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Sequence

    from bandcairn.execution.project import Project
    from bandcairn.execution.worker import Work, Worker
    from bandcairn.nodes.node import Node

# Relative to the study folder, which is the working directory of every job.
RECEIPTS = f"{STORE_NAME}/.receipts"
# Receipts of a run lie apart from those of another that may work on the same study at the same time. The name is
# handed down to every process of the run.
RUN_VARIABLE = "BANDCAIRN_RUN"
# A run that was killed leaves its receipts; no run goes on for a week without a receipt.
_STALE_S = 7 * 86400


class Wiring:
    """The study in the engine's working directory, as the rules see it.

    Parameters
    ----------
    project : Project
        The opened study.
    """

    def __init__(self, project: Project) -> None:
        self.project = project
        self.batches = make_batches(project.plan.recording_nodes.values())

    @property
    def batch_pattern(self) -> str:
        """A pattern that no name but those of the batches can match."""
        return "|".join(self.batches) or "none"

    @property
    def plan_id(self) -> str:
        """The short name of the plan."""
        return self.project.plan.id

    @cached_property
    def worker(self) -> Worker:
        """The worker that all jobs of this process share."""
        from bandcairn.execution.worker import Worker

        return Worker(self.project, reporter())

    def wanted(self) -> list[str]:
        """Return the final receipt; when all nodes and results stand, a file of the results, which exists."""
        stands = not self.project.missing() and published(self.project)
        return [f"{RESULTS_NAME}/{RUN_FILE}" if stands else receipt("results", self.project.plan.id)]

    def needed_by(self, step: str) -> Callable[[Any], list[str]]:
        """Return the input function of a step's rule: the receipt of the step before, for the same batch."""

        def needed(wildcards: Any) -> list[str]:  # noqa: ANN401 - the engine's own type
            batch = self.batches[wildcards.batch]
            before = batch.before(step)
            return [] if before is None else [receipt(before, batch.name)]

        return needed

    def unfinished(self, _: Any = None) -> list[str]:  # noqa: ANN401
        """Return the last receipts of the batches that have something missing."""
        missing = {node.key for node in self.project.missing()}
        return [
            receipt(batch.last_step, batch.name)
            for batch in self.batches.values()
            if any(node.key in missing for nodes in batch.steps.values() for node in nodes)
        ]

    def carry_out(self, step: str, batch: str, receipt_path: str, log_path: str) -> None:
        """Do the work of one job: take a batch through a step."""
        _finish(self.worker.work(self.batches[batch].steps[step]), receipt_path, log_path)

    def carry_out_study(self, step: str, receipt_path: str, log_path: str) -> None:
        """Do the work of one job of the study: tables or statistics over what has been computed."""
        nodes = [node for node in self._study_nodes() if node.step == step]
        _finish(self.worker.work(nodes), receipt_path, log_path)

    def publish(self, receipt_path: str, log_path: str) -> None:
        """Write the results.

        Raises
        ------
        EngineError
            After the results have been written, if a recording has failed: the engine's run shall not look clean.
        """
        from bandcairn.execution.worker import Work

        receipts = sorted(Path(receipts_folder()).glob("*/*.json"))
        works = [Work.from_json(path.read_text("utf-8")) for path in receipts]
        failures = [failure for work in works for failure in work.failures]
        nodes = self._study_nodes()
        records = [record for work in works for record in work.records] + self.worker.heal(nodes)
        told = {record["key"]: record for record in records}
        outcome = publish(self.project, nodes, self.worker.store, told, failures)
        if outcome.failures:
            raise EngineError(f"results written, but {outcome.failed_sentence}; see results/exclusions.csv")
        _finish(Work([], []), receipt_path, log_path)

    def finish(self, engine_logs: Iterable[str]) -> None:
        """Remove what the engine leaves in the study: receipts, and its logs, which name machine and user."""
        clear_receipts(self.project.folder)
        for log in engine_logs:
            Path(log).unlink(missing_ok=True)

    def _study_nodes(self) -> Sequence[Node]:
        return self.worker.plan_study_nodes()


def open_wiring() -> Wiring:
    """Open the study in the working directory, as the engine has set it."""
    os.environ.setdefault(RUN_VARIABLE, run_name())
    return Wiring(open_project(Path.cwd()))


def start_jobs_freely(workflow: Any) -> None:  # noqa: ANN401 - the engine's own type
    """Take the engine's limit of job starts a second away, where it has one.

    It is meant for clusters. With it every look for ready jobs sets a timer for one more look, and so do they: beside
    two hundred jobs that take a while they made 3,000 threads and took a third of all time.

    Parameters
    ----------
    workflow : snakemake.workflow.Workflow
        The engine's workflow, about to start its jobs.
    """
    with suppress(AttributeError):
        workflow.scheduler.job_rate_limiter = None


def run_name() -> str:
    """Return a name for a run of this process."""
    return f"{time.time_ns():x}-{os.getpid()}"


def receipts_folder() -> str:
    """Return the folder of this run's receipts, relative to the study."""
    return f"{RECEIPTS}/{os.environ[RUN_VARIABLE]}"


def receipt(step: str, name: str) -> str:
    """Return the path of a receipt, relative to the study."""
    return f"{receipts_folder()}/{step}/{name}.json"


def log_of(step: str, name: str) -> str:
    """Return the path of a job's log, relative to the study."""
    return f"{receipts_folder()}/{step}/{name}.log"


def clear_receipts(study_folder: Path, run: str = "") -> None:
    """Remove the receipts and logs of a run, this process's if not named, and of runs that were killed long ago."""
    receipts = study_folder / RECEIPTS
    shutil.rmtree(receipts / (run or os.environ[RUN_VARIABLE]), ignore_errors=True)
    with suppress(OSError):  # another run may be clearing too, or its receipts may lie there
        for folder in receipts.iterdir():
            if time.time() - folder.stat().st_mtime > _STALE_S:
                shutil.rmtree(folder, ignore_errors=True)
        receipts.rmdir()


def _finish(work: Work, receipt_path: str, log_path: str) -> None:
    """Write the log of a job, then its receipt: with it the job is done."""
    for path, text in ((log_path, work.log()), (receipt_path, work.to_json())):
        make_private_folder(Path(path).parent)
        Path(path).write_text(text, "utf-8")
