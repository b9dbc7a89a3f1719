"""The same samples under the names of two recordings: one person counted twice."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from bandcairn.errors import Problem

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence

    from bandcairn.nodes.survey import RawContent
    from bandcairn.study.description import LoadedStudy
    from bandcairn.study.tables import RecordingRow


def check_twins(study: LoadedStudy, contents: Mapping[str, RawContent]) -> tuple[Problem, ...]:
    """Find recordings that hold the same samples in all channels that the study uses.

    Names and bytes of the files do not matter, only what they hold. Two stretches of one content are two recordings as
    long as they do not overlap.

    Parameters
    ----------
    study : LoadedStudy
        The study.
    contents : mapping of str to RawContent
        What each recording's file holds.

    Returns
    -------
    tuple of Problem
        One a pair, in the order of the recordings table; empty where the study accepts it, with its reason.
    """
    if study.description.accept_same_content is not None:
        return ()
    channels = sorted({channel for one in study.description.signals.values() for channel in one.channels})
    alike: dict[tuple[str, ...], list[RecordingRow]] = {}
    for row in study.recordings:
        content = contents.get(row.recording)
        if content is not None:
            alike.setdefault(tuple(content.digest_of(channel) for channel in channels), []).append(row)
    return tuple(problem for rows in alike.values() for problem in _overlaps(study, rows))


def _overlaps(study: LoadedStudy, rows: Sequence[RecordingRow]) -> Iterator[Problem]:
    for place, later in enumerate(rows):
        earlier = next((row for row in rows[:place] if _overlap(row, later)), None)
        if earlier is not None:
            yield Problem(
                file=study.description.recordings,
                where=f"row {later.row}, column file",
                field="file",
                found=f"{later.recording} ({later.file}) with the same samples as {earlier.recording} "
                f"({earlier.file}, row {earlier.row})",
                allowed="samples of its own for each recording, or stretches that do not overlap",
                remedy="Correct the file, delete one of the rows, or state in accept_same_content why it is right.",
            )


def _overlap(first: RecordingRow, second: RecordingRow) -> bool:
    starts = max(first.start_s or 0.0, second.start_s or 0.0)
    stops = min(math.inf if row.stop_s is None else row.stop_s for row in (first, second))
    return starts < stops
