"""Carrying out nodes: fetch the parents, compute, record, put. One node's failure stays its own."""

from __future__ import annotations

import json
import os
import traceback
from dataclasses import asdict, dataclass
from pathlib import PurePath
from time import perf_counter
from typing import TYPE_CHECKING, Any

from bandcairn.errors import DamagedNodeError, RecordingError
from bandcairn.execution.compute import compute
from bandcairn.execution.failure import Failure
from bandcairn.execution.threads import hold_to_one_thread
from bandcairn.nodes.plan import plan_study_nodes
from bandcairn.provenance.record import make_record, now
from bandcairn.store.layout import present_keys
from bandcairn.store.store import Store

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable

    from bandcairn.execution.project import Project
    from bandcairn.nodes.node import Node
    from bandcairn.store.frame import Frame


class _ParentFailedError(RecordingError):
    """A node above has failed; its own failure is the one to tell."""


class Worker:
    """Computes nodes of one opened study. Safe to share between threads that work on different recordings.

    Parameters
    ----------
    project : Project
        The opened study.
    report : callable
        Called with each node that has been dealt with and the seconds it took.
    """

    def __init__(self, project: Project, report: Callable[[Node, float], None] = lambda *_: None) -> None:
        hold_to_one_thread()
        self.project = project
        self.store = Store(project.store_folder)
        self._report = report
        self._nodes = project.plan.nodes
        self._failed: set[str] = set()

    def work(self, nodes: Iterable[Node]) -> Work:
        """Compute those of the nodes that are missing.

        Returns
        -------
        Work
            The records of the nodes computed, and the failures.
        """
        done = Work([], [])
        for node in nodes:
            if self.store.has(node.step, node.key):
                continue
            try:
                self._make(node, done.records)
            except _ParentFailedError:
                self._failed.add(node.key)
            except RecordingError as error:
                self._fail(node, done, str(error))
            except Exception as error:  # noqa: BLE001 - a fault in one recording must not stop the others
                fault = _trace(error)
                self._fail(node, done, f"fault of bandcairn: {type(error).__name__}: {error}", fault)
        return done

    def plan_study_nodes(self) -> list[Node]:
        """Return the tables and statistics over the recordings whose features exist now, parents first."""
        recording_nodes = self.project.plan.recording_nodes
        present = present_keys(self.store.folder, recording_nodes.values())
        planned = plan_study_nodes(self.project.study, self.project.plan.slots, present.__contains__)
        self._nodes.update(planned)
        return list(planned.values())

    def heal(self, nodes: Iterable[Node]) -> list[dict[str, Any]]:
        """Read nodes that shall be whole, and compute the damaged ones anew.

        Returns
        -------
        list of dict
            The records of the nodes computed.
        """
        records: list[dict[str, Any]] = []
        for node in nodes:
            self._frame(node.key, records)
        return records

    def _fail(self, node: Node, done: Work, reason: str, fault: str = "") -> None:
        self._failed.add(node.key)
        # A name of a folder may tell more than it should: results are handed on.
        reason = reason.replace(f"{self.project.folder}{os.sep}", "")
        done.failures.append(Failure(node.recording, node.signal, node.step, reason, fault))

    def _make(self, node: Node, records: list[dict[str, Any]]) -> Frame:
        parents = {role: self._frame(key, records) for role, key in node.parents}
        started, clock = now(), perf_counter()
        frame = compute(node, parents, self.project)
        seconds = perf_counter() - clock
        records.append(self.store.put(node.step, node.key, frame, make_record(node, started, seconds)))
        self._report(node, seconds)
        return frame

    def _frame(self, key: str, records: list[dict[str, Any]]) -> Frame:
        """Return a parent's data; a damaged or lost parent is computed anew."""
        if key in self._failed:
            raise _ParentFailedError(key)
        node = self._nodes[key]
        try:
            return self.store.get(node.step, key)
        except DamagedNodeError:
            self.store.remove(node.step, key)
            return self._make(node, records)


def _trace(error: BaseException) -> str:
    """Return where an error came from, innermost last, without the folders of this machine."""
    frames = traceback.extract_tb(error.__traceback__)
    places = (f"{PurePath(frame.filename).name}, line {frame.lineno}, in {frame.name}" for frame in frames)
    return "\n".join((*places, type(error).__name__))


@dataclass(frozen=True, slots=True)
class Work:
    """What came of a batch.

    Attributes
    ----------
    records : list of dict
        Provenance records of the nodes that were computed.
    failures : list of Failure
        The nodes that could not be.
    """

    records: list[dict[str, Any]]
    failures: list[Failure]

    def to_json(self) -> str:
        """Return the work as the text of a receipt."""
        return json.dumps({"records": self.records, "failures": [asdict(f) for f in self.failures]})

    def log(self) -> str:
        """Return the work as lines for a person: nodes with their seconds, failures with their reasons."""
        made = [
            f"{record['step']} {record['recording']} {record['seconds']:.3f} s" for record in self.records
        ]
        failed = [f"FAILED {f.step} {f.recording} {f.signal}: {f.reason}\n{f.fault}" for f in self.failures]
        return "".join(f"{line}\n" for line in (*made, *failed))

    @classmethod
    def from_json(cls, text: str) -> Work:
        """Return the work that a receipt tells of."""
        told = json.loads(text)
        return cls(told["records"], [Failure(**failure) for failure in told["failures"]])
