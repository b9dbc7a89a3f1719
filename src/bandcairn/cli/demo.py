"""``bandcairn demo``: an invented study, written, run and shown."""

from __future__ import annotations

from pathlib import Path
from time import perf_counter
from typing import TYPE_CHECKING, Annotated, Any

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
    """Print the answers as a table."""
    from rich.console import Console
    from rich.table import Table

    from bandcairn.store.tables import read_table

    table = Table(
        title=f"{project.study.description.study}: answers", title_justify="left", box=None, pad_edge=False
    )
    for heading in ("question", "channel", "estimate", "95 % interval", "unit", "n", "p", "p adjusted"):
        table.add_column(heading, justify="left" if heading in ("question", "channel", "unit") else "right")
    for row in read_table(project.results_folder / "statistics.parquet"):
        table.add_row(*_cells(row))
    Console().print(table)


def _cells(row: dict[str, Any]) -> tuple[str, ...]:
    interval = "" if row["ci_low"] is None else f"[{row['ci_low']:.3g}, {row['ci_high']:.3g}]"
    return (
        row["question"],
        row["channel"],
        row["status"] if row["estimate"] is None else f"{row['estimate']:.3g}",
        interval,
        row["estimate_unit"],
        str(row["n_participants"]),
        p_value(row["p"]),
        p_value(row["p_adjusted"]),
    )


def p_value(p: float | None) -> str:
    """Return a p value as papers print it: three digits, and never 0."""
    if p is None:
        return ""
    return "< .001" if p < 0.001 else f"{p:.3f}".removeprefix("0")
