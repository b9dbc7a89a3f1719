"""Look inside files: their channels and kinds, or why they become no recording."""

from __future__ import annotations

import re
from collections import Counter
from typing import TYPE_CHECKING

from bandcairn.drafting.findings import FoundChannel, LeftOut
from bandcairn.drafting.naming import guess_kind
from bandcairn.errors import RecordingError, UnknownUnitError
from bandcairn.recordings import inspect
from bandcairn.units import microvolts_per

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable, Mapping
    from pathlib import Path

    from bandcairn.signal import ChannelFacts, FileFacts

_DELIMITED = (".csv", ".tsv")
_FEWEST_ROWS = 100  # a table with fewer rows holds no recording


def look_inside(
    folder: Path, files: Iterable[str], progress: Callable[[int, int], None] | None
) -> dict[str, FileFacts | LeftOut]:
    """Inspect files.

    Parameters
    ----------
    folder : Path
        The study folder.
    files : iterable of str
        Relative to it.
    progress : callable, optional
        Called after each file with the number done and the number of all.

    Returns
    -------
    dict
        By file, what it says of itself or why it is left out.
    """
    names = tuple(files)
    found: dict[str, FileFacts | LeftOut] = {}
    for done, name in enumerate(names, start=1):
        found[name] = _inspect(folder, name)
        if progress is not None:
            progress(done, len(names))
    return found


def found_channel(facts: ChannelFacts, kind: str, why: str, *, guessed: bool) -> FoundChannel:
    """Return a channel of a file; one in a unit that cannot be scaled is of no use, whatever its kind."""
    usable = kind
    if kind and facts.unit is not None and not _is_known(facts.unit):
        usable, why = "", f"{kind}, but its unit {facts.unit!r} is not one of voltage"
    label, rate_hz = facts.label, facts.rate_hz
    return FoundChannel(label, usable, why, guessed and bool(usable), rate_hz, facts.unit, facts.n_samples)


def guessed_channels(facts: FileFacts) -> tuple[FoundChannel, ...]:
    """Return the channels of a file with the kinds that their names suggest."""
    kinds = [(channel, guess_kind(channel.label)) for channel in facts.channels]
    return tuple(found_channel(channel, guess.kind, guess.why, guessed=True) for channel, guess in kinds)


def fits_tables(file: str) -> str:
    """Return why a path cannot stand in the recordings table; empty where it can."""
    from bandcairn.study.sheet import lies_inside

    return "" if lies_inside(file) else "its path holds a backslash or an unprintable character"


def unique_names(stems: Mapping[str, str]) -> dict[str, str]:
    """Return a unique name for each file: its stem, or its whole path where stems repeat.

    Parameters
    ----------
    stems : Mapping of str to str
        The wanted name by file.

    Returns
    -------
    dict of str to str
        By file.
    """
    wanted = Counter(stems.values())
    return {
        file: stem if wanted[stem] == 1 else re.sub(r"[/.\s]+", "_", file).strip("_")
        for file, stem in stems.items()
    }


def _is_known(unit: str) -> bool:
    try:
        microvolts_per(unit)
    except UnknownUnitError:
        return False
    return True


def _inspect(folder: Path, name: str) -> FileFacts | LeftOut:
    path = folder / name
    reason = fits_tables(name)
    if reason:
        return LeftOut(name, reason, damaged=True)
    if path.suffix.lower() in _DELIMITED and not _has_rows_of_numbers(path):
        return LeftOut(name, "a table of something else: its first rows are not numbers")
    try:
        facts = inspect(path)
    except RecordingError as error:
        return LeftOut(name, str(error).removeprefix(f"{path}: "), damaged=True)
    if path.suffix.lower() in _DELIMITED and facts.channels[0].n_samples < _FEWEST_ROWS:
        return LeftOut(name, f"a table of {facts.channels[0].n_samples} rows, too few for a recording")
    if not facts.channels:
        return LeftOut(name, "no channels but annotations or triggers")
    return facts


def _has_rows_of_numbers(path: Path) -> bool:
    """Tell whether the second line of a text file is made of numbers; True where that cannot be seen."""
    try:
        with path.open(encoding="utf-8-sig") as file:
            file.readline()
            cells = re.split(r"[,;\t]", file.readline().strip())
    except (OSError, UnicodeDecodeError):
        return True  # the reader tells what is wrong
    return all(re.fullmatch(r'\s*"?[-+.\deE,]+"?\s*|\s*nan\s*', cell, re.IGNORECASE) for cell in cells)
