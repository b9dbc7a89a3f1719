"""Rows of ``results/exclusions`` and ``results/epochs``: what was left out and why, what was kept."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from bandcairn.nodes.marks import DECIDED, decisions_by_recording, touched_channels
from bandcairn.nodes.plan import design_columns

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence

    from bandcairn.execution.project import Project
    from bandcairn.study.epoch_blocks import Epoch
    from bandcairn.study.marks import DecisionRow

EXCLUSIONS_SCHEMA = {
    "recording": "text",
    "signal": "text",
    "channel": "text",
    "segment": "text",
    "what": "text",
    "count": "count",
    "total": "count",
    "reason": "text",
}
# How many epochs of a channel and segment there are, how many are kept, and how many each reason has dropped.
_COUNTS = ("by_decision", "at_edge", "too_large", "too_flat", "too_steep", "outlying")


@dataclass(frozen=True, slots=True)
class Place:
    """Where something was left out, as far as it goes."""

    recording: str
    signal: str = ""
    channel: str = ""
    segment: str = ""

    def row(self, what: str, reason: str, count: int = 1, total: int = 1) -> dict[str, Any]:
        """Return one row of the exclusions; `count` is of `total`."""
        columns = ("recording", "signal", "channel", "segment")
        where = {column: getattr(self, column) or None for column in columns}
        return {**where, "what": what, "count": count, "total": total, "reason": reason}


def epochs_schema(project: Project) -> dict[str, str]:
    """Return the columns of ``results/epochs``."""
    return {
        "recording": "text",
        "participant": "text",
        **dict.fromkeys(design_columns(project.study), "text"),
        **dict.fromkeys(("signal", "channel", "segment"), "text"),
        **dict.fromkeys(("total", "kept", *_COUNTS, "no_window"), "count"),
    }


def epochs_rows(features: Sequence[Mapping[str, Any]]) -> Iterator[dict[str, Any]]:
    """Yield one row a recording, signal, channel and segment, in the order of the features.

    Total is kept plus every reason; events without a window come on top. What quality leaves out is not told here:
    it leaves out whole channels or bands, not epochs.
    """
    seen = set()
    for row in features:
        place = (row["recording"], row["signal"], row["channel"], row["segment"])
        if place not in seen:
            seen.add(place)
            total = row["epochs_total"]
            yield {**row, "total": total, "kept": total - sum(row[count] for count in _COUNTS)}


def rejected_epochs(project: Project, counts: Sequence[Mapping[str, Any]]) -> Iterator[dict[str, Any]]:
    """Yield a row for every recording, signal, channel, segment and reason that has dropped an epoch.

    The epochs of a channel that is left out as a whole have no rows of their own: `decided_channels` tells of it.

    Parameters
    ----------
    project : Project
        The study.
    counts : sequence of mapping
        Rows of `epochs_rows`.
    """
    decisions = decisions_by_recording(project.study)
    for row in counts:
        place = Place(row["recording"], row["signal"], row["channel"], row["segment"] or "")
        signal = project.study.description.signals[row["signal"]]
        mine = [
            decision
            for decision in decisions.get(row["recording"], ())
            if row["channel"] in touched_channels(decision, row["signal"], signal)
        ]
        as_a_whole = any(not decision.is_stretch for decision in mine)
        mine = [decision for decision in mine if _overlaps(project, decision, place.segment)]
        for count, reason in _reasons(signal.epoch, mine).items():
            if row[count] and not (count == "by_decision" and as_a_whole):
                yield place.row("epoch", reason, row[count], row["total"])
        if row["no_window"]:
            reason = "the window about the event crosses a gap or a border"
            yield place.row("event", reason, row["no_window"], row["total"] + row["no_window"])


def _overlaps(project: Project, decision: DecisionRow, segment: str) -> bool:
    """Tell whether a decided stretch touches a segment; no segment is the whole recording."""
    if not segment or decision.start_s is None or decision.stop_s is None:
        return True
    listed = [
        (row.segment, row.start_s, row.stop_s)
        for row in project.study.segments
        if row.recording == decision.recording
    ]
    held = listed or project.survey.contents[decision.recording].annotated_segments
    return any(
        name == segment and decision.start_s < stop_s and start_s < decision.stop_s
        for name, start_s, stop_s in held
    )


def repaired_recordings(project: Project) -> Iterator[dict[str, Any]]:
    """Yield one row a recording whose file does not fit its header: what was found, and how much is not used."""
    for recording, content in project.survey.contents.items():
        repair = content.facts.repair
        if repair is not None:
            claimed, found = repair.n_records_header, repair.n_records_found
            missing = abs(claimed - found) if claimed > 0 else 0
            yield Place(recording).row("data records", f"repaired: {repair}", missing, max(claimed, found))


def decided_channels(project: Project) -> Iterator[dict[str, Any]]:
    """Yield a row for every channel, or whole signal, that a decision leaves out of a recording."""
    planned = {(recording, signal) for recording, signal, _ in project.plan.slots}
    for decision in project.study.decisions:
        for name, signal in project.study.description.signals.items():
            touched = touched_channels(decision, name, signal)
            if decision.is_stretch or not touched or (decision.recording, name) not in planned:
                continue
            if not decision.channel:
                yield Place(decision.recording, name).row("signal", decision.told)
            for channel in touched if decision.channel else ():
                yield Place(decision.recording, name, channel).row("channel", decision.told)


def with_words(project: Project, features: Sequence[dict[str, Any]]) -> list[dict[str, Any]]:
    """Return the features with the words of decisions in their notes: the nodes know only that there was one."""
    decisions = decisions_by_recording(project.study)
    told = []
    for row in features:
        note = row["note"]
        if note is not None and note.startswith(DECIDED) and row["recording"] in decisions:
            signal = project.study.description.signals[row["signal"]]
            words = [
                decision.told
                for decision in decisions[row["recording"]]
                if not decision.is_stretch
                and row["channel"] in touched_channels(decision, row["signal"], signal)
            ]
            note = f"left out {'; '.join(words)}"
        told.append({**row, "note": note})
    return told


def _reasons(epoch: Epoch, decisions: Sequence[DecisionRow]) -> dict[str, str]:
    """Return each reason for which an epoch may have been dropped, in words."""
    reject = epoch.reject
    words = {
        "by_decision": "; ".join(decision.told for decision in decisions),
        "at_edge": "within the settling time of the filter at an end of a gap-free stretch",
    }
    if reject is not None:
        words |= {
            "too_large": f"peak to peak above {reject.peak_to_peak_uv or 0:g} uV",
            "too_flat": f"peak to peak below {reject.flat_uv or 0:g} uV",
            "too_steep": f"neighbouring samples more than {reject.step_uv or 0:g} uV apart",
            "outlying": f"peak to peak beyond a robust z of {reject.robust_z or 0:g}",
        }
    return words
