"""Check a study against what its raw files say of themselves, before any sample is read."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

from bandcairn.errors import Problem, UnknownUnitError
from bandcairn.study.aliases import labels_for
from bandcairn.study.faults import STUDY_FILE, Fault, listed, suggestion
from bandcairn.study.filter_checks import reach_s
from bandcairn.study.models import AnnotationSegments
from bandcairn.study.signal_checks import check_nyquist
from bandcairn.units import KNOWN_UNITS, microvolts_per

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

    from bandcairn.signal import ChannelFacts, FileFacts
    from bandcairn.study.description import LoadedStudy
    from bandcairn.study.models import AnySignal, Load
    from bandcairn.study.tables import RecordingRow, SegmentRow

_OWN_UNITS = ("EDF", "BDF")  # formats with a unit for each channel, which may be blank
_TABLES = ("delimited", "Parquet")
_SAME = 1e-9  # relative: a declared decimal rate and the exact fraction of a file differ by rounding alone
_SLACK_S = 1e-6  # a stretch may end this much beyond the last sample: tables are written with rounded times


@dataclass(frozen=True, slots=True)
class _Case:
    """One signal in one recording; `meant` holds what the file has for each of its channels: one if all is well."""

    study: LoadedStudy
    row: RecordingRow
    name: str
    signal: AnySignal
    load: Load
    facts: FileFacts
    segments: tuple[SegmentRow, ...]
    meant: tuple[tuple[ChannelFacts, ...], ...]

    def channels(self) -> tuple[ChannelFacts, ...]:
        """Return the channels of the signal that the file holds, in the order of the signal."""
        return tuple(meant[0] for meant in self.meant if meant)

    def rate_hz(self, channel: ChannelFacts) -> float | None:
        """Return the rate of a channel: the file's own, else the declared one."""
        return self.load.rate_hz if channel.rate_hz is None else float(channel.rate_hz)

    def refuse(self, *path: str | int, found: str, allowed: str, remedy: str) -> Problem:
        """Return a problem of the raw file, with the key of study.yaml that it does not fit."""
        fault = Fault(("signals", self.name, *path), found, allowed, remedy)
        placed = fault.placed(self.study.lines)
        where = f"recording {self.row.recording}"
        remedy = f"{remedy} ({STUDY_FILE}, {placed.where})"
        return Problem(self.row.file, where, placed.field, found, allowed, remedy)


def check_facts(study: LoadedStudy, facts: Mapping[str, FileFacts]) -> tuple[Problem, ...]:
    """Check a study against its files.

    Parameters
    ----------
    study : LoadedStudy
        The study.
    facts : Mapping of str to FileFacts
        By recording; recordings whose file cannot be read are absent.

    Returns
    -------
    tuple of Problem
        Every problem, by signal and in the order of the recordings table; empty where all fits.
    """
    problems: list[Problem] = []
    segments = _by_recording(study.segments)
    rows = [row for row in study.recordings if row.recording in facts]
    for row in rows:
        problems += _check_stretch(study, row, facts[row.recording], segments.get(row.recording, ()))
    for name in study.description.signals:
        cases = list(_cases(study, rows, facts, segments, name))
        problems += _check_cases(cases)
        problems += _check_common_rate(cases)
        problems += _check_segments_declared(cases)
    problems += _check_annotations(study, facts)
    problems += _check_events(study, facts)
    return tuple(dict.fromkeys(problems))


def _cases(
    study: LoadedStudy,
    rows: list[RecordingRow],
    facts: Mapping[str, FileFacts],
    segments: Mapping[str, tuple[SegmentRow, ...]],
    name: str,
) -> Iterator[_Case]:
    """Yield a signal in every recording. Files built alike share one tuple of channels, which is searched once."""
    signal = study.description.signals[name]
    load = study.description.load_of(signal)
    aliases = study.description.aliases or {}
    known: dict[int, tuple[tuple[ChannelFacts, ...], ...]] = {}
    for row in rows:
        file = facts[row.recording]
        if id(file.channels) not in known:
            known[id(file.channels)] = _meant(signal.channels, file.channels, aliases)
        meant = known[id(file.channels)]
        yield _Case(study, row, name, signal, load, file, segments.get(row.recording, ()), meant)


def _meant(
    names: tuple[str, ...], channels: tuple[ChannelFacts, ...], aliases: Mapping[str, tuple[str, ...]]
) -> tuple[tuple[ChannelFacts, ...], ...]:
    """Return the channels of a file that mean each of the names."""
    by_label: dict[str, tuple[ChannelFacts, ...]] = {}
    for channel in channels:
        by_label[channel.label] = (*by_label.get(channel.label, ()), channel)
    return tuple(
        tuple(channel for label in labels_for(name, tuple(by_label), aliases) for channel in by_label[label])
        for name in names
    )


def _by_recording(segments: tuple[SegmentRow, ...]) -> dict[str, tuple[SegmentRow, ...]]:
    grouped: dict[str, list[SegmentRow]] = {}
    for segment in segments:
        grouped.setdefault(segment.recording, []).append(segment)
    return {recording: tuple(rows) for recording, rows in grouped.items()}


def _check_cases(cases: list[_Case]) -> Iterator[Problem]:
    """Yield the faults of each recording; of files built alike and used alike, a sound one speaks for the others."""
    sound = set()
    for case in cases:
        segments = tuple((row.segment, row.start_s, row.stop_s) for row in case.segments)
        alike = case.facts, case.row.start_s, case.row.stop_s, segments
        if alike not in sound:
            found = tuple(_check_case(case))
            yield from found
            if not found:
                sound.add(alike)


def _check_case(case: _Case) -> Iterator[Problem]:
    yield from _check_channels(case)
    yield from _check_rates(case)
    yield from _check_units(case)
    yield from _check_missing(case)
    yield from _check_epoch(case)
    yield from _check_fir_length(case)


def _check_channels(case: _Case) -> Iterator[Problem]:
    labels = [channel.label for channel in case.facts.channels]
    for index, (wanted, meant) in enumerate(zip(case.signal.channels, case.meant, strict=True)):
        found = tuple(channel.label for channel in meant)
        if not found and wanted in case.facts.details.left_out:
            told = {
                "found": f"{wanted}, which holds annotations or triggers",
                "allowed": "a channel of voltages",
            }
            yield case.refuse("channels", index, **told, remedy="Correct the name.")
        elif not found:
            remedy = suggestion(
                wanted, labels, "Correct the name, explain it in aliases, or leave the recording out."
            )
            allowed = f"a channel of the file: {listed(labels)}"
            yield case.refuse("channels", index, found=f"no channel {wanted}", allowed=allowed, remedy=remedy)
        elif len(found) > 1 and len(set(found)) == 1:
            told = {"found": f"{len(found)} channels named {found[0]}", "allowed": "each channel once"}
            remedy = "Rename one in a copy of the file: which is meant cannot be told."
            yield case.refuse("channels", index, **told, remedy=remedy)
        elif len(found) > 1:
            told = {"found": f"{listed(found)} for {wanted}", "allowed": "one of its aliases in a file"}
            yield case.refuse("channels", index, **told, remedy="Delete the alias that is not meant.")


def _check_rates(case: _Case) -> Iterator[Problem]:
    channels = case.channels()
    unknown = [channel.label for channel in channels if case.rate_hz(channel) is None]
    if unknown:
        remedy = "Declare load: {rate_hz: ...}, or give the file a time_s column."
        found = f"no rate for {listed(unknown)}"
        yield case.refuse("load", "rate_hz", found=found, allowed="a sampling rate in Hz", remedy=remedy)
    yield from _check_declared_rate(case, channels)
    rates = {channel.label: rate for channel in channels if (rate := case.rate_hz(channel)) is not None}
    if len(set(rates.values())) > 1:
        found = listed(f"{label} at {rate:g} Hz" for label, rate in rates.items())
        remedy = "Make two signals of them, one for each rate."
        yield case.refuse("channels", found=found, allowed="one rate a signal", remedy=remedy)
    elif rates:
        yield from _check_rate(case, next(iter(rates.values())))


def _check_declared_rate(case: _Case, channels: tuple[ChannelFacts, ...]) -> Iterator[Problem]:
    """Refuse a declared rate that a delimited file's clock contradicts; other formats need no declaration."""
    declared = case.load.rate_hz
    own_rates = case.facts.details.format in _OWN_UNITS
    delimited = [channel for channel in channels if channel.unit is None and not own_rates]
    own = {float(channel.rate_hz) for channel in delimited if channel.rate_hz is not None}
    other = [rate for rate in sorted(own) if declared and not math.isclose(rate, declared, rel_tol=_SAME)]
    if declared is not None and other:
        found = f"{declared:g} Hz declared, but the file states {listed(f'{rate:g} Hz' for rate in other)}"
        remedy = "Delete load.rate_hz: the file's time_s column tells its rate."
        yield case.refuse("load", "rate_hz", found=found, allowed="the rate of the file", remedy=remedy)


def _check_rate(case: _Case, rate_hz: float) -> Iterator[Problem]:
    """Yield what the one rate of a signal does not allow."""
    resample = case.signal.resample
    if resample is None:
        mains_hz, origin = case.study.description.mains_hz, f"of the file, {rate_hz:g} Hz"
        for fault in check_nyquist(case.name, case.signal, rate_hz, origin, mains_hz):
            told = {"found": fault.found, "allowed": fault.allowed, "remedy": fault.remedy}
            yield case.refuse(*fault.path[2:], **told)
    elif resample.rate_hz > rate_hz * (1 + _SAME):
        remedy = "Lower resample.rate_hz: a higher rate adds no information."
        found = f"{resample.rate_hz:g} Hz"
        allowed = f"at most the rate of the file, {rate_hz:g} Hz"
        yield case.refuse("resample", "rate_hz", found=found, allowed=allowed, remedy=remedy)


def _check_units(case: _Case) -> Iterator[Problem]:
    for channel in case.channels():
        unit = declared_unit(channel, case.facts, case.load) or channel.unit
        if _microvolts(unit) is None:
            found = f"{unit!r} for {channel.label}" if unit else f"no unit for {channel.label}"
            allowed = f"one of {listed(KNOWN_UNITS)}"
            remedy = _unit_remedy(case, channel)
            yield case.refuse("load", "unit", found=found, allowed=allowed, remedy=remedy)


def _unit_remedy(case: _Case, channel: ChannelFacts) -> str:
    if case.facts.details.format in _OWN_UNITS:
        return "If its unit is known, declare load: {unit: ..., unit_reason: ...}: a wrong scale is worse than no data."
    return "Declare load: {unit: ...}." if channel.unit is None else "Correct a copy of the file's header."


def declared_unit(channel: ChannelFacts, facts: FileFacts, load: Load) -> str | None:
    """Return the declared unit where it counts; None where the file's own word does.

    A table states none. EDF and BDF state one for each channel; where it is blank or unknown, a declaration counts
    only together with its reason.

    Parameters
    ----------
    channel : ChannelFacts
        The channel.
    facts : FileFacts
        Its file.
    load : Load
        What the study declares.
    """
    if facts.details.format in _OWN_UNITS:
        known = _microvolts(channel.unit) is not None
        return None if known or load.unit_reason is None else load.unit
    return load.unit if channel.unit is None else None


def _check_missing(case: _Case) -> Iterator[Problem]:
    """Refuse a clock with gaps in a table, unless they are declared."""
    gaps = case.facts.gaps
    if case.facts.details.format in _TABLES and gaps and case.load.missing != "gap":
        found = f"{len(gaps)} gaps in time_s, the first from {float(gaps[0].start_s):g} to {float(gaps[0].stop_s):g} s"
        remedy = "Declare load: {missing: gap}, or cut the recording."
        yield case.refuse("load", "missing", found=found, allowed="a regular clock", remedy=remedy)


def _microvolts(unit: str | None) -> float | None:
    try:
        return microvolts_per(unit or "")
    except UnknownUnitError:
        return None


def _check_stretch(
    study: LoadedStudy, row: RecordingRow, facts: FileFacts, segments: tuple[SegmentRow, ...]
) -> Iterator[Problem]:
    """Yield the times of the tables that lie outside the file, or outside the stretch used of it."""
    duration_s = _duration_s(study, facts)
    if duration_s is None:
        return
    for column, value in (("start_s", row.start_s), ("stop_s", row.stop_s)):
        if value is not None and value > duration_s + _SLACK_S:
            where = f"row {row.row}, column {column}"
            allowed = f"at most {duration_s:g} s, the length of {row.file}"
            yield Problem(
                study.description.recordings, where, column, f"{value:g} s", allowed, "Correct the cell."
            )
    first_s = row.start_s or 0.0
    last_s = duration_s if row.stop_s is None else min(row.stop_s, duration_s)
    for segment in segments:
        outside = segment.start_s < first_s - _SLACK_S or segment.stop_s > last_s + _SLACK_S
        if outside:
            column = "stop_s" if segment.stop_s > last_s + _SLACK_S else "start_s"
            where = f"row {segment.row}, column {column}"
            found = f"{segment.segment} from {segment.start_s:g} to {segment.stop_s:g} s"
            allowed = f"within what is used of {row.file}, {first_s:g} to {last_s:g} s"
            remedy = "Correct the segment, or the recording's start_s and stop_s."
            yield Problem(str(study.segments_file), where, column, found, allowed, remedy)


def _duration_s(study: LoadedStudy, facts: FileFacts) -> float | None:
    """Return the length of a file, gaps included; by its longest channel where the rate is declared; else None."""
    if facts.duration_s is not None:
        return float(facts.duration_s)
    durations = []
    for channel in facts.channels:
        declared = study.description.load.rate_hz
        rate_hz = declared if channel.rate_hz is None else float(channel.rate_hz)
        if rate_hz:
            durations.append(channel.n_samples / rate_hz)
    return max(durations, default=None)


def _check_epoch(case: _Case) -> Iterator[Problem]:
    longest_s = max(_stretches_s(case), default=None)
    length_s, key = case.signal.epoch.window_s, case.signal.epoch.window_key
    if longest_s is not None and length_s > longest_s + _SLACK_S:
        allowed = f"at most {longest_s:g} s, the longest stretch of this recording"
        remedy = "Shorten the epoch, or leave the recording out."
        yield case.refuse("epoch", key, found=f"{length_s:g} s", allowed=allowed, remedy=remedy)


def _check_fir_length(case: _Case) -> Iterator[Problem]:
    """Refuse a zero-phase fir whose taps reach further to either side than the recording is long."""
    length_s = _used_s(case)
    for index, stage in enumerate(case.signal.filter):
        needed_s = reach_s(stage) if stage.phase == "zero" else 0.0
        if length_s is not None and needed_s >= length_s:
            found = f"{stage.transition_hz:g} Hz, for which the taps reach {needed_s:g} s to either side"
            allowed = f"less than the {length_s:g} s of this recording"
            remedy = "Widen the transition, or leave the recording out."
            yield case.refuse("filter", index, "transition_hz", found=found, allowed=allowed, remedy=remedy)


def _used_s(case: _Case) -> float | None:
    """Return the longest gap-free stretch of what is used of a recording; None where the rate is unknown."""
    used = _used(case)
    return None if used is None else _longest_s(case, *used)


def _used(case: _Case) -> tuple[float, float] | None:
    """Return start and stop of what is used of a recording; None where the rate is unknown."""
    durations = [c.n_samples / rate for c in case.channels() if (rate := case.rate_hz(c))]
    if not durations:
        return None
    if case.facts.gaps and case.facts.duration_s is not None:
        durations = [float(case.facts.duration_s)]
    stop_s = min(*durations, math.inf if case.row.stop_s is None else case.row.stop_s)
    return case.row.start_s or 0.0, stop_s


def _longest_s(case: _Case, start_s: float, stop_s: float) -> float:
    return max((stop - start for start, stop in case.facts.stretches(start_s, stop_s)), default=0.0)


def _stretches_s(case: _Case) -> list[float]:
    """Return the longest gap-free part of each stretch that a signal uses; empty where the rate is unknown."""
    whole = _used(case)
    if whole is None:
        return []
    segments = _segments(case)
    if segments and case.signal.segments != ():
        return [
            _longest_s(case, start_s, stop_s)
            for segment, start_s, stop_s in segments
            if case.signal.segments is None or segment in case.signal.segments
        ]
    return [_longest_s(case, *whole)]


def _segments(case: _Case) -> list[tuple[str, float, float]]:
    """Return name, start and stop of each segment that a recording declares."""
    declared = case.study.description.segments
    if isinstance(declared, AnnotationSegments):
        return [
            (note.text, note.onset_s, note.onset_s + note.duration_s)
            for note in case.facts.annotations
            if note.text in declared.annotations and note.duration_s > 0
        ]
    return [(row.segment, row.start_s, row.stop_s) for row in case.segments]


def _check_segments_declared(cases: list[_Case]) -> Iterator[Problem]:
    """Yield the recordings without a segment that a signal uses: else the whole recording would stand for it."""
    declared = [{name for name, _, _ in _segments(case)} for case in cases]
    some_are = any(declared)
    for case, present in zip(cases, declared, strict=True):
        wanted = case.signal.segments
        if wanted is None and some_are and not present:
            remedy = "Declare its segments, or write segments: [] in the signal to use whole recordings."
            allowed = "segments in every recording, or in none"
            yield case.refuse("segments", found="no segment", allowed=allowed, remedy=remedy)
        for name in wanted or ():
            if name not in present:
                remedy = "Declare it for this recording, or leave the recording out of the table."
                allowed = "every segment that the signal names"
                yield case.refuse("segments", found=f"no segment {name}", allowed=allowed, remedy=remedy)


def _check_common_rate(cases: list[_Case]) -> Iterator[Problem]:
    """Yield a fault where the recordings of a signal have several rates and nothing makes them one."""
    rates: dict[float, str] = {}
    for case in cases:
        for channel in case.channels()[:1]:
            rate_hz = case.rate_hz(channel)
            if rate_hz is not None:
                rates.setdefault(rate_hz, case.row.recording)
    if len(rates) > 1 and cases[0].signal.resample is None:
        found = listed(f"{rate:g} Hz ({recording})" for rate, recording in sorted(rates.items()))
        remedy = f"Add resample: {{rate_hz: {min(rates):g}}} or less."
        path = ("signals", cases[0].name, "resample")
        fault = Fault(path, found, "one rate for all recordings, hence one frequency grid", remedy)
        yield fault.placed(cases[0].study.lines)


def _check_annotations(study: LoadedStudy, facts: Mapping[str, FileFacts]) -> Iterator[Problem]:
    """Yield the declared annotation texts that no file holds, or that mark no stretch."""
    declared = study.description.segments
    if not isinstance(declared, AnnotationSegments) or not facts:
        return
    notes = [note for file in facts.values() for note in file.annotations]
    texts = tuple(dict.fromkeys(note.text for note in notes))
    for index, text in enumerate(declared.annotations):
        path = ("segments", "annotations", index)
        if text not in texts:
            allowed = f"a text of the files' annotations: {listed(texts[:20])}"
            remedy = suggestion(text, texts, "Correct the text.")
            yield Fault(path, text, allowed, remedy).placed(study.lines)
        elif not any(note.duration_s > 0 for note in notes if note.text == text):
            found = f"{text}, which lasts 0 s wherever it stands"
            remedy = "Declare the stretches in a segments table."
            yield Fault(path, found, "an annotation with a duration", remedy).placed(study.lines)


def _check_events(study: LoadedStudy, facts: Mapping[str, FileFacts]) -> Iterator[Problem]:
    """Yield the events that epochs are to lie about and no file holds; a table of events has been checked already."""
    if study.events_file is not None or not facts:
        return
    texts = tuple(dict.fromkeys(note.text for file in facts.values() for note in file.annotations))
    for name, signal in study.description.signals.items():
        for event in signal.epoch.events:
            if event not in texts:
                allowed = f"a text of the files' annotations: {listed(texts[:20])}"
                remedy = suggestion(event, texts, "Correct the text, or write the events into events.csv.")
                yield Fault(("signals", name, "epoch", "around"), event, allowed, remedy).placed(study.lines)
