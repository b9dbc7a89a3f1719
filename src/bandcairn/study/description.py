"""Load a study: study.yaml and its tables, checked against one another, every problem in one pass."""

from __future__ import annotations

import os
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from bandcairn.errors import Problem, StudyError
from bandcairn.study.document import read_document
from bandcairn.study.faults import STUDY_FILE, Fault, place, suggestion
from bandcairn.study.mark_checks import MarkTables
from bandcairn.study.question_checks import (
    Design,
    check_columns,
    check_design,
    check_families,
    check_feature,
    check_names_unique,
    check_segment,
    check_signal_named,
)
from bandcairn.study.sheet import lies_inside
from bandcairn.study.signal_checks import check_segment_names, check_signal
from bandcairn.study.tables import (
    RecordingsTable,
    SegmentsTable,
    read_recordings,
    read_segments,
)
from bandcairn.study.validation import understand

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Mapping
    from pathlib import Path

    from bandcairn.study.document import Document
    from bandcairn.study.marks import DecisionRow, EventRow
    from bandcairn.study.models import StudyDescription
    from bandcairn.study.tables import RecordingRow, SegmentRow
    from bandcairn.study.validation import Understood

_RECORDINGS = "recordings.csv"
_SEGMENTS = "segments.csv"


@dataclass(frozen=True, slots=True)
class LoadedStudy:
    """A study without fault, as far as its description and tables tell.

    Attributes
    ----------
    folder : Path
        The study folder.
    description : StudyDescription
        The content of study.yaml with every default.
    recordings : tuple of RecordingRow
        In the order of the table.
    segments : tuple of SegmentRow
        In the order of the table; empty where there is none.
    segments_file : str or None
        Name of the segments table; None where there is none.
    lines : Mapping of str to int
        Line of each key of study.yaml by its path, ``signals.eeg.filter[0].cutoff_hz``.
    events : tuple of EventRow
        In the order of the table; empty where there is none.
    events_file : str or None
        Name of the events table; None where there is none: then events are annotations of the files.
    decisions : tuple of DecisionRow
        In the order of the table; empty where there is none.
    """

    folder: Path
    description: StudyDescription
    recordings: tuple[RecordingRow, ...]
    segments: tuple[SegmentRow, ...]
    segments_file: str | None
    lines: Mapping[str, int]
    events: tuple[EventRow, ...] = ()
    events_file: str | None = None
    decisions: tuple[DecisionRow, ...] = ()

    def where(self, *path: str | int) -> str:
        """Return ``"line 12"`` for a key of study.yaml, or for the nearest key above one that is absent."""
        return place(path, self.lines)


def load_study(folder: Path) -> LoadedStudy:
    """Read and check a study; no raw file is opened and nothing is written.

    Parameters
    ----------
    folder : Path
        The study folder.

    Returns
    -------
    LoadedStudy

    Raises
    ------
    StudyError
        Holding every problem of study.yaml and its tables.
    """
    document = _read_description(folder)
    content = _mapping(document)
    tables = _Tables.read(folder, content)
    marks = MarkTables.read(folder, content)
    understood = understand(content)
    readable = bool(tables.segments.cells) or not tables.segments.problems
    mains_hz = content.get("mains_hz") if content.get("mains_hz") in (50, 60) else None
    design = tables.design(content)
    names = [cells["recording"] for _, cells in tables.recordings.cells]
    findings = (
        *_inconsistencies(understood, design, mains_hz, segments_readable=readable),
        *marks.problems(tables.recordings_file, names, understood),
    )
    problems = (
        *document.problems,
        *(fault.placed(document.lines) for fault in (*understood.faults, *tables.faults, *marks.faults)),
        *tables.recordings.problems,
        *tables.segments.problems,
        *_missing_files(folder, tables),
        *_unknown_recordings(tables),
        *_placed(findings, document),
    )
    if problems or understood.description is None:
        raise StudyError(tuple(dict.fromkeys(problems)))
    return LoadedStudy(
        folder,
        understood.description,
        tables.recordings.rows,
        tables.segments.rows,
        tables.segments_file,
        document.lines,
        marks.events.rows,
        marks.events_file,
        marks.decisions.rows,
    )


def _read_description(folder: Path) -> Document:
    try:
        text = (folder / STUDY_FILE).read_text(encoding="utf-8-sig")
    except OSError as error:
        remedy = (
            "Name the folder that holds study.yaml; `bandcairn new` drafts one from a folder of recordings."
        )
        found = error.strerror or "no such file"
        raise StudyError((Problem(STUDY_FILE, "", str(folder), found, "a study folder", remedy),)) from None
    except UnicodeDecodeError as error:
        found = f"byte {error.start} is no UTF-8"
        problem = Problem(STUDY_FILE, "", "(file)", found, "UTF-8", "Save study.yaml as UTF-8.")
        raise StudyError((problem,)) from None
    return read_document(text, STUDY_FILE)


def _mapping(document: Document) -> dict[str, Any]:
    """Return the keys of study.yaml; without any, nothing else can be checked."""
    if isinstance(document.content, dict):
        return document.content
    remedy = "Write keys and values: study, mains_hz, signals."
    fault = Fault((), "no keys", "a mapping of keys", remedy).placed(document.lines)
    raise StudyError(document.problems or (fault,))


@dataclass(frozen=True, slots=True)
class _Tables:
    """The tables as read, and what study.yaml says wrongly of them."""

    recordings_file: str
    recordings: RecordingsTable
    segments_file: str | None
    segments: SegmentsTable
    faults: tuple[Fault, ...]

    @classmethod
    def read(cls, folder: Path, content: dict[str, Any]) -> _Tables:
        """Read the tables that study.yaml names, as far as the names can be understood."""
        recordings_file = _text(content.get("recordings", _RECORDINGS))
        segments_file = _segments_file(folder, content)
        faults = []
        for key, name in (("recordings", recordings_file), ("segments", segments_file)):
            if name is not None and not lies_inside(name):
                remedy = "Keep the table inside the study folder."
                faults.append(Fault((key,), name, "a path inside the study folder", remedy))
        recordings, segments = RecordingsTable((), (), (), ()), SegmentsTable((), (), ())
        if recordings_file is not None and lies_inside(recordings_file):
            recordings = read_recordings(folder / recordings_file, recordings_file)
        if segments_file is not None and lies_inside(segments_file):
            segments = read_segments(folder / segments_file, segments_file)
        return cls(recordings_file or _RECORDINGS, recordings, segments_file, segments, tuple(faults))

    def design(self, content: dict[str, Any]) -> Design:
        """Return people, levels and segments as the questions need them."""
        declared = content.get("segments")
        texts = declared.get("annotations") if isinstance(declared, dict) else None
        pairs = [(cells["recording"], cells["segment"]) for _, cells in self.segments.cells]
        names = [segment for _, segment in pairs if segment]
        if isinstance(texts, list):
            names = [text for text in texts if isinstance(text, str)]
        segments_of: dict[str, frozenset[str]] = {}
        for recording, segment in pairs:
            segments_of[recording] = segments_of.get(recording, frozenset()) | {segment}
        table = self.recordings
        segments = tuple(dict.fromkeys(names))
        return Design(self.recordings_file, table.design_columns, table.cells, segments, segments_of)


def _text(value: object) -> str | None:
    return value if isinstance(value, str) and value else None


def _segments_file(folder: Path, content: dict[str, Any]) -> str | None:
    if content.get("segments") is None:
        return _SEGMENTS if (folder / _SEGMENTS).is_file() else None
    return _text(content["segments"])


def _missing_files(folder: Path, tables: _Tables) -> Iterator[Problem]:
    """Yield the raw files that are not there."""
    root = os.fspath(folder)
    for line, cells in tables.recordings.cells:
        file = cells["file"]
        # os.path is several times faster than Path here, and a study may list thousands of files.
        if file and lies_inside(file) and not os.path.isfile(os.path.join(root, file)):  # noqa: PTH113, PTH118
            where = f"row {line}, column file"
            remedy = "Correct the path, or put the file there."
            yield Problem(
                tables.recordings_file, where, "file", f"{file}, no such file", "an existing file", remedy
            )


def _unknown_recordings(tables: _Tables) -> Iterator[Problem]:
    """Yield the rows of the segments table that name no recording."""
    known = {cells["recording"] for _, cells in tables.recordings.cells}
    for row in tables.segments.rows if known else ():
        if row.recording not in known:
            remedy = suggestion(row.recording, known, "Add the recording, or delete the row.")
            where = f"row {row.row}, column recording"
            allowed = f"a recording of {tables.recordings_file}"
            yield Problem(str(tables.segments_file), where, "recording", row.recording, allowed, remedy)


def _placed(findings: Iterable[Fault | Problem], document: Document) -> Iterator[Problem]:
    for finding in findings:
        yield finding.placed(document.lines) if isinstance(finding, Fault) else finding


def _inconsistencies(
    understood: Understood, design: Design, mains_hz: float | None, *, segments_readable: bool
) -> Iterator[Fault | Problem]:
    """Yield what does not fit between signals, questions and tables."""
    for name, signal in understood.signals.items():
        yield from check_signal(name, signal, mains_hz)
        if segments_readable:
            yield from check_segment_names(name, signal, design.segments)
    yield from check_names_unique(understood.questions)
    yield from check_families(understood.questions)
    for index, question in understood.questions.items():
        yield from check_signal_named(index, question, understood.declared_signals)
        # A signal that lost a key may have lost the very band a question names: that is one fault, not two.
        if question.signal in understood.signals and question.signal not in understood.pruned:
            yield from check_feature(index, question, understood.signals[question.signal])
            if segments_readable:
                yield from check_segment(index, question, understood.signals[question.signal], design)
        yield from check_design(index, question, design)
    yield from check_columns(understood.questions, design)
