"""``bandcairn run``: bring a study up to date."""

from __future__ import annotations

from time import perf_counter
from typing import TYPE_CHECKING

from bandcairn.cli.console import (
    DONE,
    FAULT,
    SOME_FAILED,
    AsJson,
    Cores,
    StudyFolder,
    cores_or_all,
    counted_progress,
    note,
    opened,
    print_json,
    say,
)
from bandcairn.cli.plan import duration

if TYPE_CHECKING:
    import typer

    from bandcairn.execution.launch import RunReport
    from bandcairn.execution.project import Project


def register(app: typer.Typer) -> None:
    """Add the command."""
    app.command(epilog="Example: bandcairn run demo-study --cores 2")(run)


def run(study: StudyFolder, *, cores: Cores = None, as_json: AsJson = False) -> int:
    """Compute what is missing and write the results.

    Only what a change touches is computed; an interrupted run goes on where it stopped. A recording that fails does
    not stop the others: its reason stands in results/exclusions, and the exit code is 3.
    """
    started = perf_counter()
    project = opened(study, quiet=as_json)
    report = run_with_progress(project, cores_or_all(cores), quiet=as_json)
    code = exit_code(report)
    if as_json:
        print_json(summary(project, report, code))
    else:
        tell(project, report, perf_counter() - started)
    return code


def run_with_progress(project: Project, cores: int, *, quiet: bool) -> RunReport:
    """Run a study while showing how many of its missing nodes are done."""
    from bandcairn.execution.launch import run_project

    missing = len(project.missing())
    done = 0
    with counted_progress("computing", "nodes", quiet=quiet or not missing) as advance:

        def count(_step: str, _recording: str) -> None:
            nonlocal done
            done += 1
            advance(done, missing)

        return run_project(project, cores, count)


def exit_code(report: RunReport) -> int:
    """Return 0 if all is done, 3 if some recordings have failed, 70 if one of them met a fault of bandcairn."""
    if any(failure.fault for failure in report.outcome.failures):
        return FAULT
    return SOME_FAILED if report.outcome.failures else DONE


def summary(project: Project, report: RunReport, code: int) -> dict[str, object]:
    """Return what a run has done, for a program."""
    return {
        "exit_code": code,
        "computed": report.computed,
        "nodes": len(project.plan.nodes),
        "results_written": report.rewritten,
        "failures": [
            {"recording": f.recording, "signal": f.signal, "step": f.step, "reason": f.reason}
            for f in report.outcome.failures
        ],
        "results": "results",
    }


def left_out(project: Project) -> str:
    """Return one line on what the results leave out: how many recordings, channels and epochs."""
    from bandcairn.store.tables import read_table

    counts: dict[str, int] = {}
    for row in read_table(project.results_folder / "exclusions.parquet"):
        counts[row["what"]] = counts.get(row["what"], 0) + row["count"]
    told = ", ".join(f"{count} {what}{'' if count == 1 else 's'}" for what, count in counts.items())
    return f"left out: {told or 'nothing'} (results/exclusions.csv)"


def tell(project: Project, report: RunReport, seconds: float) -> None:
    """Say what a run has done."""
    nodes = len(project.plan.nodes)
    if report.computed or report.outcome.failures:
        say(f"computed {report.computed} of {nodes} nodes in {duration(seconds)}")
    else:
        results = "; results written anew" if report.rewritten else ""
        say(f"nothing to compute: all {nodes} nodes stand{results}")
    failures = report.outcome.failures
    for failure in failures:
        place = " ".join(filter(None, (failure.recording, failure.signal)))
        note(f"failed: {place}: {failure.sentence}")
    if failures:
        note(f"{report.outcome.failed_sentence}; the rest is done, with the true n in every row")
    if report.rewritten:
        say(left_out(project))
    say(f"results: {project.results_folder}")
    say("research use only: no result is a diagnosis")
