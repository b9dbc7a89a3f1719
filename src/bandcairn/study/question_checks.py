"""Checks of the questions that need no file: what they name must exist, and people must stand behind it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from bandcairn.errors import Problem
from bandcairn.study.catalogue import NEEDS_LF_AND_HF, features_of, find_feature
from bandcairn.study.faults import Fault, listed, suggestion
from bandcairn.study.models import EmgSignal

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

    from bandcairn.study.catalogue import Feature
    from bandcairn.study.faults import Path
    from bandcairn.study.models import AnySignal, Question

SEGMENT = "segment"  # the word that compares two segments of one recording instead of a design column
_LOGARITHMS = ("log10", "ln")


@dataclass(frozen=True, slots=True)
class Design:
    """What the tables say of people and levels.

    Attributes
    ----------
    file : str
        Name of the recordings table.
    columns : tuple of str
        Design columns; empty where the table could not be read.
    cells : tuple of (int, Mapping)
        Rows as text by column, with their line.
    segments : tuple of str
        Segment names of all recordings together.
    segments_of : Mapping of str to frozenset
        Segment names by recording; empty where only the files know them.
    """

    file: str
    columns: tuple[str, ...]
    cells: tuple[tuple[int, Mapping[str, str]], ...]
    segments: tuple[str, ...]
    segments_of: Mapping[str, frozenset[str]]


def check_names_unique(questions: Mapping[int, Question]) -> Iterator[Fault]:
    """Yield each question whose name an earlier one has."""
    first: dict[str, int] = {}
    for index, question in questions.items():
        if first.setdefault(question.name, index) != index:
            found = f"{question.name} again (first in questions[{first[question.name]}])"
            yield Fault(("questions", index, "name"), found, "each name once", "Rename one of them.")


def check_families(questions: Mapping[int, Question]) -> Iterator[Fault]:
    """Yield each question that is adjusted otherwise than the first of its family: they are adjusted together."""
    first: dict[str, int] = {}
    for index, question in questions.items():
        opening = first.setdefault(question.family or question.name, index)
        wanted = questions[opening].adjustment or "holm"
        found = question.adjustment or "holm"
        if found != wanted:
            allowed = f"{wanted}, as in questions[{opening}] of the same family"
            remedy = "Write the same adjustment in every question of the family, or part the family."
            yield Fault(("questions", index, "adjustment"), found, allowed, remedy)


def check_signal_named(index: int, question: Question, declared: tuple[str, ...]) -> Iterator[Fault]:
    """Yield a fault where the question names a signal that is not declared."""
    if question.signal not in declared:
        remedy = suggestion(question.signal, declared, "Declare the signal, or choose another.")
        path = ("questions", index, "signal")
        yield Fault(path, question.signal, f"a declared signal: {listed(declared)}", remedy)


def check_feature(index: int, question: Question, signal: AnySignal) -> Iterator[Fault]:
    """Yield what does not fit between a question and its signal.

    Parameters
    ----------
    index : int
        Position of the question.
    question : Question
        The question.
    signal : AnySignal
        The signal it names.

    Yields
    ------
    Fault
    """
    path: Path = ("questions", index)
    for position, channel in enumerate(question.channels if not isinstance(question.channels, str) else ()):
        if channel not in signal.measured_channels:
            known = signal.measured_channels
            remedy = suggestion(channel, known, "Add it to the signal, or delete it here.")
            allowed = f"a channel of {question.signal}: {listed(known)}"
            yield Fault((*path, "channels", position), channel, allowed, remedy)
    feature = find_feature(signal.kind, question.feature)
    if feature is None:
        names = tuple(each.name for each in features_of(signal.kind))
        remedy = suggestion(question.feature, names, "Choose one of them.")
        yield Fault(
            (*path, "feature"), question.feature, f"a feature of {signal.kind}: {listed(names)}", remedy
        )
        return
    yield from _check_band(path, question, feature, signal)
    yield from _check_scale(path, question, feature)


def _check_band(path: Path, question: Question, feature: Feature, signal: AnySignal) -> Iterator[Fault]:
    bands = () if isinstance(signal, EmgSignal) else tuple(signal.features.bands_hz)
    band = question.band
    if feature.needs_band and band is None:
        allowed = f"a band of {question.signal}: {listed(bands)}"
        yield Fault((*path, "band"), "nothing", allowed, f"Add band: {feature.name} has one value a band.")
    elif feature.needs_band and band is not None and band not in bands:
        remedy = suggestion(band, bands, "Declare the band, or choose another.")
        yield Fault((*path, "band"), band, f"a band of {question.signal}: {listed(bands)}", remedy)
    elif not feature.needs_band and band is not None:
        yield Fault((*path, "band"), band, f"no band with {feature.name}", "Delete band, or change feature.")
    absent = [name for name in ("lf", "hf") if name not in bands]
    if feature.name in NEEDS_LF_AND_HF and absent:
        allowed = "bands named lf and hf"
        remedy = f"Declare {listed(absent)} in signals.{question.signal}.features.bands_hz."
        yield Fault((*path, "feature"), f"{feature.name} without {listed(absent)}", allowed, remedy)


def _check_scale(path: Path, question: Question, feature: Feature) -> Iterator[Fault]:
    if question.scale == "logit" and feature.values != "share":
        allowed = "logit only for values from 0 to 1"
        yield Fault((*path, "scale"), f"logit of {feature.name}", allowed, "Use identity, log10 or ln.")
    if question.scale in _LOGARITHMS and feature.values == "any":
        allowed = "a logarithm only for values that are never negative"
        yield Fault((*path, "scale"), f"{question.scale} of {feature.name}", allowed, "Use identity.")


def check_segment(index: int, question: Question, signal: AnySignal, design: Design) -> Iterator[Fault]:
    """Yield a fault where it is not plain which segment a question looks at.

    Parameters
    ----------
    index : int
        Position of the question.
    question : Question
        The question.
    signal : AnySignal
        The signal it names.
    design : Design
        The tables.

    Yields
    ------
    Fault
    """
    path: Path = ("questions", index)
    used = design.segments if signal.segments is None else signal.segments
    allowed = f"a segment of {question.signal}: {listed(used)}"
    if question.within == SEGMENT:
        if question.segment is not None:
            yield Fault((*path, "segment"), question.segment, "no segment with within: segment", "Delete it.")
        yield from _check_levels(path, question, used, allowed)
        return
    if question.segment is not None and question.segment not in used:
        remedy = suggestion(question.segment, used, "Choose a segment that the signal uses, or delete it.")
        yield Fault((*path, "segment"), question.segment, allowed, remedy)
    if question.segment is None and len(used) > 1:
        remedy = "Add segment, or compare two of them by within: segment."
        yield Fault((*path, "segment"), "nothing, though the signal uses several segments", allowed, remedy)


def check_design(index: int, question: Question, design: Design) -> Iterator[Fault | Problem]:
    """Yield what is wrong with the people and levels behind a question.

    Parameters
    ----------
    index : int
        Position of the question.
    question : Question
        The question.
    design : Design
        The tables.

    Yields
    ------
    Fault or Problem
        A fault of study.yaml, or a problem of the recordings table.
    """
    path: Path = ("questions", index)
    side = "within" if question.between is None else "between"
    column = question.within if question.between is None else question.between
    undecided = (question.within is None) == (question.between is None)
    if column is None or undecided or not design.cells:
        return
    if column == SEGMENT and side == "within":
        yield from _check_pairs(path, question, column, _segments_by_participant(design))
        return
    if column not in design.columns:
        remedy = suggestion(column, design.columns, f"Add the column to {design.file}, or name another.")
        yield Fault(
            (*path, side), column, f"a design column of {design.file}: {listed(design.columns)}", remedy
        )
        return
    levels = tuple(dict.fromkeys(row[column] for _, row in design.cells if row[column]))
    yield from _check_levels(path, question, levels, f"a level of {column}: {listed(levels)}")
    if not set(question.contrast) <= set(levels):
        return
    people = _levels_by_participant(design, column)
    if side == "within":
        yield from _check_pairs(path, question, column, people)
    else:
        yield from _check_groups(path, question, column, people)


def check_columns(questions: Mapping[int, Question], design: Design) -> Iterator[Problem]:
    """Yield the cells of compared columns that are blank, or differ within a participant of a group."""
    compared = [name for q in questions.values() for name in (q.within, q.between) if name in design.columns]
    for column in dict.fromkeys(name for name in compared if name is not None):
        for line, row in design.cells:
            if not row[column]:
                remedy = "Write the level, or a word of its own for recordings that are not compared."
                yield _cell(design.file, line, column, found="a blank cell", allowed="a level", remedy=remedy)
    groups = [q.between for q in questions.values() if q.between in design.columns]
    for column in dict.fromkeys(name for name in groups if name is not None):
        yield from _check_constant(column, design)


def _check_constant(column: str, design: Design) -> Iterator[Problem]:
    first: dict[str, tuple[int, str]] = {}
    for line, row in design.cells:
        participant, level = row["participant"], row[column]
        if not participant or not level:
            continue
        first_line, first_level = first.setdefault(participant, (line, level))
        if level != first_level:
            found = f"{level} for participant {participant}, who is {first_level} in row {first_line}"
            remedy = "Correct the cell, or compare within."
            allowed = f"one {column} a participant, for a question compares it between participants"
            yield _cell(design.file, line, column, found=found, allowed=allowed, remedy=remedy)


def _cell(file: str, line: int, column: str, *, found: str, allowed: str, remedy: str) -> Problem:
    return Problem(file, f"row {line}, column {column}", column, found, allowed, remedy)


def _check_levels(path: Path, question: Question, levels: tuple[str, ...], allowed: str) -> Iterator[Fault]:
    for position, level in enumerate(question.contrast):
        if level not in levels:
            remedy = suggestion(level, levels, "Choose one of them.")
            yield Fault((*path, "contrast", position), level, allowed, remedy)


def _levels_by_participant(design: Design, column: str) -> dict[str, frozenset[str]]:
    levels: dict[str, set[str]] = {}
    for _, row in design.cells:
        if row["participant"]:
            levels.setdefault(row["participant"], set()).add(row[column])
    return {participant: frozenset(found) for participant, found in levels.items()}


def _segments_by_participant(design: Design) -> dict[str, frozenset[str]]:
    """Return the segments each participant has; empty where only the files know."""
    people: dict[str, frozenset[str]] = {}
    for _, row in design.cells if design.segments_of else ():
        if row["participant"]:
            segments = design.segments_of.get(row["recording"], frozenset())
            people[row["participant"]] = people.get(row["participant"], frozenset()) | segments
    return people


def _check_pairs(
    path: Path, question: Question, column: str, people: Mapping[str, frozenset[str]]
) -> Iterator[Fault]:
    first, second = question.contrast
    both = [who for who, levels in people.items() if first in levels and second in levels]
    if not people or len(both) >= 2:
        return
    lacking = (_lacks(people, first, second), _lacks(people, second, first))
    found = f"{len(both)} with both; {'; '.join(text for text in lacking if text) or 'no others'}"
    allowed = f"at least 2 participants with both {first} and {second} in {column}"
    yield Fault((*path, "within"), found, allowed, "Add the recordings that lack, or compare between people.")


def _lacks(people: Mapping[str, frozenset[str]], absent: str, present: str) -> str:
    names = [who for who, levels in people.items() if present in levels and absent not in levels]
    return f"without {absent}: {listed(names)}" if names else ""


def _check_groups(
    path: Path, question: Question, column: str, people: Mapping[str, frozenset[str]]
) -> Iterator[Fault]:
    for position, level in enumerate(question.contrast):
        members = [who for who, levels in people.items() if level in levels]
        if len(members) < 2:
            found = f"{len(members)} in {column} {level}: {listed(members)}"
            remedy = "Add participants, or choose another level."
            yield Fault((*path, "contrast", position), found, "at least 2 participants a group", remedy)
