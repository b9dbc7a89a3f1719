"""The table of reference checks is complete and names nothing that is gone."""

from __future__ import annotations

import ast
import re
from pathlib import Path

import pytest

_FOLDER = Path(__file__).parent.parent / "reference_checks"
_MODULES = sorted(_FOLDER.glob("test_*.py"))
_COLUMNS = 6


def _checks(module: Path) -> list[str]:
    """Return the names of a module's checks, in their order."""
    body = ast.parse(module.read_text("utf-8")).body
    return [node.name for node in body if isinstance(node, ast.FunctionDef) and node.name.startswith("test_")]


def _rows() -> dict[str, list[str]]:
    """Return the rows of README.md that name a check, by the module whose heading they stand below."""
    rows: dict[str, list[str]] = {}
    module = ""
    for line in (_FOLDER / "README.md").read_text("utf-8").splitlines():
        if line.startswith("## "):
            module = line.removeprefix("## ")
            rows[module] = []
        elif line.startswith("| `test_"):
            rows[module].append(line)
    return rows


def _name(row: str) -> str:
    match = re.match(r"\| `(\w+)`", row)
    return match[1] if match else row


def test_every_module_has_its_table_and_no_table_is_left_over() -> None:
    """A module of checks that lands has a heading in README.md; one that goes takes its heading with it."""
    assert sorted(_rows()) == [module.name for module in _MODULES]


@pytest.mark.parametrize("module", _MODULES, ids=lambda module: module.name)
def test_every_check_of_a_module_has_a_row_under_its_name(module: Path) -> None:
    """README.md lists each check once, in the order of the module: add a row, or take out the one that is gone."""
    named = [_name(row) for row in _rows().get(module.name, [])]

    assert named == _checks(module)


@pytest.mark.parametrize("row", [row for rows in _rows().values() for row in rows], ids=_name)
def test_every_row_states_quantity_truth_source_tolerance_and_reason(row: str) -> None:
    """No cell is empty, and the kind of truth is one that README.md explains."""
    cells = [cell.strip() for cell in row.strip("|").split("|")]
    explained = re.findall(r"^\| ([a-z ]+) \|", (_FOLDER / "README.md").read_text("utf-8"), re.MULTILINE)

    assert len(cells) == _COLUMNS
    assert all(cells)
    assert cells[2] in explained
