"""What the raw files of a study hold, each looked at once: facts, checks against the study, digests."""

from __future__ import annotations

import os
from contextlib import contextmanager
from dataclasses import dataclass, field
from fractions import Fraction
from typing import TYPE_CHECKING

from bandcairn.errors import RecordingError, StudyError
from bandcairn.nodes.twins import check_twins
from bandcairn.recordings import RawIndex, check_repair, parts_of, survey
from bandcairn.study.aliases import labels_for
from bandcairn.study.facts_check import check_facts
from bandcairn.study.models import AnnotationSegments

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator
    from pathlib import Path

    from bandcairn.signal import ChannelFacts, FileFacts
    from bandcairn.study.description import LoadedStudy

    Progress = Callable[[int, int], None]

INDEX_NAME = "raw_index.json"


@dataclass(frozen=True, slots=True)
class RawContent:
    """What the raw file of one recording holds.

    Attributes
    ----------
    facts : FileFacts
        What it says of itself.
    digests : dict of str to str
        SHA-256 of the content of each channel by its label.
    annotated_segments : tuple of (str, float, float)
        Name, start and stop in seconds of the segments that its annotations declare.
    labels : dict of str to str
        Label in the file of each channel that the study calls otherwise.
    """

    facts: FileFacts
    digests: dict[str, str]
    annotated_segments: tuple[tuple[str, float, float], ...]
    labels: dict[str, str] = field(default_factory=dict)

    def label_of(self, channel: str) -> str:
        """Return the label under which the file holds a channel of the study."""
        return self.labels.get(channel, channel)

    def digest_of(self, channel: str) -> str:
        """Return the digest of a channel of the study."""
        return self.digests[self.label_of(channel)]

    def facts_of(self, channel: str) -> ChannelFacts:
        """Return the facts of a channel of the study that is known to be there."""
        label = self.label_of(channel)
        return next(one for one in self.facts.channels if one.label == label)

    def rate_hz(self, channel: str, declared_hz: float | None) -> Fraction | float | None:
        """Return a channel's own rate, else the declared one."""
        own = self.facts_of(channel).rate_hz
        return declared_hz if own is None else own


@dataclass(frozen=True, slots=True)
class Survey:
    """What was found in all raw files of a study.

    Attributes
    ----------
    contents : dict of str to RawContent
        By recording.
    unreadable : dict of str to str
        Why the file of a recording cannot be read.
    """

    contents: dict[str, RawContent]
    unreadable: dict[str, str]
    _paths: dict[str, Path]
    _states: dict[str, tuple[int, ...]]

    @contextmanager
    def unchanged_file(self, recording: str) -> Iterator[Path]:
        """Give the raw file of a recording, and refuse what was read if the file is no longer as surveyed."""
        path = self._paths[recording]
        yield path
        if _state(path) != self._states[recording]:
            raise RecordingError(f"{path.name} has changed while the study was running; run again")


def survey_study(study: LoadedStudy, store: Path, progress: Progress | None = None) -> Survey:
    """Look at every raw file, check the study against them, and digest their content.

    What is known of a file in the same state (size and times) is not read again.

    Parameters
    ----------
    study : LoadedStudy
        The study.
    store : Path
        Where the memory of the files lies.
    progress : callable, optional
        Called with the number of files digested and their total.

    Returns
    -------
    Survey

    Raises
    ------
    StudyError
        With every way in which the study does not fit its files, or every pair of recordings of the same content.
    """
    index = RawIndex.load(store / INDEX_NAME)
    facts, unreadable = inspect_files(study, index)
    paths = {row.recording: study.folder / row.file for row in study.recordings}
    states = {recording: _state(paths[recording]) for recording in facts}
    wanted = [paths[recording] for recording in facts]
    found = survey(wanted, study.folder, index, os.cpu_count() or 1, progress)
    index.save()
    contents = {}
    for recording in facts:
        result = found[paths[recording]]
        if isinstance(result, RecordingError):
            unreadable[recording] = str(result)
        else:
            digests = {channel.label: channel.sha256 for channel in result.content.channels}
            labels = _aliased(study, result.facts)
            contents[recording] = RawContent(result.facts, digests, _annotated(study, result.facts), labels)
    twins = check_twins(study, contents)
    if twins:
        raise StudyError(twins)
    return Survey(contents, unreadable, paths, states)


def inspect_files(study: LoadedStudy, index: RawIndex) -> tuple[dict[str, FileFacts], dict[str, str]]:
    """Read what each file says of itself, and check the study against it.

    Parameters
    ----------
    study : LoadedStudy
        The study.
    index : RawIndex
        The memory of the files; taught, not saved.

    Returns
    -------
    tuple of dict
        The facts by recording, and why the file of a recording cannot be read.

    Raises
    ------
    StudyError
        With every way in which the study does not fit its files.
    """
    facts: dict[str, FileFacts] = {}
    unreadable: dict[str, str] = {}
    # A signal with a smaller share of its own refuses the recording when it is loaded.
    description = study.description
    loads = [description.load_of(signal) for signal in description.signals.values()]
    max_missing_share = max(Fraction(str(load.max_missing_share)) for load in loads)
    for row in study.recordings:
        path = study.folder / row.file
        try:
            found = index.facts(path, study.folder)
            check_repair(path, found.repair, max_missing_share)
            facts[row.recording] = found
        except RecordingError as error:
            unreadable[row.recording] = str(error)
    problems = check_facts(study, facts)
    if problems:
        raise StudyError(problems)
    return facts, unreadable


def _aliased(study: LoadedStudy, facts: FileFacts) -> dict[str, str]:
    """Return the labels of the channels that the file calls otherwise than the study."""
    aliases = study.description.aliases
    if not aliases:
        return {}
    labels = [channel.label for channel in facts.channels]
    found = {name: labels_for(name, labels, aliases) for name in aliases}
    return {name: matches[0] for name, matches in found.items() if matches and matches[0] != name}


def _annotated(study: LoadedStudy, facts: FileFacts) -> tuple[tuple[str, float, float], ...]:
    wanted = study.description.segments
    if not isinstance(wanted, AnnotationSegments):
        return ()
    return tuple(
        (mark.text, mark.onset_s, mark.onset_s + mark.duration_s)
        for mark in facts.annotations
        if mark.text in wanted.annotations and mark.duration_s > 0
    )


def _state(path: Path) -> tuple[int, ...]:
    try:
        stats = [part.stat() for part in parts_of(path)]
    except (OSError, RecordingError):
        return ()
    return tuple(value for one in stats for value in (one.st_size, one.st_mtime_ns, one.st_ino))
