"""How this package says no: the file, what was found, what is allowed, what to do."""

from __future__ import annotations

from typing import TYPE_CHECKING

from bandcairn.errors import RecordingError

if TYPE_CHECKING:
    from pathlib import Path


def refusal(path: Path, found: str, allowed: str, remedy: str) -> RecordingError:
    """Return the error to raise for `path`; `found` and `allowed` are phrases, `remedy` is a sentence."""
    return RecordingError(f"{path.name}: found {found}; allowed: {allowed}. {remedy}")


def unreadable(path: Path, error: OSError) -> RecordingError:
    """Return the error to raise when the operating system does not hand out `path`."""
    reason = error.strerror or str(error)
    return refusal(path, reason.lower(), "a readable file", "Check the path and its permissions.")
