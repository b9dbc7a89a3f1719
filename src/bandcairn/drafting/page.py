"""The text of study.yaml: each choice with a short comment that says what it rests on."""

from __future__ import annotations

import math
import textwrap
from dataclasses import dataclass
from typing import TYPE_CHECKING

import yaml

from bandcairn.drafting.question import example_question

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Sequence

    from bandcairn.drafting.findings import Choice, Findings, FoundRecording
    from bandcairn.drafting.grouping import Group
    from bandcairn.drafting.settings import Settings

GUESS, BLANK = "guess: ", "FILL IN: "
_WIDTH = 110
_COMMENT_AT = 40
_SHORTEST_FOR_HF_S = 60  # Task Force of the ESC and NASPE (1996), Circulation 93, 1043-1065: about one minute


@dataclass(frozen=True, slots=True)
class Proposal:
    """A signal with its settings; commented out where the settings name a problem."""

    group: Group
    settings: Settings


def study_page(
    findings: Findings, recordings: Sequence[FoundRecording], proposals: Sequence[Proposal]
) -> str:
    """Write study.yaml.

    Parameters
    ----------
    findings : Findings
        What was found.
    recordings : sequence of FoundRecording
        Those of the study.
    proposals : sequence of Proposal
        Its signals.

    Returns
    -------
    str
        Ends with a line end.
    """
    used = [each for each in proposals if not each.settings.problem]
    lines = [
        *_head(findings, recordings),
        "",
        _line(f"study: {_scalar(findings.title.value)}", _told(findings.title)),
        *_tables(findings, recordings),
        _line(f"mains_hz: {findings.mains.value or ''}".rstrip(), _told(findings.mains)),
        *_load(findings),
        "",
        "signals:",
        *(
            []
            if used
            else [f"# {BLANK}no channel could be used as it stands: see below, and describe a signal"]
        ),
    ]
    for proposal in used:
        lines += [*_signal(findings, recordings, proposal), ""]
    for proposal in proposals:
        if proposal.settings.problem:
            lines += [f"# {proposal.group.name} is not used: {proposal.settings.problem}."]
            lines += [f"# {line}" for line in "\n".join(_signal(findings, recordings, proposal)).split("\n")]
            lines += [""]
    unused = tuple(_unused(recordings, proposals))
    lines += [*unused, ""] if unused else []
    lines += example_question(recordings, used)
    return "\n".join(lines) + "\n"


def _head(findings: Findings, recordings: Sequence[FoundRecording]) -> Iterator[str]:
    people = {one.participant for one in recordings if one.participant}
    counted = f"{_plural(len(recordings), 'recording')} of {_plural(len(people), 'participant')}"
    yield f"# Drafted from {findings.source}: {counted if people else _plural(len(recordings), 'recording')}."
    yield "# A place to start from: read every line before the first run, and change what does not fit the question."
    yield f"# What nothing states is marked '{GUESS.strip(': ')}', with what it rests on; what only you can know is"
    yield f"# blank and marked '{BLANK.strip(': ')}'. The files and their settings are tested by: bandcairn check"
    if findings.remarks:
        yield "#"
        yield "# To know:"
        for remark in findings.remarks:
            yield from _wrapped(remark, "#   - ", "#     ")
    if findings.left_out:
        yield "#"
        yield "# Left out of the recordings:"
        for left in findings.left_out[:20]:
            yield from _wrapped(f"{left.file}: {left.reason}", "#   - ", "#     ")
        if len(findings.left_out) > 20:
            yield f"#   - and {len(findings.left_out) - 20} more"


def _tables(findings: Findings, recordings: Sequence[FoundRecording]) -> Iterator[str]:
    choice = findings.participants
    told = f"participant: {choice.why}"
    if choice.value is None:
        told = f"{BLANK}the column participant; {choice.why}"
    elif choice.guessed:
        told = f"{GUESS}{told}"
    yield _line("recordings: recordings.csv", told)
    for name, column in findings.columns.items():
        yield f"{'':{_COMMENT_AT}}# {GUESS if column.guessed else ''}{name}: {column.why}"
    named = {segment.name: None for one in recordings for segment in one.segments}
    if named:
        yield _line("segments: segments.csv", f"events that last, from *_events.tsv: {_some(tuple(named))}")
    elif findings.annotations:
        yield _line(
            f"segments: {{annotations: {_flow(findings.annotations)}}}",
            f"{GUESS}annotations that mark one stretch in each file; delete this line to use whole recordings",
        )


def _load(findings: Findings) -> Iterator[str]:
    if findings.unit is None and findings.rate is None:
        return
    yield _line("load:", "what delimited files do not say of themselves")
    for key, choice in (("rate_hz", findings.rate), ("unit", findings.unit)):
        if choice is not None:
            yield _line(f"  {key}: {choice.value or ''}".rstrip(), _told(choice))


def _signal(findings: Findings, recordings: Sequence[FoundRecording], proposal: Proposal) -> Iterator[str]:
    group, settings = proposal.group, proposal.settings
    yield f"  {group.name}:"
    yield f"    kind: {group.kind}"
    yield from _channels(group)
    if settings.whole:
        yield _line(
            "    segments: []", "the whole recording: the segments are too short for heart rate variability"
        )
    elif findings.annotations or any(one.segments for one in recordings):
        yield _line("    # segments: []", "for the whole recording; absent: every segment of a recording")
    yield from _recorder(settings)
    rates = " and ".join(f"{float(rate):g}" for rate in group.rates_hz) or "an unknown number of"
    if settings.resample_hz is None:
        yield f"    # no resample: {'all files have' if group.rates_hz else 'the files state'} {rates} Hz"
    else:
        why = "one rate for all" if len(group.rates_hz) > 1 else "enough for the filter below"
        yield _line(f"    resample: {{rate_hz: {settings.resample_hz}}}", f"the files have {rates} Hz; {why}")
    yield from _filter(findings, group, settings)
    yield from _SHAPE[group.kind](settings)


def _recorder(settings: Settings) -> Iterator[str]:
    low_hz, high_hz = settings.recorder_hz
    stated = [f"highpass_hz: {low_hz:g}"] if low_hz > 0 else []
    stated += [f"lowpass_hz: {high_hz:g}"] if math.isfinite(high_hz) else []
    if stated and low_hz < high_hz:
        told = "the narrowest low_cutoff and high_cutoff in *_channels.tsv"
        yield _line(f"    recorder: {{{', '.join(stated)}}}", told)


def _channels(group: Group) -> Iterator[str]:
    listed = _listed(group.labels)
    first = group.members[0][0]
    told = _reasons(group)
    if len(listed) == 1:
        yield _line(f"    channels: {listed[0]}", told)
    else:
        yield f"    # {told}"
        yield "    channels:"
        yield from (f"      {part}" for part in listed)
    for label, members in zip(group.labels, group.members, strict=True):
        muscle = next((each.muscle for each in members if each.muscle), "")
        if muscle:
            yield f"    #   {label}: {muscle}"
        bad = [f"{name} ({each.bad})" for name, each in zip(group.holders, members, strict=True) if each.bad]
        if bad:
            yield from _wrapped(f"{label} is marked bad in {_some(bad)}", "    #   ", "    #     ")
    units = tuple(dict.fromkeys(each.unit for each in group.channels if each.unit is not None))
    if len(units) > 1 or (units and first.unit not in ("uV", "\u00b5V", "\u03bcV")):
        yield f"    #   stored in {' and '.join(units)}, read as uV"


def _reasons(group: Group) -> str:
    guessed = [each for each in group.channels if each.guessed]
    whys = dict.fromkeys(each.why for each in (guessed or group.channels))
    return f"{GUESS if guessed else ''}{'; '.join(whys)}"


def _filter(findings: Findings, group: Group, settings: Settings) -> Iterator[str]:
    low_hz, high_hz = settings.filter_hz
    why = {
        "eeg": "takes away drift below and muscle and mains above; zero: forward and backward, so no delay",
        "ecg": "keeps the R waves, takes away breathing and mains; zero: forward and backward, so no delay",
        "emg": "takes away movement below; zero: forward and backward, so no delay",
    }[group.kind]
    yield _line("    filter:", why)
    stage = "design: butterworth, order: {order}, phase: zero}}"
    mains_hz = int(findings.mains.value or 50)
    if low_hz < mains_hz < high_hz:
        yield _line("      # - {type: notch}", "against mains hum and its harmonics, if there is any")
    yield f"      - {{type: bandpass, cutoff_hz: [{low_hz:g}, {high_hz:g}], {stage.format(order=settings.order)}"


def _eeg_shape(settings: Settings) -> Iterator[str]:
    yield "    # common practice: above 150 uV it is blinks or movement, below 0.5 uV a dead channel; look at your data"
    reject = "reject: {peak_to_peak_uv: 150, flat_uv: 0.5}"
    yield f"    epoch: {{length_s: {settings.epoch_s:g}, overlap: 0.5, {reject}}}"
    yield _line(
        f"    spectrum: {{method: welch, window: hann, segment_s: {settings.segment_s:g}, overlap: 0.5}}",
        f"steps of {1 / settings.segment_s:g} Hz",
    )
    yield from _bands(settings, "bands that the filter passes")


def _ecg_shape(settings: Settings) -> Iterator[str]:
    told = "the usual 5 minutes" if settings.epoch_s == 300 else "the longest that fits into every recording"
    yield _line(f"    epoch: {{length_s: {settings.epoch_s:g}}}", told)
    welch = f"method: welch, interpolation_hz: 4, segment_s: {settings.segment_s:g}, overlap: 0.5"
    yield _line(f"    spectrum: {{{welch}}}", "of the beat intervals")
    missing = [name for name in ("vlf", "lf") if name not in settings.bands_hz]
    told = "bands of the Task Force of 1996"
    if missing:
        told += f"; epochs too short for {' and '.join(missing)}"
    if settings.epoch_s < _SHORTEST_FOR_HF_S:
        told += f", and hf stays blank below {_SHORTEST_FOR_HF_S} s"
    yield from _bands(settings, told)


def _emg_shape(settings: Settings) -> Iterator[str]:
    yield _line(
        f"    epoch: {{length_s: {settings.epoch_s:g}}}",
        "one median frequency an epoch; its trend is fatigue",
    )
    yield "    spectrum: {method: periodogram, window: hann}"


_SHAPE = {"eeg": _eeg_shape, "ecg": _ecg_shape, "emg": _emg_shape}


def _bands(settings: Settings, told: str) -> Iterator[str]:
    bands = ", ".join(f"{name}: [{low:g}, {high:g}]" for name, (low, high) in settings.bands_hz.items())
    yield _line("    features:", told)
    yield f"      bands_hz: {{{bands}}}"


def _unused(recordings: Sequence[FoundRecording], proposals: Sequence[Proposal]) -> Iterator[str]:
    """Yield the channels that stand in no signal, by their reason."""
    used = {label for each in proposals for label in each.group.labels}
    reasons: dict[str, dict[str, None]] = {}
    for one in recordings:
        for channel in one.channels:
            if not channel.kind and channel.label not in used:
                reasons.setdefault(channel.why, {})[channel.label] = None
    if reasons:
        yield "# Channels that no signal uses:"
        for why, labels in reasons.items():
            yield from _wrapped(f"{', '.join(labels)}: {why}", "#   ", "#     ")


def _told(choice: Choice) -> str:
    return f"{BLANK if choice.value is None else GUESS if choice.guessed else ''}{choice.why}"


def _line(text: str, comment: str) -> str:
    """Return a line with its comment behind it, or above it where the two are too long."""
    beside = f"{text:{_COMMENT_AT - 2}}  # {comment}"
    if len(beside) <= _WIDTH:
        return beside
    indent = text[: len(text) - len(text.lstrip())]
    above = _wrapped(comment, f"{indent}# ", f"{indent}#   ")
    return "\n".join((*above, text))


def _wrapped(text: str, first: str, later: str) -> list[str]:
    printable = "".join(letter if letter.isprintable() else " " for letter in text)
    return textwrap.wrap(
        printable,
        _WIDTH,
        initial_indent=first,
        subsequent_indent=later,
        break_long_words=False,
        break_on_hyphens=False,
    )


def _scalar(value: object) -> str:
    text: str = yaml.safe_dump(value, allow_unicode=True, width=10_000)
    return text.removesuffix("\n").removesuffix("\n...")


def _flow(names: Iterable[str]) -> str:
    text: str = yaml.safe_dump(list(names), default_flow_style=True, allow_unicode=True, width=10_000)
    return text.strip()


def _listed(names: Sequence[str]) -> list[str]:
    """Return a flow list over as many lines as it needs, broken between names only."""
    items = [f"{_flow([name])[1:-1]}," for name in names]
    items = [f"[{items[0]}", *items[1:]]
    items[-1] = items[-1].removesuffix(",") + "]"
    lines = [""]
    for item in items:
        joined = f"{lines[-1]} {item}".lstrip()
        if len(joined) > _WIDTH - 14 and lines[-1]:
            lines.append(item)
        else:
            lines[-1] = joined
    return lines


def _some(names: Sequence[str]) -> str:
    return ", ".join(names[:6]) + (" ..." if len(names) > 6 else "")


def _plural(count: int, what: str) -> str:
    return f"{count} {what}" + ("" if count == 1 else "s")
