"""Run a command and measure what it and all its descendants take. Linux only: memory is read from /proc."""

from __future__ import annotations

import os
import subprocess
import threading
from dataclasses import dataclass
from pathlib import Path
from time import perf_counter
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Sequence

_SAMPLE_EVERY_S = 0.05
_PAGE_BYTES = os.sysconf("SC_PAGE_SIZE")
# One thread of linear algebra a process, on both sides: spinning helpers would only take cores from the other jobs.
_ENVIRONMENT = {**os.environ, "OPENBLAS_NUM_THREADS": "1"}


@dataclass(frozen=True, slots=True)
class Cost:
    """What one run of a command took.

    Attributes
    ----------
    wall_s : float
        From start to end.
    cpu_s : float
        User and system time of the process and of all descendants that were waited for.
    peak_bytes : int
        Largest sum of resident memory over the process and its descendants, looked at every 50 ms. Pages that two
        processes share, and mapped files, count in full: an upper bound.
    """

    wall_s: float
    cpu_s: float
    peak_bytes: int


class CommandFailedError(Exception):
    """A measured command ended with another code than 0."""


def measure(command: Sequence[str | Path]) -> Cost:
    """Run a command to its end and return its cost.

    Raises
    ------
    CommandFailedError
        If it fails; what it has written is told.
    """
    output = subprocess.PIPE
    started = perf_counter()
    process = subprocess.Popen(command, env=_ENVIRONMENT, stdout=output, stderr=subprocess.STDOUT)
    told: list[bytes] = []
    reader = threading.Thread(target=lambda: told.append(process.stdout.read() if process.stdout else b""))
    reader.start()
    watch = _MemoryWatch(process.pid)
    watch.start()
    _, status, usage = os.wait4(process.pid, 0)
    wall_s = perf_counter() - started
    process.returncode = os.waitstatus_to_exitcode(status)
    watch.stop()
    reader.join()
    if process.returncode:
        text = told[0].decode(errors="replace") if told else ""
        raise CommandFailedError(f"{' '.join(map(str, command))} ended with {process.returncode}:\n{text}")
    return Cost(wall_s, usage.ru_utime + usage.ru_stime, watch.peak_bytes)


class _MemoryWatch(threading.Thread):
    """Looks at the resident memory of a tree of processes until told to stop."""

    def __init__(self, root: int) -> None:
        super().__init__(daemon=True)
        self.peak_bytes = 0
        self._root = root
        self._ended = threading.Event()

    def run(self) -> None:
        """Look every 50 ms."""
        while not self._ended.wait(_SAMPLE_EVERY_S):
            self.peak_bytes = max(self.peak_bytes, sum(map(_resident_bytes, _tree(self._root))))

    def stop(self) -> None:
        """End the watch and wait for it."""
        self._ended.set()
        self.join()


def _tree(root: int) -> list[int]:
    """Return a process and its descendants."""
    children: dict[int, list[int]] = {}
    for entry in os.scandir("/proc"):
        if entry.name.isdigit():
            children.setdefault(_parent(int(entry.name)), []).append(int(entry.name))
    tree = [root]
    for process in tree:  # grows while it is walked
        tree += children.get(process, [])
    return tree


def _parent(process: int) -> int:
    """Return the parent of a process; 0 if it has ended."""
    try:
        stat = Path(f"/proc/{process}/stat").read_text("utf-8", errors="replace")
    except OSError:
        return 0
    # The name of the program stands in brackets and may hold anything; state and parent follow it.
    return int(stat.rpartition(")")[2].split()[1])


def _resident_bytes(process: int) -> int:
    try:
        return int(Path(f"/proc/{process}/statm").read_text("ascii").split()[1]) * _PAGE_BYTES
    except (OSError, IndexError):
        return 0
