"""The results: what the paper prints, gathered from the nodes and written as a whole."""

from __future__ import annotations

import hashlib
import json
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

from bandcairn.errors import DamagedNodeError
from bandcairn.execution.descriptives import DESCRIPTIVES_SCHEMA, descriptives_rows
from bandcairn.execution.exclusions import (
    EXCLUSIONS_SCHEMA,
    Place,
    decided_channels,
    epochs_rows,
    epochs_schema,
    rejected_epochs,
    repaired_recordings,
    with_words,
)
from bandcairn.execution.failure import Failure
from bandcairn.nodes.plan import design_columns

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence
    from pathlib import Path

    from bandcairn.execution.project import Project
    from bandcairn.nodes.node import Node
    from bandcairn.store.store import Store
    from bandcairn.study.models import Question

RUN_FILE = "run.json"
# The table that came last to the results: a run of an earlier version did not write it.
_LATEST = "descriptives.parquet"


@dataclass(frozen=True, slots=True)
class Outcome:
    """What a run has come to.

    Attributes
    ----------
    failures : tuple of Failure
        What could not be computed; empty if all is done.
    """

    failures: tuple[Failure, ...]

    @classmethod
    def of_run(cls, run: Mapping[str, Any]) -> Outcome:
        """Return the outcome that a run has written down."""
        return cls(tuple(Failure(**failure) for failure in run["failures"]))

    @property
    def failed_recordings(self) -> tuple[str, ...]:
        """Names of the recordings with a failure, sorted."""
        return tuple(sorted({failure.recording for failure in self.failures}))

    @property
    def failed_sentence(self) -> str:
        """How many recordings have failed, in words."""
        names = self.failed_recordings
        counted = "1 recording has failed" if len(names) == 1 else f"{len(names)} recordings have failed"
        return f"{counted}: {', '.join(names[:5])}{', …' if len(names) > 5 else ''}"


def published(project: Project) -> bool:
    """Tell whether the results on disk are those of the plan, each file as it was written."""
    run = read_run(project.results_folder)
    if run.get("plan") != project.plan.id or run.get("words", "") != _words(project):
        return False
    files: Mapping[str, str] = run["files"]
    return _LATEST in files and all(
        _sha256(project.results_folder / name) == digest for name, digest in files.items()
    )


def _words(project: Project) -> str:
    """Return a digest of the words that the results hold and no key does: decisions, and the roles of questions."""
    told = [f"{row.recording} {row.signal} {row.channel} {row.told}" for row in project.study.decisions]
    told += [f"{question.name} is {question.role}" for question in _questions(project) if question.role]
    return hashlib.sha256("\n".join(told).encode()).hexdigest()[:16] if told else ""


def read_run(results: Path) -> dict[str, Any]:
    """Return what the last run has written of itself; empty if there was none."""
    try:
        run = json.loads((results / RUN_FILE).read_text("utf-8"))
    except (OSError, ValueError):
        return {}
    return run if isinstance(run, dict) else {}


def publish(
    project: Project,
    study_nodes: Sequence[Node],
    store: Store,
    records: Mapping[str, Mapping[str, Any]],
    failures: Sequence[Failure],
) -> Outcome:
    """Write the results of a study.

    Parameters
    ----------
    project : Project
        The study.
    study_nodes : sequence of Node
        Its tables and statistics as far as recordings have succeeded.
    store : Store
        Holds the nodes.
    records : mapping of str to mapping
        Provenance records of the nodes that this run has computed, by key.
    failures : sequence of Failure
        What this run could not compute.

    Returns
    -------
    Outcome
    """
    from bandcairn.execution.group_nodes import STATISTICS_COLUMNS
    from bandcairn.execution.quality_nodes import VERDICT_COLUMNS
    from bandcairn.provenance.ledger import LEDGER_SCHEMA
    from bandcairn.store.tables import write_table

    told = (*_unreadable(project), *_at_every_place(project, failures))
    failures = sorted(told, key=lambda failure: (failure.recording, failure.signal))
    frames = {node.key: _rows(store, node) for node in study_nodes}
    features = _features(
        project,
        [
            row | {"signal": node.signal}
            for node in study_nodes
            if node.step == "table"
            for row in frames[node.key]
        ],
    )
    counts = list(epochs_rows(features))
    verdicts = [row for node in study_nodes if node.step == "verdict" for row in frames[node.key]]
    tables = {
        "features": (_features_schema(project), with_words(project, features)),
        "statistics": (
            STATISTICS_COLUMNS | {"node": "text"} | ({"role": "text"} if _roles_told(project) else {}),
            _answers(project, study_nodes, frames),
        ),
        "descriptives": (DESCRIPTIVES_SCHEMA, _descriptives(project, study_nodes, frames)),
        "quality": (VERDICT_COLUMNS | {"passed": "yes_no"}, [_with_truth(row) for row in verdicts]),
        "epochs": (epochs_schema(project), counts),
        "exclusions": (EXCLUSIONS_SCHEMA, list(_exclusions(project, counts, verdicts, failures))),
        "ledger": (LEDGER_SCHEMA, _ledger(project, study_nodes, store, records)),
    }
    files = [
        path
        for name, (schema, rows) in tables.items()
        for path in write_table(project.results_folder, name, schema, rows)
    ]
    _write_run(project, files, failures, len(records))
    return Outcome(tuple(failures))


def _rows(store: Store, node: Node) -> list[dict[str, Any]]:
    from bandcairn.execution.group_nodes import frame_rows

    return frame_rows(store.get(node.step, node.key))


def _features_schema(project: Project) -> dict[str, str]:
    return {
        "recording": "text",
        "participant": "text",
        **dict.fromkeys(design_columns(project.study), "text"),
        "signal": "text",
        "channel": "text",
        "segment": "text",
        "feature": "text",
        "band": "text",
        "value": "number",
        "unit": "text",
        "epochs_used": "count",
        "epochs_total": "count",
        "note": "text",
        "node": "text",
    }


def _features(project: Project, rows: Sequence[Mapping[str, Any]]) -> list[dict[str, Any]]:
    """Return the feature rows as the contract has them, sorted by their columns; the counts ride along."""
    from bandcairn.execution.group_nodes import DESIGN

    design = design_columns(project.study)
    told = [{**row, **{name: row[f"{DESIGN}{name}"] for name in design}} for row in rows]
    order = ("recording", "participant", *design, "signal", "channel", "segment", "feature", "band")
    return sorted(told, key=lambda row: tuple(row[column] or "" for column in order))


def _answers(
    project: Project, study_nodes: Sequence[Node], frames: Mapping[str, Sequence[dict[str, Any]]]
) -> list[dict[str, Any]]:
    """Return the rows of the statistics, each with the node it comes from and the role of its question."""
    role = {question.name: question.role for question in _questions(project)}
    nodes = [node for node in study_nodes if node.step == "statistics"]
    rows = [
        row | {"node": node.key, "role": role[row["question"]]} for node in nodes for row in frames[node.key]
    ]
    return _in_order_of_questions(project, rows)


def _descriptives(
    project: Project, study_nodes: Sequence[Node], frames: Mapping[str, Sequence[dict[str, Any]]]
) -> list[dict[str, Any]]:
    return _in_order_of_questions(project, list(descriptives_rows(study_nodes, frames)))


def _roles_told(project: Project) -> bool:
    """Tell whether the study says of any question what part it plays; else the column would be empty."""
    return any(question.role for question in _questions(project))


def _questions(project: Project) -> tuple[Question, ...]:
    return project.study.description.questions


def _in_order_of_questions(project: Project, rows: Sequence[dict[str, Any]]) -> list[dict[str, Any]]:
    place = {question.name: index for index, question in enumerate(_questions(project))}
    return sorted(rows, key=lambda row: place[row["question"]])


def _with_truth(row: Mapping[str, Any]) -> dict[str, Any]:
    return {**row, "passed": {"yes": True, "no": False, None: None}[row["passed"]]}


def _unreadable(project: Project) -> list[Failure]:
    """Return the recordings whose raw file cannot be read: they have no node that could fail."""
    return [Failure(name, "", "load", reason) for name, reason in sorted(project.survey.unreadable.items())]


def _at_every_place(project: Project, failures: Sequence[Failure]) -> Iterator[Failure]:
    """Yield each failure at every place where its node stands: recordings of equal content share their nodes."""
    slots = project.plan.slots
    places: dict[str, list[tuple[str, str]]] = {}
    for (recording, signal, _), key in slots.items():
        places.setdefault(key, []).append((recording, signal))
    for failure in failures:
        own = failure.recording, failure.signal
        for recording, signal in places.get(slots.get((*own, failure.step), ""), [own]):
            yield replace(failure, recording=recording, signal=signal)


def _exclusions(
    project: Project,
    counts: Sequence[Mapping[str, Any]],
    verdicts: Sequence[Mapping[str, Any]],
    failures: Sequence[Failure],
) -> Iterator[dict[str, Any]]:
    """Yield all that was left out: recordings that failed, channels beyond a limit or by decision, epochs."""
    for failure in failures:
        what = "recording" if not failure.signal else "signal"
        yield Place(failure.recording, failure.signal).row(what, failure.sentence)
    yield from repaired_recordings(project)
    yield from decided_channels(project)
    for row in verdicts:
        if row["passed"] == "no":
            place = Place(row["recording"], row["signal"], row["channel"])
            yield place.row(_what_failed(project, row), row["told"])
    yield from rejected_epochs(project, counts)


def _what_failed(project: Project, row: Mapping[str, Any]) -> str:
    """Return what a failure in quality is of: a channel, a band or features, and whether they are kept."""
    from bandcairn.execution.group_nodes import consequence

    limits = project.study.description.signals[row["signal"]].quality
    of = consequence(row)
    if of == "advice":
        return "features, kept"
    kept = (limits.on_failure if of == "channel" else limits.on_band_failure) == "flag"
    return f"{of}, kept" if kept else of


def _ledger(
    project: Project, study_nodes: Sequence[Node], store: Store, records: Mapping[str, Mapping[str, Any]]
) -> list[dict[str, Any]]:
    """Return the rows of the ledger: what this run knows, what the last ledger knew, else what the file says."""
    from bandcairn.provenance.ledger import ledger_rows, read_ledger, records_of
    from bandcairn.store.layout import present_keys

    nodes = [*project.plan.recording_nodes.values(), *study_nodes]
    present = present_keys(store.folder, nodes)
    known = {**records_of(read_ledger(project.results_folder)), **records}
    told = {
        node.key: known.get(node.key) or _stored_record(store, node) for node in nodes if node.key in present
    }
    whole = {key: record for key, record in told.items() if record}
    return ledger_rows([node for node in nodes if node.key in whole], whole)


def _stored_record(store: Store, node: Node) -> dict[str, Any]:
    """Return what a node's file tells of itself; a damaged file is removed, so that the next run computes it anew."""
    try:
        return store.record(node.step, node.key)
    except DamagedNodeError:
        store.remove(node.step, node.key)
        return {}


def _write_run(project: Project, files: Sequence[Path], failures: Sequence[Failure], computed: int) -> None:
    from dataclasses import asdict

    from bandcairn.provenance.record import now, software
    from bandcairn.store.tables import replace_file

    run = {
        "plan": project.plan.id,
        "words": _words(project),
        "finished": now().isoformat(timespec="seconds"),
        "nodes": len(project.plan.nodes),
        "computed": computed,
        "failures": [asdict(failure) for failure in failures],
        "software": software(),
        "files": {path.name: _sha256(path) for path in files},
    }
    text = json.dumps(run, indent=2, ensure_ascii=False) + "\n"
    replace_file(project.results_folder / RUN_FILE, lambda path: path.write_text(text, "utf-8"))


def _sha256(path: Path) -> str:
    try:
        with path.open("rb") as file:
            return hashlib.file_digest(file, "sha256").hexdigest()
    except OSError:
        return ""
