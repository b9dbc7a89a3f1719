"""The tables of events and decisions of a study: which are used, and whether they fit the study."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from bandcairn.errors import Problem
from bandcairn.study.faults import Fault, listed, suggestion
from bandcairn.study.marks import DecisionsTable, EventsTable, read_decisions, read_events
from bandcairn.study.sheet import lies_inside

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Mapping
    from pathlib import Path

    from bandcairn.study.marks import DecisionRow
    from bandcairn.study.models import AnySignal
    from bandcairn.study.validation import Understood

_EVENTS = "events.csv"
_DECISIONS = "decisions.csv"


@dataclass(frozen=True, slots=True)
class MarkTables:
    """The two tables as read, their names (None where there is none), and what study.yaml says wrongly of them."""

    events_file: str | None
    events: EventsTable
    decisions_file: str | None
    decisions: DecisionsTable
    faults: tuple[Fault, ...]

    @classmethod
    def read(cls, folder: Path, content: Mapping[str, Any]) -> MarkTables:
        """Read the tables that study.yaml names, or those of the usual names.

        An ``events.csv`` that nobody names is read only if epochs lie about events.
        """
        events_file = _file(folder, content.get("events"), _EVENTS if _asks_for_events(content) else None)
        decisions_file = _file(folder, content.get("decisions"), _DECISIONS)
        faults = tuple(
            Fault((key,), name, "a path inside the study folder", "Keep the table inside the study folder.")
            for key, name in (("events", events_file), ("decisions", decisions_file))
            if name is not None and not lies_inside(name)
        )
        events, decisions = EventsTable(), DecisionsTable()
        if events_file is not None and lies_inside(events_file):
            events = read_events(folder / events_file, events_file)
        if decisions_file is not None and lies_inside(decisions_file):
            decisions = read_decisions(folder / decisions_file, decisions_file)
        return cls(events_file, events, decisions_file, decisions, faults)

    def problems(
        self, recordings_file: str, recordings: Iterable[str], understood: Understood
    ) -> Iterator[Problem | Fault]:
        """Yield what is wrong within the tables, and what does not fit the recordings and signals.

        Parameters
        ----------
        recordings_file : str
            Name of the table of recordings.
        recordings : iterable of str
            Names of the recordings; none if that table could not be read.
        understood : Understood
            The signals, as far as they could be understood.
        """
        yield from (*self.events.problems, *self.decisions.problems)
        known = frozenset(recordings)
        for file, rows in ((self.events_file, self.events.rows), (self.decisions_file, self.decisions.rows)):
            for row in rows if known else ():
                if row.recording not in known:
                    remedy = suggestion(row.recording, known, "Add the recording, or delete the row.")
                    allowed = f"a recording of {recordings_file}"
                    yield _problem(file, row.row, "recording", row.recording, allowed, remedy)
        for decision in self.decisions.rows:
            yield from self._unknown_channel(decision, understood)
        if self.events_file is not None and not self.events.problems:
            yield from self._absent_events(understood.signals)

    def _unknown_channel(self, decision: DecisionRow, understood: Understood) -> Iterator[Problem]:
        """Yield a signal that is not declared, or a channel that the signal, or else every one, lacks."""
        declared = understood.declared_signals
        if decision.signal and decision.signal not in declared:
            remedy = suggestion(decision.signal, declared, "Correct the name.")
            allowed = f"a declared signal: {listed(declared)}, or blank for all"
            yield _problem(self.decisions_file, decision.row, "signal", decision.signal, allowed, remedy)
            return
        meant = (decision.signal,) if decision.signal else declared
        signals = [understood.signals[name] for name in meant if name in understood.signals]
        if not decision.channel or len(signals) < len(meant):
            return
        names = [name for signal in signals for name in (*signal.channels, *signal.measured_channels)]
        channels = tuple(dict.fromkeys(names))
        if decision.channel not in channels:
            remedy = suggestion(decision.channel, channels, "Correct the name.")
            allowed = f"a channel: {listed(channels)}, or blank for all"
            yield _problem(self.decisions_file, decision.row, "channel", decision.channel, allowed, remedy)

    def _absent_events(self, signals: Mapping[str, AnySignal]) -> Iterator[Fault]:
        """Yield the events that epochs are to lie about and no row of the table names."""
        known = tuple(dict.fromkeys(row.event for row in self.events.rows))
        for name, signal in signals.items():
            for event in signal.epoch.events:
                if event not in known:
                    allowed = f"an event of {self.events_file}: {listed(known[:20])}"
                    remedy = suggestion(event, known, "Correct the name.")
                    yield Fault(("signals", name, "epoch", "around"), event, allowed, remedy)


def _problem(file: str | None, row: int, column: str, found: str, allowed: str, remedy: str) -> Problem:  # noqa: PLR0917 - the parts of a sentence
    return Problem(str(file), f"row {row}, column {column}", column, found, allowed, remedy)


def _file(folder: Path, declared: object, usual: str | None) -> str | None:
    if declared is not None:
        return declared if isinstance(declared, str) and declared else None
    return usual if usual is not None and (folder / usual).is_file() else None


def _asks_for_events(content: Mapping[str, Any]) -> bool:
    signals = content.get("signals")
    epochs = [
        signal.get("epoch")
        for signal in (signals.values() if isinstance(signals, dict) else ())
        if isinstance(signal, dict)
    ]
    return any(isinstance(epoch, dict) and "around" in epoch for epoch in epochs)
