"""A fault in study.yaml before it has a line number, and the words that all faults share."""

from __future__ import annotations

import difflib
from dataclasses import dataclass
from typing import TYPE_CHECKING

from bandcairn.errors import Problem

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

STUDY_FILE = "study.yaml"

Path = tuple[str | int, ...]


@dataclass(frozen=True, slots=True)
class Fault:
    """What is wrong at one key of study.yaml; the fields are those of `bandcairn.errors.Problem`."""

    path: Path
    found: str
    allowed: str
    remedy: str

    def placed(self, lines: Mapping[str, int]) -> Problem:
        """Return the fault with its line."""
        where = place(self.path, lines)
        return Problem(
            STUDY_FILE, where, written(self.path) or "(file)", self.found, self.allowed, self.remedy
        )


def written(path: Path) -> str:
    """Return a path as people write it: ``signals.eeg.filter[0].cutoff_hz``."""
    steps = "".join(f"[{step}]" if isinstance(step, int) else f".{step}" for step in path)
    return steps.removeprefix(".")


def place(path: Path, lines: Mapping[str, int]) -> str:
    """Return the line of a key, or of the nearest key above it where it is absent, as ``"line 12"``."""
    for length in range(len(path), -1, -1):
        line = lines.get(written(path[:length]))
        if line is not None:
            return f"line {line}"
    return ""


def listed(names: Iterable[object]) -> str:
    """Return names with commas between them, or ``"none"``."""
    return ", ".join(str(name) for name in names) or "none"


def suggestion(name: str, known: Iterable[str], otherwise: str) -> str:
    """Return a question that offers the closest known names, or `otherwise`; of names equally close, all."""
    choices = {choice.casefold(): choice for choice in known}
    close = difflib.get_close_matches(name.casefold(), choices, n=5)
    likeness = {choice: difflib.SequenceMatcher(a=choice, b=name.casefold()).ratio() for choice in close}
    best = [choices[choice] for choice in close if likeness[choice] == max(likeness.values())]
    return f"Did you mean {' or '.join(sorted(best))}?" if best else otherwise
