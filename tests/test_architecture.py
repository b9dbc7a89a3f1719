"""The house: one-way imports, heavy libraries behind one door each, and rules that no linter holds."""

from __future__ import annotations

import ast
import re
import subprocess
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import pytest

if TYPE_CHECKING:
    from collections.abc import Iterator

ROOT = Path(__file__).parent.parent
PACKAGE = ROOT / "src" / "bandcairn"
# From the ground up. A part may import those on the lines before its own; those on one line never import one another.
LAYERS = (
    ("errors",),
    ("units",),
    ("signal",),
    ("study", "recordings", "steps", "statistics"),
    ("nodes",),
    ("store",),
    ("provenance",),
    ("execution",),
    ("report",),
    ("demo", "drafting", "api"),
    ("cli",),
)
LEVEL = {name: level for level, layer in enumerate(LAYERS) for name in layer}
# Library -> the only part that may import it; None: no part may.
DOORS = {"pyarrow": "store", "edfio": "recordings", "mne": "recordings", "snakemake": None}
MOST_LINES = 40
# Catching everything is the duty of the one place that keeps recordings apart, and of the one that speaks to a user.
CATCH_ALL = {"execution/worker.py", "cli/app.py"}
TOP_LEVEL = {
    "README.md",
    "DEVELOPERS.md",
    "pyproject.toml",
    "LICENSE",
    "workflow",
    "src",
    "tests",
    "config",
    "reference_checks",
}
MACHINE_PATH = re.compile(
    r"(?<![\w.])/(?:home|root|tmp|Users|work|mnt|opt|srv|private|var/folders)/\w|[A-Z]:\\\\?Users"
)


@dataclass(frozen=True, slots=True)
class Import:
    """One import statement, wherever it stands: at the top, under TYPE_CHECKING or in a function."""

    file: str
    line: int
    module: str
    statement: str

    @property
    def part(self) -> str:
        """The part of the package that imports."""
        return Path(self.file).with_suffix("").parts[0]

    def __str__(self) -> str:
        return f"src/bandcairn/{self.file}:{self.line}: {self.statement}"


def sources() -> Iterator[tuple[str, ast.Module]]:
    """Yield every module of the package with its path below the package."""
    for path in sorted(PACKAGE.rglob("*.py")):
        yield path.relative_to(PACKAGE).as_posix(), ast.parse(path.read_text("utf-8"))


def imports() -> Iterator[Import]:
    """Yield every import of the package."""
    for file, tree in sources():
        yield from imports_of(file, tree)


def imports_of(file: str, tree: ast.Module) -> Iterator[Import]:
    """Yield every import of a module."""
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            modules = [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            # `from bandcairn import store` names a part only in its list.
            modules = [f"{node.module}.{alias.name}" for alias in node.names]
        else:
            continue
        for module in modules:
            yield Import(file, node.lineno, module, ast.unparse(node))


def against_direction(found: Import) -> bool:
    """Tell whether an import leads upwards, or to a neighbour."""
    top, *below = found.module.split(".")
    if top != "bandcairn" or found.file == "__init__.py":
        return False
    imported = below[0] if below else "__init__"
    if imported == found.part:
        return False
    if {imported, found.part} - LEVEL.keys():
        return True  # the package itself, or a part that has no place in the list
    return LEVEL[imported] >= LEVEL[found.part]


def tracked_files() -> list[str]:
    """Return the files under version control."""
    listed = subprocess.run(["git", "ls-files", "-z"], cwd=ROOT, capture_output=True, check=False)
    if listed.returncode:
        pytest.skip("not a clone: the files under version control cannot be told")
    return [name for name in listed.stdout.decode().split("\0") if name]


def test_every_part_has_its_place_in_the_order() -> None:
    """A new part is given a level before it may be imported."""
    parts = {Path(file).with_suffix("").parts[0] for file, _ in sources()} - {"__init__"}
    assert parts <= LEVEL.keys()


def test_imports_lead_one_way() -> None:
    """Numerics know nothing of files, planning nothing of computing, and so on up."""
    assert [str(found) for found in imports() if against_direction(found)] == []


@pytest.mark.parametrize(
    ("file", "statement"),
    [
        ("steps/filter.py", "from bandcairn.study.models import FilterStage"),
        ("nodes/plan.py", "import bandcairn.store.store"),
        ("nodes/plan.py", "from bandcairn import execution"),
        ("signal.py", "if TYPE_CHECKING:\n    from bandcairn.recordings import RawSignal"),
        ("store/store.py", "def put():\n    from bandcairn.provenance import record"),
        ("cli/run.py", "from bandcairn import Study"),
    ],
)
def test_an_import_against_the_direction_is_found(file: str, statement: str) -> None:
    """Wherever it hides: the rule itself is held."""
    assert all(against_direction(found) for found in imports_of(file, ast.parse(statement)))


@pytest.mark.parametrize("library", DOORS)
def test_a_heavy_library_has_one_door(library: str) -> None:
    """Whatever replaces it one day, one part alone changes."""
    entering = [found for found in imports() if found.module.split(".")[0] == library]
    assert [str(found) for found in entering if found.part != DOORS[library]] == []


def test_nothing_but_two_places_catches_everything() -> None:
    """A fault that is swallowed is a wrong number that nobody hears of."""
    wide = {"Exception", "BaseException"}
    found = [
        f"src/bandcairn/{file}:{node.lineno}"
        for file, tree in sources()
        for node in ast.walk(tree)
        if isinstance(node, ast.ExceptHandler) and file not in CATCH_ALL and names_of(node.type) & wide
        # What is raised again is not swallowed.
        if not (isinstance(node.body[-1], ast.Raise) and node.body[-1].exc is None)
    ]
    assert found == []


def names_of(caught: ast.expr | None) -> set[str]:
    """Return what an except clause catches; a bare one catches everything."""
    if caught is None:
        return {"BaseException"}
    return {node.id for node in ast.walk(caught) if isinstance(node, ast.Name)}


def test_every_module_says_what_it_is() -> None:
    """A docstring first, then postponed annotations."""
    silent = [file for file, tree in sources() if not ast.get_docstring(tree)]
    eager = [
        file
        for file, tree in sources()
        if not any(
            isinstance(node, ast.ImportFrom)
            and node.module == "__future__"
            and "annotations" in {alias.name for alias in node.names}
            for node in tree.body
        )
        and len(tree.body) > 1
    ]
    assert (silent, eager) == ([], [])


def test_no_function_outgrows_a_screen() -> None:
    """Past forty lines there is a second function in it."""
    long = [
        f"src/bandcairn/{file}:{node.lineno}: {node.name}, {body_lines(node)} lines"
        for file, tree in sources()
        for node in ast.walk(tree)
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef) and body_lines(node) > MOST_LINES
    ]
    assert long == []


def body_lines(function: ast.FunctionDef | ast.AsyncFunctionDef) -> int:
    """Return the number of lines of a function's body, without its docstring."""
    body = function.body[1:] if ast.get_docstring(function) else function.body
    return body[-1].end_lineno - body[0].lineno + 1 if body and body[-1].end_lineno else 0


def test_the_top_of_the_repository_holds_what_it_should() -> None:
    """Whoever opens it finds a handful of names, each of which explains itself."""
    top = {name.split("/")[0] for name in tracked_files()}
    assert sorted(name for name in top if not name.startswith(".") and name not in TOP_LEVEL) == []
    assert sorted(TOP_LEVEL - top) == []


def test_no_file_names_a_path_of_a_machine() -> None:
    """A clone works anywhere, and says nothing of where it was written."""
    found = []
    for name in tracked_files():
        path = ROOT / name
        if path == Path(__file__) or not path.is_file():
            continue
        try:
            text = path.read_text("utf-8")
        except UnicodeDecodeError:
            continue
        found += [
            f"{name}:{number}: {line.strip()[:100]}"
            for number, line in enumerate(text.splitlines(), start=1)
            if MACHINE_PATH.search(line)
        ]
    assert found == []
