"""From a folder to the texts of a study: look, group, choose, write down."""

from __future__ import annotations

import csv
import io
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

from bandcairn.drafting.bids import dataset_root, find_in_dataset
from bandcairn.drafting.folder import find_in_folder
from bandcairn.drafting.grouping import group_channels
from bandcairn.drafting.page import BLANK, GUESS, Proposal, study_page
from bandcairn.drafting.settings import Lengths, settings_for
from bandcairn.errors import Problem, StudyError
from bandcairn.recordings import SUFFIXES

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Sequence
    from pathlib import Path

    from bandcairn.drafting.findings import Findings, FoundRecording, LeftOut


@dataclass(frozen=True, slots=True)
class Mark:
    """A line of study.yaml that asks for a person's eye."""

    line: int
    text: str


@dataclass(frozen=True, slots=True)
class Draft:
    """A study that is not written yet.

    Attributes
    ----------
    files : dict of str to str
        Texts by file name; study.yaml comes last, for it makes the folder a study.
    source : str
        ``"a BIDS dataset"`` or ``"a folder of files"``.
    recordings : tuple of FoundRecording
        In the order of the table.
    proposals : tuple of Proposal
        The signals, with those that cannot be used as they stand.
    mains_hz : int or None
        None where a person must fill it in.
    guesses, blanks : tuple of Mark
        Lines of study.yaml to look at, and to fill in.
    remarks : tuple of str
        What a person should know.
    left_out : tuple of LeftOut
        Files that became no recording.
    """

    files: dict[str, str]
    source: str
    recordings: tuple[FoundRecording, ...]
    proposals: tuple[Proposal, ...]
    mains_hz: int | None
    guesses: tuple[Mark, ...]
    blanks: tuple[Mark, ...]
    remarks: tuple[str, ...]
    left_out: tuple[LeftOut, ...]

    @property
    def participants(self) -> int:
        """Number of different participants; blank ones do not count."""
        return len({one.participant for one in self.recordings if one.participant})

    def facts(self) -> dict[str, Any]:
        """Return what was found as JSON."""
        return {
            "source": self.source,
            "recordings": [
                {
                    "recording": one.name,
                    "participant": one.participant,
                    "file": one.file,
                    "design": dict(one.design),
                }
                for one in self.recordings
            ],
            "signals": {each.group.name: _signal_facts(each) for each in self.proposals},
            "mains_hz": self.mains_hz,
            "guesses": [{"line": mark.line, "text": mark.text} for mark in self.guesses],
            "blanks": [{"line": mark.line, "text": mark.text} for mark in self.blanks],
            "remarks": list(self.remarks),
            "left_out": [{"file": one.file, "reason": one.reason} for one in self.left_out],
        }


def _signal_facts(proposal: Proposal) -> dict[str, Any]:
    group, settings = proposal.group, proposal.settings
    return {
        "kind": group.kind,
        "channels": list(group.labels),
        "rates_hz": [float(rate_hz) for rate_hz in group.rates_hz],
        "resample_hz": settings.resample_hz,
        "used": not settings.problem,
        "problem": settings.problem or None,
    }


def draft_study(
    folder: Path, datatype: str | None = None, progress: Callable[[int, int], None] | None = None
) -> Draft:
    """Draft a study; nothing is written.

    Parameters
    ----------
    folder : Path
        A BIDS dataset, a folder that holds one, or a folder of files.
    datatype : str or None
        Of a BIDS dataset, ``"eeg"`` or ``"emg"``; None for the one with more recordings.
    progress : callable, optional
        Called after each file with the number done and the number of all.

    Returns
    -------
    Draft

    Raises
    ------
    StudyError
        If there is no such folder, or no recording in it.
    """
    if not folder.is_dir():
        found = "a file" if folder.exists() else "no such folder"
        raise _refusal(folder, found, "a folder of recordings", "Name the folder that holds the recordings.")
    root = dataset_root(folder)
    findings = (
        find_in_folder(folder, progress)
        if root is None
        else find_in_dataset(folder, root, datatype, progress)
    )
    grouping = group_channels(findings.recordings)
    left_out = (*findings.left_out, *grouping.left_out)
    if not grouping.recordings:
        raise _no_recordings(folder, left_out)
    remarks = (*findings.remarks, *grouping.remarks)
    findings = replace(findings, recordings=grouping.recordings, remarks=remarks, left_out=left_out)
    lengths = _lengths(findings)
    proposals = tuple(Proposal(group, settings_for(group, lengths)) for group in grouping.groups)
    return _draft(findings, proposals)


def _draft(findings: Findings, proposals: tuple[Proposal, ...]) -> Draft:
    page = study_page(findings, findings.recordings, proposals)
    files = {"recordings.csv": _recordings_table(findings)}
    if any(one.segments for one in findings.recordings):
        files["segments.csv"] = _segments_table(findings.recordings)
    return Draft(
        files={**files, "study.yaml": page},
        source=findings.source,
        recordings=findings.recordings,
        proposals=proposals,
        mains_hz=None if findings.mains.value is None else int(findings.mains.value),
        guesses=_marks(page, GUESS),
        blanks=_marks(page, BLANK),
        remarks=findings.remarks,
        left_out=findings.left_out,
    )


def _lengths(findings: Findings) -> Lengths:
    """Return the shortest recording and the shortest of the longest segments."""
    whole = [one.length_s for one in findings.recordings if one.length_s is not None]
    longest = [
        max(segment.stop_s - segment.start_s for segment in one.segments)
        for one in findings.recordings
        if one.segments
    ]
    return Lengths(min(whole, default=None), min(longest, default=None))


def _recordings_table(findings: Findings) -> str:
    header = ("recording", "participant", "file", *findings.columns)
    rows = (
        (one.name, one.participant, one.file, *(one.design[column] for column in findings.columns))
        for one in findings.recordings
    )
    return _table(header, rows)


def _segments_table(recordings: Sequence[FoundRecording]) -> str:
    rows = (
        (one.name, segment.name, f"{segment.start_s:.10g}", f"{segment.stop_s:.10g}")
        for one in recordings
        for segment in one.segments
    )
    return _table(("recording", "segment", "start_s", "stop_s"), rows)


def _table(header: Iterable[str], rows: Iterable[Iterable[str]]) -> str:
    text = io.StringIO(newline="")
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(header)
    writer.writerows(rows)
    return text.getvalue()


def _marks(page: str, mark: str) -> tuple[Mark, ...]:
    """Return the marked lines; a comment that stands above its key is told with the key."""
    lines = page.splitlines()
    marks = []
    for number, line in enumerate(lines):
        # Three blanks behind the mark of a comment: part of a signal that is commented out.
        if f"# {mark}" not in line or line.startswith("#   "):
            continue
        place, text = number, line
        if line.lstrip().startswith("#"):
            indent = line[: len(line) - len(line.lstrip())]
            place = next(n for n in range(number, len(lines)) if not lines[n].lstrip().startswith("#"))
            if lines[place].strip() and lines[place].startswith(indent):
                comment = " ".join(each.strip(" #") for each in lines[number:place])
                text = f"{lines[place]} # {comment}"
            else:
                place = number
        marks.append(Mark(place + 1, " ".join(text.split())))
    return tuple(marks)


def _no_recordings(folder: Path, left_out: Sequence[LeftOut]) -> StudyError:
    reasons = "; ".join(f"{one.file}: {one.reason}" for one in left_out[:5]) or "nothing of the kind"
    remedy = "Put the recordings there, or export them in one of these formats."
    return _refusal(folder, reasons, f"recordings, as {', '.join(SUFFIXES)}", remedy)


def _refusal(folder: Path, found: str, allowed: str, remedy: str) -> StudyError:
    return StudyError((Problem(str(folder), "", "folder", found, allowed, remedy),))
