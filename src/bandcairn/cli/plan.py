"""``bandcairn plan``: tell what would run, and why."""

from __future__ import annotations

from collections import Counter
from typing import TYPE_CHECKING, Annotated

import typer

from bandcairn.cli.console import AsJson, Cores, StudyFolder, cores_or_all, opened, print_json, say

if TYPE_CHECKING:
    from collections.abc import Sequence

    from bandcairn.execution.project import Project
    from bandcairn.nodes.node import Node
    from bandcairn.provenance.changes import Reason

_MOST_LINES = 60
# Starting the engine and loading its libraries, measured on two cores; little beside a study, much beside an edit.
_ENGINE_START_S = 4.0


def register(app: typer.Typer) -> None:
    """Add the command."""
    app.command(epilog="Example: bandcairn plan demo-study")(plan)


def plan(
    study: StudyFolder,
    *,
    each: Annotated[bool, typer.Option("--each", help="Name every node, however many.")] = False,
    cores: Cores = None,
    as_json: AsJson = False,
) -> None:
    """Tell which nodes would run and why, and about how long it would take. Computes nothing."""
    project = opened(study, quiet=as_json)
    missing = project.missing()
    found, seconds = _explained(project, missing, cores_or_all(cores)) if missing else ([], 0.0)
    if as_json:
        print_json(
            {
                "nodes": len(project.plan.nodes),
                "missing": len(missing),
                "estimated_seconds": seconds,
                "would_run": [_as_json(reason) for reason in found],
            }
        )
        return
    if not missing:
        say(f"nothing to compute: all {len(project.plan.nodes)} nodes stand{_results_clause(project)}")
        return
    for line in _lines(found, each=each or len(found) <= _MOST_LINES):
        say(line)
    time = f"about {duration(seconds)}" if seconds is not None else "no earlier run to estimate the time from"
    say(f"{len(missing)} of {len(project.plan.nodes)} nodes would run; {time} on {cores_or_all(cores)} cores")


def _explained(project: Project, missing: Sequence[Node], cores: int) -> tuple[list[Reason], float | None]:
    from bandcairn.provenance.changes import reasons
    from bandcairn.provenance.estimate import estimated_seconds
    from bandcairn.provenance.ledger import read_ledger

    ledger = read_ledger(project.results_folder)
    seconds = estimated_seconds(missing, ledger, cores)
    return reasons(missing, ledger), None if seconds is None else seconds + _ENGINE_START_S


def _results_clause(project: Project) -> str:
    from bandcairn.execution.publish import published

    return "" if published(project) else "; results are missing or changed and would be written anew"


def _as_json(reason: Reason) -> dict[str, object]:
    node = reason.node
    return {
        "key": node.key,
        "step": node.step,
        "recording": node.recording or None,
        "signal": node.signal or None,
        "why": list(reason.why),
    }


def _lines(found: Sequence[Reason], *, each: bool) -> list[str]:
    """Return one line a node, or one a step, signal and reason with the number of recordings."""
    if each:
        return [
            f"{reason.node.step:<10}  {reason.node.signal or '(study)':<12}  {reason.node.recording or '(all)':<16}  "
            f"{'; '.join(reason.why)}"
            for reason in found
        ]
    groups = Counter(
        (reason.node.step, reason.node.signal or "(study)", "; ".join(reason.why)) for reason in found
    )
    lines = [
        f"{step:<10}  {signal:<12}  {count:>5} x  {why}" for (step, signal, why), count in groups.items()
    ]
    return [*lines, "(--each names every node)"]


def duration(seconds: float) -> str:
    """Return a duration in words: ``40 s``, ``12 min``, ``3 h 20 min``."""
    if seconds < 90:
        return f"{max(1, round(seconds))} s"
    minutes = round(seconds / 60)
    return f"{minutes} min" if minutes < 90 else f"{minutes // 60} h {minutes % 60} min"
