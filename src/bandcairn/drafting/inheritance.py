"""The files of a BIDS dataset that describe a recording, by the entities in their names.

A file describes every recording at or below its folder whose name has all of its entities and values. Of JSON
files all that apply are merged, from the top of the dataset down; of tables the nearest one counts alone.

References
----------
Gorgolewski K.J. et al. (2016). The brain imaging data structure, a format for organizing and describing outputs
of neuroimaging experiments. Scientific Data 3, 160044; specification 1.11, section on the inheritance principle.
"""

from __future__ import annotations

import csv
import json
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Mapping
    from pathlib import Path


@dataclass(frozen=True, slots=True)
class BidsName:
    """A file name taken apart: ``sub-01_task-rest_eeg.edf``.

    Attributes
    ----------
    entities : Mapping of str to str
        ``{"sub": "01", "task": "rest"}``.
    suffix : str
        ``"eeg"``.
    extension : str
        ``".edf"``, in lower case.
    """

    entities: Mapping[str, str]
    suffix: str
    extension: str

    @classmethod
    def of(cls, name: str) -> BidsName:
        """Take a file name apart."""
        stem, dot, extension = name.partition(".")
        *pairs, suffix = stem.split("_")
        entities = dict(pair.split("-", 1) for pair in pairs if "-" in pair)
        return cls(entities, suffix, (dot + extension).lower())

    def describes(self, other: BidsName) -> bool:
        """Tell whether this file's entities all stand in another's name with the same values."""
        return self.entities.items() <= other.entities.items()


@dataclass(slots=True)
class Sidecars:
    """The describing files of one dataset, each read once.

    Attributes
    ----------
    root : Path
        Folder of dataset_description.json.
    problems : list of str
        Files that could not be read.
    """

    root: Path
    problems: list[str] = field(default_factory=list)
    _listings: dict[Path, list[tuple[Path, BidsName]]] = field(default_factory=dict)
    _contents: dict[Path, Any] = field(default_factory=dict)

    def merged(self, file: Path, suffix: str) -> dict[str, Any]:
        """Return the JSON that applies to a file: lower folders and names of more entities win."""
        merged: dict[str, Any] = {}
        for path in self.applying(file, suffix, ".json"):
            merged |= self.json(path)
        return merged

    def nearest(self, file: Path, suffix: str) -> list[dict[str, str]] | None:
        """Return the rows of the nearest table that applies to a file; None where there is none."""
        tables = self.applying(file, suffix, ".tsv")
        return self.table(tables[-1]) if tables else None

    def applying(self, file: Path, suffix: str, extension: str) -> list[Path]:
        """Return the files that describe another, the most particular one last."""
        name = BidsName.of(file.name)
        found: list[Path] = []
        for folder in (self.root, *(self.root / part for part in _folders_between(self.root, file))):
            here = [
                (len(other.entities), path)
                for path, other in self._listing(folder)
                if (other.suffix, other.extension) == (suffix, extension) and other.describes(name)
            ]
            found += [path for _, path in sorted(here)]
        return found

    def json(self, path: Path) -> dict[str, Any]:
        """Return the content of a JSON file; empty, and told, where it cannot be read."""
        if path not in self._contents:
            self._contents[path] = self._read_json(path)
        content: dict[str, Any] = self._contents[path]
        return content

    def table(self, path: Path) -> list[dict[str, str]]:
        """Return the rows of a table, ``n/a`` as blank; empty, and told, where it cannot be read."""
        if path not in self._contents:
            self._contents[path] = self._read_table(path)
        rows: list[dict[str, str]] = self._contents[path]
        return rows

    def _listing(self, folder: Path) -> list[tuple[Path, BidsName]]:
        if folder not in self._listings:
            files = sorted(path for path in folder.iterdir() if path.suffix in (".json", ".tsv"))
            self._listings[folder] = [(path, BidsName.of(path.name)) for path in files]
        return self._listings[folder]

    def _read_json(self, path: Path) -> dict[str, Any]:
        try:
            content = json.loads(path.read_text("utf-8-sig"))
        except (OSError, ValueError) as error:
            self._tell(path, error)
            return {}
        return content if isinstance(content, dict) else {}

    def _read_table(self, path: Path) -> list[dict[str, str]]:
        try:
            text = path.read_text("utf-8-sig")
        except (OSError, ValueError) as error:
            self._tell(path, error)
            return []
        lines = list(csv.reader(text.splitlines(), delimiter="\t", quoting=csv.QUOTE_NONE))
        header = [cell.strip() for cell in lines[0]] if lines else []
        rows = []
        for line in lines[1:]:
            cells = ["" if cell.strip() == "n/a" else cell.strip() for cell in line]
            if any(cells):
                rows.append(dict(zip(header, [*cells, *[""] * len(header)], strict=False)))
        return rows

    def _tell(self, path: Path, error: Exception) -> None:
        self.problems.append(f"{path.relative_to(self.root).as_posix()} cannot be read ({error}).")


def _folders_between(root: Path, file: Path) -> list[Path]:
    """Return the folders from below the root down to that of a file, relative to the root."""
    inside = file.parent.relative_to(root)
    return [inside.parents[number] for number in range(len(inside.parents) - 2, -1, -1)] + [inside]
