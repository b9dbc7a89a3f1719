"""An example of a question, commented out: which comparison a study makes cannot be guessed."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import combinations
from typing import TYPE_CHECKING

import yaml

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence

    from bandcairn.drafting.findings import FoundRecording
    from bandcairn.drafting.page import Proposal

_FEATURES = {
    "eeg": ("band_power", "log10"),
    "ecg": ("rmssd", "ln"),
    "emg": ("median_frequency", "identity"),
}
_MOST_LEVELS = 8  # a column with more is an age or a number, not a factor
SEGMENT = "segment"  # compares two segments of a recording instead of two levels of a column


@dataclass(frozen=True, slots=True)
class _Comparison:
    """Two levels of a column; `within` people or between them."""

    column: str
    first: str
    second: str
    within: bool


def example_question(recordings: Sequence[FoundRecording], proposals: Sequence[Proposal]) -> list[str]:
    """Return the lines of an example question with the study's own names.

    Parameters
    ----------
    recordings : sequence of FoundRecording
        Those of the study.
    proposals : sequence of Proposal
        The signals that can be used.

    Returns
    -------
    list of str
        All of them comments. Taking ``"# "`` away leaves a question that holds.
    """
    comparison = _comparison(recordings)
    head = "# Questions are yours to ask, before the data are looked at."
    if comparison is None or not proposals:
        return [
            f"{head} So far no two levels can be compared:",
            "# give recordings.csv a column such as condition or group, then write for example",
            "# questions:",
            "#   - {name: ..., signal: ..., feature: ..., within: condition, contrast: [a, b], test: paired_t}",
        ]
    lines = _written(comparison, recordings, proposals[0])
    return [f"{head} One could be (take the marks away):", *(f"# {line}" for line in lines)]


def _written(
    comparison: _Comparison, recordings: Sequence[FoundRecording], proposal: Proposal
) -> Iterator[str]:
    group, settings = proposal.group, proposal.settings
    feature, scale = _FEATURES[group.kind]
    band = (
        ("alpha" if "alpha" in settings.bands_hz else next(iter(settings.bands_hz)))
        if group.kind == "eeg"
        else ""
    )
    what = f"{band} power" if band else feature.replace("_", " ")
    first, second = comparison.first, comparison.second
    yield "questions:"
    yield f"  - name: {_block(f'{what}, {first} against {second}')}"
    yield f"    signal: {group.name}"
    yield f"    feature: {feature}"
    if band:
        yield f"    band: {band}"
    if len(group.labels) > 1:
        yield "    channels: each                    # each | mean | a list; each asks once for every channel"
    segments = (
        () if settings.whole else tuple(dict.fromkeys(s.name for one in recordings for s in one.segments))
    )
    if comparison.column != SEGMENT and len(segments) > 1:
        yield f"    segment: {_flow(segments[0])}"
    if scale != "identity":
        yield f"    scale: {scale}"
    yield f"    {'within' if comparison.within else 'between'}: {_flow(comparison.column)}"
    contrast = f"    contrast: [{_flow(first)}, {_flow(second)}]"
    yield f"{contrast:36}  # the estimate is the first minus the second"
    yield f"    test: {'paired_t' if comparison.within else 'welch_t'}"


def _block(text: str) -> str:
    written: str = yaml.safe_dump(text, allow_unicode=True, width=10_000)
    return written.removesuffix("\n").removesuffix("\n...")


def _flow(text: str) -> str:
    written: str = yaml.safe_dump([text], default_flow_style=True, allow_unicode=True, width=10_000)
    return written.strip()[1:-1]


def _comparison(recordings: Sequence[FoundRecording]) -> _Comparison | None:
    """Return two levels that can be compared: within people where two at least have both, else between them."""
    columns = tuple(recordings[0].design) if recordings else ()
    levels = {column: _people_by_level(recordings, column) for column in columns}
    for column, people in levels.items():
        for first, second in combinations(people, 2) if len(people) <= _MOST_LEVELS else ():
            if len(people[first] & people[second]) >= 2:
                return _Comparison(column, first, second, within=True)
    return _of_segments(recordings) or _between(levels)


def _of_segments(recordings: Sequence[FoundRecording]) -> _Comparison | None:
    segments: dict[str, set[str]] = {}
    for one in recordings:
        for segment in one.segments:
            segments.setdefault(segment.name, set()).add(one.participant)
    for first, second in combinations(segments, 2):
        if len((segments[first] & segments[second]) - {""}) >= 2:
            return _Comparison(SEGMENT, first, second, within=True)
    return None


def _between(levels: Mapping[str, Mapping[str, set[str]]]) -> _Comparison | None:
    for column, people in levels.items():
        if _separates(people) and 2 <= len(people) <= _MOST_LEVELS:
            large = [level for level, members in people.items() if len(members) >= 2]
            if len(large) >= 2:
                return _Comparison(column, large[0], large[1], within=False)
    return None


def _people_by_level(recordings: Sequence[FoundRecording], column: str) -> dict[str, set[str]]:
    """Return who stands at each level; nobody where a cell is blank, for then the column cannot be compared."""
    people: dict[str, set[str]] = {}
    for one in recordings:
        if not one.design[column] or not one.participant:
            return {}
        people.setdefault(one.design[column], set()).add(one.participant)
    return people


def _separates(people: Mapping[str, set[str]]) -> bool:
    return sum(len(members) for members in people.values()) == len(set().union(*people.values()))
