"""``bandcairn demo``: an invented study, written, run and shown."""

from __future__ import annotations

from pathlib import Path
from time import perf_counter
from typing import TYPE_CHECKING, Annotated

import typer

from bandcairn.cli.console import Cores, cores_or_all, counted_progress, note, opened, say
from bandcairn.cli.run import exit_code, run_with_progress, tell

if TYPE_CHECKING:
    from bandcairn.execution.project import Project

TRUTH_FILE = "ground_truth.json"


def register(app: typer.Typer) -> None:
    """Add the command."""
    app.command(epilog="Example: bandcairn demo demo-study")(demo)


def demo(
    folder: Annotated[Path, typer.Argument(metavar="[DIR]", help="Where to write the study.")] = Path(
        "demo-study"
    ),
    *,
    cores: Cores = None,
) -> int:
    """Write an invented study (people on watch at a harbour, by day and by night), run it and show its results.

    A folder that holds the demo study already is run as it stands.
    """
    from bandcairn.demo import write_demo

    started = perf_counter()
    if not (folder / TRUTH_FILE).exists():
        note(f"writing 24 invented recordings to {folder}")
        with counted_progress("writing recordings", "files") as advance:
            write_demo(folder, progress=advance)
    project = opened(folder)
    report = run_with_progress(project, cores_or_all(cores), quiet=False)
    _show_statistics(project)
    tell(project, report, perf_counter() - started)
    say(f"study: {folder / 'study.yaml'}    planted effects: {folder / TRUTH_FILE}")
    say(f"next: change a filter edge in {folder / 'study.yaml'}, then: bandcairn plan {folder}")
    return exit_code(report)


def _show_statistics(project: Project) -> None:
    """Print the answers."""
    from bandcairn.cli.answers import answer_lines
    from bandcairn.store.tables import read_table

    say()
    say(f"{project.study.description.study}: answers")
    for line in answer_lines(read_table(project.results_folder / "statistics.parquet")):
        say(line)
    say()
