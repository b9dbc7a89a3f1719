"""What events and decisions are to one signal of one recording: the part of them that enters its recipes."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from bandcairn.study.reference_blocks import BipolarPairs

if TYPE_CHECKING:
    from collections.abc import Iterable

    from bandcairn.nodes.survey import RawContent
    from bandcairn.study.description import LoadedStudy
    from bandcairn.study.marks import DecisionRow
    from bandcairn.study.models import EcgSignal, EegSignal, EmgSignal

    SignalDescription = EegSignal | EcgSignal | EmgSignal


# Of a channel without value: the words of the decision are put in its place where they are printed.
DECIDED = "left out by decision"


def decisions_by_recording(study: LoadedStudy) -> dict[str, tuple[DecisionRow, ...]]:
    """Return the decisions of each recording, in the order of the table."""
    grouped: dict[str, tuple[DecisionRow, ...]] = {}
    for decision in study.decisions:
        grouped[decision.recording] = (*grouped.get(decision.recording, ()), decision)
    return grouped


def events_by_recording(study: LoadedStudy) -> dict[str, tuple[tuple[str, float], ...]] | None:
    """Return name and onset of each recording's events; None where annotations are the events."""
    if study.events_file is None:
        return None
    grouped: dict[str, tuple[tuple[str, float], ...]] = {}
    for row in study.events:
        grouped[row.recording] = (*grouped.get(row.recording, ()), (row.event, row.onset_s))
    return grouped


def onsets(
    wanted: Iterable[str], listed: Iterable[tuple[str, float]] | None, content: RawContent
) -> list[float]:
    """Return the times of the wanted events, each once, in order.

    Parameters
    ----------
    wanted : iterable of str
        Names of events.
    listed : iterable of (str, float) or None
        Name and onset by the table of events; None: the annotations of the file.
    content : RawContent
        What the raw file holds.
    """
    if listed is None:
        listed = ((note.text, note.onset_s) for note in content.facts.annotations)
    names = frozenset(wanted)
    return sorted({onset_s for name, onset_s in listed if name in names})


def touched_channels(decision: DecisionRow, name: str, signal: SignalDescription) -> tuple[str, ...]:
    """Return the channels of a signal that a decision leaves out.

    A channel takes with it the pairs it stands in, and as a named reference every channel measured against it. In an
    average it leaves the others in: `held_in_average` tells of it.

    Parameters
    ----------
    decision : DecisionRow
        The decision.
    name : str
        Name of the signal.
    signal : SignalDescription
        The signal.

    Returns
    -------
    tuple of str
        Measured channels; empty if it does not touch the signal.
    """
    measured = signal.measured_channels
    if decision.signal not in ("", name):
        return ()
    if not decision.channel:
        return measured
    if isinstance(signal.reference, tuple) and decision.channel in signal.reference:
        return measured
    pairs = signal.reference.pairs if isinstance(signal.reference, BipolarPairs) else {}
    return tuple(
        channel
        for channel in measured
        if decision.channel == channel or decision.channel in pairs.get(channel, ())
    )


def recipe_of_decisions(
    decisions: Iterable[DecisionRow], name: str, signal: SignalDescription
) -> dict[str, Any]:
    """Return what decisions leave out of a signal, for the recipe of its epochs; empty if nothing.

    Whose decisions they are and why stays out: the words may be mended without computing anything anew.
    """
    channels: set[str] = set()
    stretches: set[tuple[float, float, tuple[str, ...]]] = set()
    average: set[str] = set()
    for decision in decisions:
        touched = touched_channels(decision, name, signal)
        if decision.start_s is None or decision.stop_s is None:
            channels |= set(touched)
            if decision.channel and touched and signal.reference == "average":
                average.add(decision.channel)
        elif touched:
            stretches.add((decision.start_s, decision.stop_s, touched))
    recipe = {"channels": sorted(channels), "stretches": sorted(stretches), "in_average": sorted(average)}
    return {part: values for part, values in recipe.items() if values}
