"""``bandcairn new``: draft a study from a folder of recordings."""

from __future__ import annotations

from enum import StrEnum
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from bandcairn.cli.console import DONE, SOME_FAILED, AsJson, counted_progress, note, print_json, say

if TYPE_CHECKING:
    from bandcairn.drafting import Draft


class Datatype(StrEnum):
    """Kinds of recordings in a BIDS dataset."""

    EEG = "eeg"
    EMG = "emg"


Folder = Annotated[Path, typer.Argument(metavar="DIR", help="A folder of recordings, or a BIDS dataset.")]


def register(app: typer.Typer) -> None:
    """Add the command."""
    app.command(epilog="Example: bandcairn new my-study")(new)


def new(
    folder: Folder,
    *,
    datatype: Annotated[
        Datatype | None,
        typer.Option(help="Of a BIDS dataset that holds both.  [default: the one with more recordings]"),
    ] = None,
    as_json: AsJson = False,
) -> int:
    """Draft a study: look at the recordings of a folder and write study.yaml and its tables beside them.

    Raw files are neither moved nor changed, and nothing is overwritten. What is guessed is marked as a guess; what only
    you can know is left blank and marked. The exit code is 3 if a recording cannot be read and is left out.
    """
    from bandcairn.drafting import draft_study, refuse_existing, write_draft

    refuse_existing(folder)
    with counted_progress("reading raw files", "files", quiet=as_json) as advance:
        draft = draft_study(folder, datatype and datatype.value, advance)
    written = write_draft(folder, draft)
    if as_json:
        print_json({**draft.facts(), "written": list(written)})
    else:
        _tell(folder, draft, written)
    return SOME_FAILED if any(one.damaged for one in draft.left_out) else DONE


def _tell(folder: Path, draft: Draft, written: tuple[str, ...]) -> None:
    for one in draft.left_out:
        note(f"left out: {one.file}: {one.reason}")
    for remark in draft.remarks:
        note(f"note: {remark}")
    say(
        f"drafted from {draft.source}: {len(draft.recordings)} recordings of {draft.participants} participants"
    )
    for proposal in draft.proposals:
        group = proposal.group
        channels = ", ".join(group.labels[:8]) + (
            f" and {len(group.labels) - 8} more" if len(group.labels) > 8 else ""
        )
        rates = ", ".join(f"{float(rate):g} Hz" for rate in group.rates_hz) or "rate not known"
        unused = f"; not used: {proposal.settings.problem}" if proposal.settings.problem else ""
        say(f"  {group.name}: {channels} ({rates}){unused}")
    for mark in draft.guesses:
        say(f"guessed  study.yaml, line {mark.line}: {mark.text}")
    for mark in draft.blanks:
        say(f"fill in  study.yaml, line {mark.line}: {mark.text}")
    say(f"written to {folder}: {', '.join(written)}")
    fill = "fill in what is blank, " if draft.blanks else ""
    say(f"next: read {folder / 'study.yaml'}, {fill}then: bandcairn check {folder}")
