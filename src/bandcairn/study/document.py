"""YAML read with line numbers: plain Python values, and the line of each key.

Read from PyYAML's node graph rather than its constructors, because YAML 1.1 makes booleans of yes, no, on
and off (a contrast [no, yes] would lose its levels) and reads 1e3 as text, and PyYAML keeps the last of two
equal keys without a word.
"""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import yaml

from bandcairn.errors import Problem
from bandcairn.study.faults import written

if TYPE_CHECKING:
    from collections.abc import Mapping

    from bandcairn.study.faults import Path

# libyaml where PyYAML was built with it; both base loaders leave every scalar as the text that stands there.
_Loader: type[yaml.BaseLoader | yaml.CBaseLoader] = getattr(yaml, "CBaseLoader", yaml.BaseLoader)

_WORDS: dict[str, object] = {"true": True, "false": False, "null": None, "~": None, "": None}
_WHOLE = re.compile(r"[-+]?[0-9]+")
_NUMBER = re.compile(r"[-+]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][-+]?[0-9]+)?")
_PLAIN_TAGS = frozenset(f"tag:yaml.org,2002:{kind}" for kind in ("str", "seq", "map"))


@dataclass(frozen=True, slots=True)
class Document:
    """One YAML file.

    Attributes
    ----------
    content : object
        Dicts, lists, text, numbers, booleans and None.
    lines : Mapping of str to int
        Line of each key and list item, the first being 1, by its path as `bandcairn.study.faults.written`.
    problems : tuple of Problem
        Syntax errors, repeated keys, and constructs that are not read.
    """

    content: object
    lines: Mapping[str, int]
    problems: tuple[Problem, ...]


def read_document(text: str, file: str) -> Document:
    """Read one YAML document.

    Parameters
    ----------
    text : str
        The whole file.
    file : str
        Name of the file, for the problems.

    Returns
    -------
    Document
        With content None where the text is no YAML at all.
    """
    try:
        root = yaml.compose(text, Loader=_Loader)
    except yaml.YAMLError as error:
        return Document(None, {}, (_syntax_problem(error, text, file),))
    reading = _Reading(file)
    content = None if root is None else reading.value(root, ())
    return Document(content, reading.lines, tuple(reading.problems))


def _syntax_problem(error: yaml.YAMLError, text: str, file: str) -> Problem:
    mark = getattr(error, "problem_mark", None)
    position = getattr(error, "position", None)
    line = mark.line + 1 if mark else text.count("\n", 0, position or 0) + 1
    found = getattr(error, "problem", None) or getattr(error, "reason", None) or "unreadable text"
    remedy = "Look at this line and the one above: indentation, a missing colon, an open bracket or quote."
    return Problem(file, f"line {line}", "(syntax)", str(found), "YAML", remedy)


@dataclass(slots=True)
class _Reading:
    """What has been read so far."""

    file: str
    lines: dict[str, int] = field(default_factory=dict)
    problems: list[Problem] = field(default_factory=list)
    open_nodes: set[int] = field(default_factory=set)

    def value(self, node: yaml.Node, path: Path) -> object:
        """Return a node as plain Python."""
        self.lines.setdefault(written(path), node.start_mark.line + 1)
        if node.tag not in _PLAIN_TAGS:
            self._refuse(node, path, f"the tag {node.tag}", "plain values", "Delete the tag.")
            return None
        if isinstance(node, yaml.ScalarNode):
            return node.value if node.style in ("'", '"', "|", ">") else _scalar(node.value)
        if id(node) in self.open_nodes:
            self._refuse(node, path, "an alias inside its own anchor", "values that end", "Write it out.")
            return None
        self.open_nodes.add(id(node))
        value = (
            self._sequence(node, path) if isinstance(node, yaml.SequenceNode) else self._mapping(node, path)
        )
        self.open_nodes.remove(id(node))
        return value

    def _sequence(self, node: yaml.SequenceNode, path: Path) -> list[object]:
        return [self.value(item, (*path, index)) for index, item in enumerate(node.value)]

    def _mapping(self, node: yaml.Node, path: Path) -> dict[str, object]:
        content: dict[str, object] = {}
        for key_node, value_node in node.value:
            if not isinstance(key_node, yaml.ScalarNode):
                self._refuse(key_node, path, "a key that is no text", "text", "Write the key as text.")
                continue
            key: str = key_node.value
            here = (*path, key)
            if key in content:
                found = f"the key {key} again (first in line {self.lines[written(here)]})"
                self._refuse(key_node, here, found, "each key once", "Delete one of the two.")
                continue
            self.lines[written(here)] = key_node.start_mark.line + 1
            content[key] = self.value(value_node, here)
        return content

    def _refuse(self, node: yaml.Node, path: Path, found: str, allowed: str, remedy: str) -> None:
        where = f"line {node.start_mark.line + 1}"
        self.problems.append(Problem(self.file, where, written(path) or "(file)", found, allowed, remedy))


def _scalar(text: str) -> object:
    """Return what an unquoted word stands for: null, true, false, a number or the text itself."""
    if text.lower() in _WORDS:
        return _WORDS[text.lower()]
    if _WHOLE.fullmatch(text):
        return int(text)
    if _NUMBER.fullmatch(text):
        return float(text)
    return text
