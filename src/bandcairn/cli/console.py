"""How commands speak: results to stdout, everything else to stderr, JSON where a program reads."""

from __future__ import annotations

import json
import os
import sys
from contextlib import contextmanager
from dataclasses import asdict
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Any

import typer

from bandcairn.errors import StudyError

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Sequence

    from rich.progress import Progress

    from bandcairn.errors import Problem
    from bandcairn.execution.project import Project

# Exit codes. 1 is kept for "finished, but the answer is no".
DONE, STUDY_AT_FAULT, SOME_FAILED, FAULT, INTERRUPTED = 0, 2, 3, 70, 130

StudyFolder = Annotated[Path, typer.Argument(metavar="STUDY", help="The folder that holds study.yaml.")]
AsJson = Annotated[bool, typer.Option("--json", help="Print JSON for a program to read.")]
Cores = Annotated[
    int | None, typer.Option(min=1, help="Jobs at a time.  [default: as many as there are processors]")
]


def cores_or_all(cores: int | None) -> int:
    """Return the number of cores asked for, else all of this process's."""
    if cores is not None:
        return cores
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


def say(text: str = "") -> None:
    """Print a line to stdout."""
    sys.stdout.write(f"{text}\n")


def note(text: str) -> None:
    """Print a line to stderr."""
    sys.stderr.write(f"{text}\n")


def print_json(value: Any) -> None:  # noqa: ANN401 - any JSON
    """Print a value to stdout as JSON."""
    say(json.dumps(value, indent=2, ensure_ascii=False))


def print_error(error: Exception | str, *, as_json: bool) -> None:
    """Print what went wrong to stderr: every problem with its place, what was found, what is allowed, the remedy."""
    problems = error.problems if isinstance(error, StudyError) else ()
    if as_json:
        told = {"problems": [asdict(problem) for problem in problems]} if problems else {"error": str(error)}
        note(json.dumps(told, indent=2, ensure_ascii=False))
        return
    if not problems:
        note(f"bandcairn: {error}")
        return
    for places, problem in _alike(problems):
        note(_listed(places))
        note(f"  {problem.field}")
        note(f"    found    {problem.found}")
        note(f"    allowed  {problem.allowed}")
        note(f"    remedy   {problem.remedy}")
    counted = "1 problem" if len(problems) == 1 else f"{len(problems)} problems"
    note(f"{counted}; nothing was run, nothing was written")


def _alike(problems: Sequence[Problem]) -> list[tuple[list[str], Problem]]:
    """Return the problems with all their places, those that differ in nothing else together."""
    groups: dict[tuple[str, ...], tuple[list[str], Problem]] = {}
    for problem in problems:
        told = (problem.field, problem.found, problem.allowed, problem.remedy)
        place = f"{problem.file}, {problem.where}" if problem.where else problem.file
        groups.setdefault(told, ([], problem))[0].append(place)
    return list(groups.values())


def _listed(places: Sequence[str], most: int = 3) -> str:
    more = len(places) - most
    return "\n".join([*places[:most], *([f"and {more} more like these"] if more > 0 else [])])


def opened(folder: Path, *, quiet: bool = False) -> Project:
    """Open a study, with progress while its raw files are looked at."""
    from bandcairn.execution.project import open_project

    with counted_progress("reading raw files", "files", quiet=quiet) as advance:
        return open_project(folder, advance)


@contextmanager
def counted_progress(what: str, unit: str, *, quiet: bool = False) -> Iterator[Callable[[int, int], None]]:
    """Show a count with its rate and the time left while something long runs; silent where no one watches.

    Parameters
    ----------
    what : str
        What is being done.
    unit : str
        What is counted.
    quiet : bool
        Show nothing in any case.

    Yields
    ------
    callable
        To be called with the number done and the total. Short work, done before half a second, shows nothing.
    """
    if quiet or not sys.stderr.isatty():
        yield lambda *_: None
        return
    progress = _progress_bar(unit)
    task = progress.add_task(what, total=None)
    with progress:
        yield lambda done, total: progress.update(task, completed=done, total=total)


def _progress_bar(unit: str) -> Progress:
    from rich.console import Console
    from rich.progress import BarColumn, Progress, ProgressColumn, TextColumn, TimeRemainingColumn
    from rich.text import Text

    class Count(ProgressColumn):
        def render(self, task: Any) -> Text:  # noqa: ANN401 - rich's own type
            return Text("" if task.total is None else f"{task.completed:.0f} of {task.total:.0f} {unit}")

    class Rate(ProgressColumn):
        def render(self, task: Any) -> Text:  # noqa: ANN401 - rich's own type
            return Text(f"{task.speed:.0f} a second, left" if task.speed else "")

    return Progress(
        TextColumn("{task.description}"),
        BarColumn(bar_width=30),
        Count(),
        Rate(),
        TimeRemainingColumn(compact=True),
        console=Console(stderr=True),
        transient=True,
    )
