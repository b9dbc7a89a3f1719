"""What the names of files say of participants and conditions: guesses from what varies and what does not."""

from __future__ import annotations

import re
from collections import Counter
from dataclasses import dataclass
from typing import TYPE_CHECKING

from bandcairn.drafting.findings import Choice

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence
    from pathlib import PurePosixPath

_PIECE = re.compile(r"[^\W\d_]*\d+|[^\W\d_]+")
_PERSON_WORDS = frozenset(
    {"s", "p", "sub", "subj", "subject", "participant", "part", "person", "pt", "pat", "patient"}
    | {"vp", "vpn", "proband", "prob", "ppt", "pp", "id", "nr"}
)
_COLUMN_OF_WORD = {
    **dict.fromkeys(("ses", "sess", "session", "visit", "day", "week"), "session"),
    **dict.fromkeys(("run", "block", "trial", "take", "rep"), "run"),
    **dict.fromkeys(("cond", "condition"), "condition"),
    "task": "task",
    "group": "group",
}
_LETTERS_AND_NUMBER = re.compile(r"([^\W\d_]*)(\d+)")
_DATE = re.compile(r"\d{6}|\d{8}|\d{14}")


@dataclass(frozen=True, slots=True)
class DesignGuess:
    """What the names of files say.

    Attributes
    ----------
    participants : tuple of str
        For each file; empty where its name does not tell.
    participants_choice : Choice
        What they rest on; value None where no name tells.
    columns : Mapping of str to Choice
        Design columns and what each rests on.
    values : tuple of Mapping
        Values by column for each file.
    """

    participants: tuple[str, ...]
    participants_choice: Choice
    columns: Mapping[str, Choice]
    values: tuple[Mapping[str, str], ...]


@dataclass(frozen=True, slots=True)
class _Names:
    """The tokens of the files whose names are built alike: one column a place."""

    rows: tuple[tuple[str, ...], ...]

    def column(self, place: int) -> tuple[str, ...]:
        return tuple(row[place] for row in self.rows)

    def varies(self, place: int) -> bool:
        return len(set(self.column(place))) > 1

    @property
    def places(self) -> range:
        return range(len(self.rows[0]))

    def word_before(self, place: int) -> str:
        """Return the word that stands before a place in every name, in lower case; empty where none does."""
        before = place - 1
        if place == 0 or self.varies(before) or not self.rows[0][before].isalpha():
            return ""
        return self.rows[0][before].lower()


def guess_design(files: Sequence[PurePosixPath]) -> DesignGuess:
    """Split names at ``_``, ``-``, blanks and between letters and numbers, and tell the parts that vary.

    Parameters
    ----------
    files : sequence of PurePosixPath
        At least one, relative to one folder; the folders in between are parts of the name.

    Returns
    -------
    DesignGuess
    """
    tokens = _tokens(files)
    length = Counter(len(row) for row in tokens).most_common(1)[0][0]
    alike = [number for number, row in enumerate(tokens) if len(row) == length]
    names = _Names(tuple(tokens[number] for number in alike))
    place = _participant_place(names) if length else None
    if place is None:
        why = "one name for each person: the file names do not tell"
        return DesignGuess(("",) * len(files), Choice(None, why), {}, ({},) * len(files))
    columns = _columns(names, place)
    participants, values = [""] * len(files), [dict.fromkeys(columns, "") for _ in files]
    for number in alike:
        participants[number] = tokens[number][place]
        values[number] = {name: tokens[number][where] for name, where in columns.items()}
    why = f"part {place + 1} of the file names, {_some(names.column(place))}"
    blanks = len(files) - len(alike)
    choice = Choice("participant", why, guessed=True)
    if blanks:
        choice = Choice(None, f"{why}; {blanks} files are named differently and are blank")
    reasons = {
        name: Choice(name, f"part {where + 1} of the file names, {_some(names.column(where))}", guessed=True)
        for name, where in columns.items()
    }
    return DesignGuess(tuple(participants), choice, reasons, tuple(values))


def _tokens(files: Sequence[PurePosixPath]) -> list[tuple[str, ...]]:
    """Return the parts of each name; folders that all files share are left away."""
    folders = [file.parent.parts for file in files]
    shared = 0
    while all(len(parts) > shared for parts in folders) and len({parts[shared] for parts in folders}) == 1:
        shared += 1
    texts = [(*parts[shared:], file.stem) for parts, file in zip(folders, files, strict=True)]
    return [tuple(piece for text in row for piece in _PIECE.findall(text)) for row in texts]


def _participant_place(names: _Names) -> int | None:
    """Return the place that most looks like a person's name; None where none does."""
    scored = [(_person_score(names, place), len(set(names.column(place))), -place) for place in names.places]
    score, _, negative_place = max(scored)
    if score > 0:
        return -negative_place
    varying = [place for place in names.places if names.varies(place)]
    # A single varying word: another one in each file is a person's, a few that return are conditions.
    if len(varying) == 1 and len(set(names.column(varying[0]))) == len(names.rows):
        return varying[0]
    return None


def _person_score(names: _Names, place: int) -> int:
    column = names.column(place)
    matches = [_LETTERS_AND_NUMBER.fullmatch(token) for token in column]
    if any(match is None or _DATE.fullmatch(token) for match, token in zip(matches, column, strict=True)):
        return 3 if names.word_before(place) in _PERSON_WORDS and names.varies(place) else 0
    prefixes = {match[1].lower() for match in matches if match}
    before = names.word_before(place)
    if prefixes & _COLUMN_OF_WORD.keys() or (prefixes == {""} and before in _COLUMN_OF_WORD):
        return 0
    if prefixes <= _PERSON_WORDS or before in _PERSON_WORDS:
        return 3
    return 2 if names.varies(place) else 0


def _columns(names: _Names, participant_place: int) -> dict[str, int]:
    """Return the design columns by name, with their places."""
    people = names.column(participant_place)
    columns: dict[str, int] = {}
    for place in names.places:
        column = names.column(place)
        counter = len(set(column)) == len(column) > 4  # another number in each file says nothing of a design
        same = len(set(zip(people, column, strict=True))) == len(set(people)) == len(set(column))
        # What goes with the participant one to one is the participant once more, as in p1/p1_day.edf.
        if same or not names.varies(place) or counter:
            continue
        if all(_DATE.fullmatch(token) for token in column):
            continue
        name = _column_name(names, place, people)
        number = sum(known == name or known.startswith(f"{name}_") for known in columns)
        columns[f"{name}_{number + 1}" if number else name] = place
    return columns


def _column_name(names: _Names, place: int, people: tuple[str, ...]) -> str:
    column = names.column(place)
    matches = [_LETTERS_AND_NUMBER.fullmatch(token) for token in column]
    words = {match[1].lower() if match else "" for match in matches}
    for word in (*words, names.word_before(place)):
        if word in _COLUMN_OF_WORD and len(words) == 1:
            return _COLUMN_OF_WORD[word]
    levels: dict[str, set[str]] = {}
    for person, level in zip(people, column, strict=True):
        levels.setdefault(person, set()).add(level)
    return "group" if all(len(found) == 1 for found in levels.values()) else "condition"


def _some(values: Sequence[str]) -> str:
    """Return the first few different values."""
    different = tuple(dict.fromkeys(values))
    return ", ".join(different[:4]) + (" ..." if len(different) > 4 else "")
