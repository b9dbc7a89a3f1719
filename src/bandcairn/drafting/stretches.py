"""From the events of a recording to named stretches, and what is told of the events that become none."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass
from typing import TYPE_CHECKING

from bandcairn.drafting.findings import FoundSegment

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping, Sequence

# A segment is a stretch that is analysed by itself and named in a question, not a trial: shorter or more
# frequent ones would give hundreds of names that no question can ask about. Common practice, no standard.
SHORTEST_S = 2.0
MOST_A_RECORDING = 12


@dataclass(frozen=True, slots=True)
class Stretches:
    """The segments of a recording, and sentences on events that become none."""

    segments: tuple[FoundSegment, ...]
    remarks: tuple[str, ...]


def stretches_of(events: Sequence[Mapping[str, str]], length_s: float | None) -> Stretches:
    """Turn events that last into segments.

    Parameters
    ----------
    events : sequence of Mapping
        Rows with ``onset``, ``duration`` and ``trial_type``, as text.
    length_s : float or None
        Length of the recording; None where it is not known.

    Returns
    -------
    Stretches
        A type that occurs once keeps its name; the stretches of one that returns are numbered.
    """
    lasting: dict[str, list[tuple[float, float]]] = {}
    remarks: list[str] = []
    for event in events:
        start_s, duration_s = _number(event.get("onset")), _number(event.get("duration"))
        if start_s is not None and duration_s is not None and duration_s > 0:
            lasting.setdefault(_name(event), []).append((start_s, start_s + duration_s))
    segments: list[FoundSegment] = []
    for name, times in lasting.items():
        told = _unfit(name, times)
        remarks += told
        segments += () if told else _named(name, times)
    outside = [one for one in segments if not _inside(one, length_s)]
    remarks += [f"the event {one.name} reaches beyond the recording and is no segment" for one in outside]
    return Stretches(tuple(one for one in segments if one not in outside), tuple(remarks))


def _name(event: Mapping[str, str]) -> str:
    text = event.get("trial_type") or event.get("value") or "event"
    return "".join("-" if letter in "/\\" or not letter.isprintable() else letter for letter in text)


def _unfit(name: str, times: list[tuple[float, float]]) -> list[str]:
    shortest_s = min(stop - start for start, stop in times)
    if shortest_s < SHORTEST_S:
        return [f"the events {name} are no segments: some last less than {SHORTEST_S:g} s"]
    if len(times) > MOST_A_RECORDING:
        return [
            f"the events {name} are no segments: they occur more than {MOST_A_RECORDING} times, as trials do"
        ]
    return []


def _named(name: str, times: list[tuple[float, float]]) -> Iterable[FoundSegment]:
    if len(times) == 1:
        return (FoundSegment(name, *times[0]),)
    return tuple(
        FoundSegment(f"{name} {number}", *each) for number, each in enumerate(sorted(times), start=1)
    )


def _inside(segment: FoundSegment, length_s: float | None) -> bool:
    return segment.start_s >= 0 and (length_s is None or segment.stop_s <= length_s + 1e-6)


def _number(text: str | None) -> float | None:
    try:
        return float(text or "")
    except ValueError:
        return None


def counted(sentences: Iterable[str], of: int, what: str) -> list[str]:
    """Return each sentence once, with how many of `of` it holds for unless it is all of them."""
    counts = Counter(sentences)
    return [
        f"{text[0].upper()}{text[1:]}{'' if count == of else f' (in {count} of {of} {what})'}."
        for text, count in counts.items()
    ]
