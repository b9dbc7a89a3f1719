"""``bandcairn prune``: remove nodes that the study no longer needs."""

from __future__ import annotations

import sys
from typing import TYPE_CHECKING, Annotated

import typer

from bandcairn.cli.console import AsJson, StudyFolder, opened, print_json, say

if TYPE_CHECKING:
    from bandcairn.execution.project import Project
    from bandcairn.provenance.hygiene import Leftover


def register(app: typer.Typer) -> None:
    """Add the command."""
    app.command(epilog="Example: bandcairn prune demo-study --yes")(prune)


def prune(
    study: StudyFolder,
    *,
    yes: Annotated[bool, typer.Option("--yes", help="Remove without asking.")] = False,
    as_json: AsJson = False,
) -> None:
    """Remove the nodes of former parameters, which the study as it stands does not need.

    Without --yes it tells what would be removed, and asks on a terminal. Results and raw files are never touched.
    """
    project = opened(study, quiet=as_json)
    found = _leftovers(project)
    megabytes = sum(leftover.n_bytes for leftover in found) / 1e6
    removed = bool(found) and (yes or _agreed(len(found), megabytes, as_json=as_json))
    if removed:
        for leftover in found:
            leftover.path.unlink(missing_ok=True)
    if as_json:
        print_json({"files": len(found), "megabytes": round(megabytes, 3), "removed": removed})
    elif not found:
        say("nothing to prune: every node is needed")
    else:
        done = "removed" if removed else "not removed (--yes removes them):"
        say(f"{done} {len(found)} files that the study does not need, {megabytes:.1f} MB")


def _leftovers(project: Project) -> tuple[Leftover, ...]:
    from bandcairn.execution.abandoned import abandoned_files, in_use
    from bandcairn.nodes.plan import plan_study_nodes
    from bandcairn.provenance.hygiene import leftovers
    from bandcairn.store.layout import present_keys

    present = present_keys(project.store_folder, project.plan.recording_nodes.values())
    # Where recordings have failed, the tables stand on the others.
    standing = plan_study_nodes(project.study, project.plan.slots, present.__contains__)
    stored = leftovers(project.store_folder, (*project.plan.nodes.values(), *standing.values()))
    return (*(leftover for leftover in stored if not in_use(leftover.path)), *abandoned_files(project))


def _agreed(files: int, megabytes: float, *, as_json: bool) -> bool:
    if as_json or not sys.stdin.isatty():
        return False
    return typer.confirm(f"Remove {files} files that the study does not need, {megabytes:.1f} MB?")
