"""The memory of files seen: facts and digests are computed once for each state of a file."""

from __future__ import annotations

import contextlib
import json
import os
import tempfile
import time
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from pathlib import Path
from typing import Any

from bandcairn.errors import RecordingError
from bandcairn.recordings.content import CONTENT_FORMAT, ChannelContent, FileContent, content_digests
from bandcairn.recordings.reading import inspect, parts_of
from bandcairn.recordings.refusal import refusal, unreadable
from bandcairn.signal import Annotation, ChannelFacts, FileDetails, FileFacts, Gap, Repair

# Raised whenever what is remembered, or the reading it comes from, changes.
_INDEX_FORMAT = f"2.{CONTENT_FORMAT}"
# A file may change twice within one tick of the file system's clock, and look unchanged. Ticks are a few
# milliseconds on the usual file systems (from memory); a file must be older than this to be trusted.
_RACY_NS = 100_000_000
# What an entry of another shape raises when it is decoded.
_DAMAGE = (AttributeError, KeyError, IndexError, TypeError, ValueError, ZeroDivisionError)


@dataclass(frozen=True, slots=True)
class Surveyed:
    """What a file says of itself, and the digests of its content."""

    facts: FileFacts
    content: FileContent


@dataclass(frozen=True, slots=True)
class _State:
    """What tells one state of a file from another, without opening it.

    Attributes
    ----------
    mark : list of int
        Size, time of modification and time of change of status in ns of each of its files, as JSON holds them.
    settled : bool
        Whether the file was old enough, when looked at, for its times to tell any later change.
    """

    mark: list[int]
    settled: bool


class RawIndex:
    """Facts and digests of raw files by path, size and times; each file is opened once for each state.

    Only a memory: a file of it that is missing, damaged or of another format is an empty memory. Failures are
    never remembered. Lookups from several threads are safe.

    Parameters
    ----------
    index_path : Path
        Where `save` writes.
    entries : dict
        By path relative to the study folder: the state as numbers, facts and digests as texts.
    """

    def __init__(self, index_path: Path, entries: dict[str, Any]) -> None:
        self._index_path = index_path
        self._entries = entries
        self._changed = False

    @classmethod
    def load(cls, index_path: Path) -> RawIndex:
        """Return what `index_path` remembers, or an empty memory."""
        try:
            content = json.loads(index_path.read_bytes())
            entries = content["entries"] if content["format"] == _INDEX_FORMAT else {}
        except (OSError, ValueError, KeyError, TypeError, RecursionError):
            entries = {}
        return cls(index_path, entries if isinstance(entries, dict) else {})

    def recall(self, path: Path, root: Path) -> Surveyed | None:
        """Return facts and digests if both are remembered for the state that `path` is in, else None."""
        try:
            known = self._known(_name(path, root), _state(path))
            if known is None:
                return None
            return Surveyed(_decode_facts(known["facts"]), _decode_content(known["content"]))
        except (RecordingError, *_DAMAGE):
            return None

    def facts(self, path: Path, root: Path) -> FileFacts:
        """Return what `inspect` says of `path`, from memory if the file is in the same state.

        Parameters
        ----------
        path : Path
            The file, inside `root` or outside.
        root : Path
            The study folder, so that a moved study keeps its memory.

        Raises
        ------
        RecordingError
            As `inspect`; also if the file changes while it is read.
        """
        name = _name(path, root)
        state = _state(path)
        known = self._known(name, state)
        if known is not None:
            with contextlib.suppress(*_DAMAGE):
                return _decode_facts(known["facts"])
        facts = inspect(path)
        self._remember(name, path, state, {"facts": _encode_facts(facts)})
        return facts

    def content(self, path: Path, root: Path) -> FileContent:
        """Return what `content_digests` says of `path`, from memory if the file is in the same state.

        Parameters and errors as in `facts`.
        """
        name = _name(path, root)
        state = _state(path)
        known = self._known(name, state)
        if known is not None:
            with contextlib.suppress(*_DAMAGE):
                return _decode_content(known["content"])
        content = content_digests(path)
        self._remember(name, path, state, {"content": _encode_content(content)})
        return content

    def save(self) -> None:
        """Write the memory if it has changed: private, and never half.

        A folder that cannot be written to is no error: the next start looks at the files again.
        """
        if not self._changed:
            return
        content = json.dumps({"format": _INDEX_FORMAT, "entries": self._entries}, separators=(",", ":"))
        with contextlib.suppress(OSError):
            _write_whole(self._index_path, content)
            self._changed = False

    def _known(self, name: str, state: _State) -> dict[str, Any] | None:
        entry: object = self._entries.get(name)
        if isinstance(entry, dict) and entry.get("state") == state.mark:
            return entry
        return None

    def _remember(self, name: str, path: Path, state: _State, found: dict[str, Any]) -> None:
        if _state(path).mark != state.mark:
            remedy = "Wait until it is complete, then start again."
            raise refusal(path, "a file that changed while it was read", "a finished file", remedy)
        if not state.settled:
            self._entries.pop(name, None)
            return
        # A new dictionary in one step: another thread sees the old entry or the new one.
        known = self._known(name, state) or {"state": state.mark}
        self._entries[name] = known | found
        self._changed = True


def _state(path: Path) -> _State:
    try:
        stats = [part.stat() for part in parts_of(path)]
    except OSError as error:
        raise unreadable(path, error) from error
    latest_ns = max(max(one.st_mtime_ns, one.st_ctime_ns) for one in stats)
    mark = [value for one in stats for value in (one.st_size, one.st_mtime_ns, one.st_ctime_ns)]
    return _State(mark, time.time_ns() - latest_ns >= _RACY_NS)


def _name(path: Path, root: Path) -> str:
    # Text rather than Path.relative_to: ten times faster, and a thousand files are asked for at each start.
    text, folder = str(path), f"{root}{os.sep}"
    return text.removeprefix(folder)


def _write_whole(target: Path, content: str) -> None:
    """Write beside the target, then rename; the file is readable by its owner alone, as mkstemp makes it."""
    target.parent.mkdir(parents=True, exist_ok=True, mode=0o700)
    handle, beside = tempfile.mkstemp(prefix=f".{target.name}.", dir=target.parent)
    try:
        with os.fdopen(handle, "w", encoding="utf-8") as file:
            file.write(content)
        Path(beside).replace(target)
    except BaseException:
        Path(beside).unlink(missing_ok=True)
        raise


def _encode_facts(facts: FileFacts) -> list[str]:
    """Return two texts: what recordings built alike share, and what is each one's own."""
    channels = [
        [one.label, None if one.rate_hz is None else str(one.rate_hz), one.unit, one.n_samples, one.prefilter]
        for one in facts.channels
    ]
    annotations = [[one.onset_s, one.duration_s, one.text] for one in facts.annotations]
    repair = facts.repair
    details = facts.details
    shared = [
        channels,
        annotations,
        None if facts.duration_s is None else str(facts.duration_s),
        [[str(gap.start_s), str(gap.stop_s)] for gap in facts.gaps],
        None if repair is None else [repair.n_records_header, repair.n_records_found, repair.bytes_dropped],
        [details.format, details.encoding, str(details.start_offset_s), details.layout, details.left_out],
    ]
    return [json.dumps(shared, separators=(",", ":")), details.start]


def _decode_facts(entry: list[str]) -> FileFacts:
    shared, start = entry
    one = _decode_shared(shared)
    how = one.details
    # Written out: `replace` takes three times as long, and a thousand files are asked for at each start.
    details = FileDetails(how.format, how.encoding, start, how.start_offset_s, how.layout, how.left_out)
    return FileFacts(one.channels, one.annotations, one.duration_s, one.gaps, one.repair, details)


# Recordings of one study are mostly built alike: equal texts share one result.
@lru_cache(maxsize=1024)
def _decode_shared(text: str) -> FileFacts:
    channels, annotations, duration_s, gaps, repair, details = json.loads(text)
    form, encoding, start_offset_s, layout, left_out = details
    return FileFacts(
        channels=tuple(
            ChannelFacts(label, None if rate_hz is None else Fraction(rate_hz), unit, n_samples, prefilter)
            for label, rate_hz, unit, n_samples, prefilter in channels
        ),
        annotations=tuple(Annotation(*row) for row in annotations),
        duration_s=None if duration_s is None else Fraction(duration_s),
        gaps=tuple(Gap(Fraction(start_s), Fraction(stop_s)) for start_s, stop_s in gaps),
        repair=None if repair is None else Repair(*repair),
        details=FileDetails(form, encoding, "", Fraction(start_offset_s), layout, tuple(left_out)),
    )


def _encode_content(content: FileContent) -> list[str]:
    labels = json.dumps([one.label for one in content.channels], separators=(",", ":"))
    digests = [content.file_sha256, content.annotations_sha256, *(one.sha256 for one in content.channels)]
    return [labels, " ".join(digests)]


def _decode_content(entry: list[str]) -> FileContent:
    file_sha256, annotations_sha256, *digests = entry[1].split()
    channels = zip(_decode_labels(entry[0]), digests, strict=True)
    return FileContent(
        file_sha256=file_sha256,
        annotations_sha256=annotations_sha256,
        channels=tuple(ChannelContent(label, sha256) for label, sha256 in channels),
    )


@lru_cache(maxsize=1024)
def _decode_labels(text: str) -> tuple[str, ...]:
    return tuple(json.loads(text))
