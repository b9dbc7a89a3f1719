"""What is marked in recordings beside their segments: events, and what someone has decided to leave out."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from bandcairn.study.sheet import (
    Sheet,
    read_sheet,
    refuse_blank,
    refuse_empty_stretch,
    refuse_other_columns,
    refuse_repeated,
    seconds,
)

if TYPE_CHECKING:
    from pathlib import Path

    from bandcairn.errors import Problem

_EVENT_COLUMNS = ("recording", "onset_s", "event")
_DECISION_COLUMNS = (
    "recording",
    "signal",
    "channel",
    "start_s",
    "stop_s",
    "decision",
    "who",
    "when",
    "why",
)
_DECISIONS = ("exclude",)


@dataclass(frozen=True, slots=True)
class EventRow:
    """One row of the events table: a moment, in seconds from the start of the file."""

    recording: str
    onset_s: float
    event: str
    row: int


@dataclass(frozen=True, slots=True)
class DecisionRow:
    """One row of the decisions table: a stretch or a channel that is left out.

    Attributes
    ----------
    recording : str
        Of which recording.
    signal, channel : str
        Of which signal and channel, as the file or the signal calls it; empty for all.
    start_s, stop_s : float or None
        The stretch, in seconds from the start of the file; None for both: the whole recording.
    who, when, why : str
        Whose decision it is: reported with what it leaves out, and no part of any number.
    row : int
        Line of the file; the header is 1.
    """

    recording: str
    signal: str
    channel: str
    start_s: float | None
    stop_s: float | None
    who: str
    when: str
    why: str
    row: int

    @property
    def is_stretch(self) -> bool:
        """Whether it leaves out a part of the recording's time."""
        return self.start_s is not None

    @property
    def told(self) -> str:
        """The reason in words."""
        when = f"{self.start_s:g} to {self.stop_s:g} s, " if self.is_stretch else ""
        return f"by decision: {when}{self.why} ({self.who}, {self.when})"


@dataclass(frozen=True, slots=True)
class EventsTable:
    """The table of events: rows without fault, and what is wrong with the others."""

    rows: tuple[EventRow, ...] = ()
    problems: tuple[Problem, ...] = ()


@dataclass(frozen=True, slots=True)
class DecisionsTable:
    """The table of decisions: rows without fault, and what is wrong with the others."""

    rows: tuple[DecisionRow, ...] = ()
    problems: tuple[Problem, ...] = ()


def read_events(path: Path, name: str) -> EventsTable:
    """Read the table of events.

    Parameters
    ----------
    path : Path
        The file; ``.csv`` is split at commas, ``.tsv`` at tabs, both UTF-8.
    name : str
        The path as people know it, for the problems.

    Returns
    -------
    EventsTable
        Faulty rows are left out of `rows`, and each fault is in `problems`.
    """
    sheet = read_sheet(path, name, _EVENT_COLUMNS)
    rows = [row for line, cells in sheet.rows if (row := _event(sheet, line, cells))]
    keys = ((row.row, f"{row.event} at {row.onset_s:g} s of {row.recording}") for row in rows)
    refuse_repeated(sheet, keys, "onset_s", "Delete one of the two.")
    return EventsTable(tuple(rows), tuple(sheet.problems))


def read_decisions(path: Path, name: str) -> DecisionsTable:
    """Read the table of decisions; parameters and result as in `read_events`."""
    sheet = read_sheet(path, name, _DECISION_COLUMNS)
    refuse_other_columns(sheet, _DECISION_COLUMNS)
    rows = [row for line, cells in sheet.rows if (row := _decision(sheet, line, cells))]
    keys = (
        (row.row, f"{row.signal}/{row.channel} from {row.start_s} to {row.stop_s} of {row.recording}")
        for row in rows
    )
    refuse_repeated(sheet, keys, "recording", "Delete one of the two.")
    return DecisionsTable(tuple(rows), tuple(sheet.problems))


def _event(sheet: Sheet, line: int, cells: dict[str, str]) -> EventRow | None:
    """Return one event, or None after noting what is wrong with it."""
    before = len(sheet.problems)
    for column in _EVENT_COLUMNS:
        refuse_blank(sheet, line, column, cells[column])
    onset_s = seconds(sheet, line, "onset_s", cells["onset_s"])
    if len(sheet.problems) > before or onset_s is None:
        return None
    return EventRow(cells["recording"], onset_s, cells["event"], line)


def _decision(sheet: Sheet, line: int, cells: dict[str, str]) -> DecisionRow | None:
    """Return one decision, or None after noting what is wrong with it."""
    before = len(sheet.problems)
    for column in ("recording", "decision", "who", "when", "why"):
        refuse_blank(sheet, line, column, cells[column])
    if cells["decision"] and cells["decision"] not in _DECISIONS:
        remedy = "Write exclude, or delete the row: what is not left out is used."
        sheet.refuse("decision", repr(cells["decision"]), "exclude", remedy, row=line)
    start_s = seconds(sheet, line, "start_s", cells["start_s"])
    stop_s = seconds(sheet, line, "stop_s", cells["stop_s"])
    _refuse_half_a_stretch(sheet, line, cells)
    refuse_empty_stretch(sheet, line, start_s, stop_s)
    if len(sheet.problems) > before:
        return None
    place = cells["recording"], cells["signal"], cells["channel"], start_s, stop_s
    return DecisionRow(*place, cells["who"], cells["when"], cells["why"], line)


def _refuse_half_a_stretch(sheet: Sheet, line: int, cells: dict[str, str]) -> None:
    for column, other in (("start_s", "stop_s"), ("stop_s", "start_s")):
        if cells[other] and not cells[column]:
            remedy = f"Write {column}, or leave both blank: the whole recording."
            sheet.refuse(column, "a blank cell", f"a value beside {other}", remedy, row=line)
