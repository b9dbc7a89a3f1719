"""YAML with line numbers."""

from __future__ import annotations

import pytest

from bandcairn.study.document import read_document


@pytest.mark.parametrize(
    ("text", "value"),
    [
        ("yes", "yes"),
        ("no", "no"),
        ("on", "on"),
        ("off", "off"),
        ("y", "y"),
        ("true", True),
        ("false", False),
        ("'true'", "true"),
        ("null", None),
        ("", None),
        ("50", 50),
        ("'50'", "50"),
        ("-0.5", -0.5),
        (".5", 0.5),
        ("1e3", 1000.0),
        ("2.5E-2", 0.025),
        ("2024-05-01", "2024-05-01"),
        ("12:30", "12:30"),
        ("1_000", "1_000"),
        ("0x10", "0x10"),
    ],
)
def test_a_plain_word_means_what_it_says(text: str, value: object) -> None:
    """Only true and false are booleans, decimal numbers are numbers, and all else is text."""
    document = read_document(f"key: {text}\n", "study.yaml")

    assert document.problems == ()
    assert document.content == {"key": value}
    assert type(document.content["key"]) is type(value)


def test_each_key_and_list_item_has_its_line() -> None:
    """Lines are those of the file, also within flow collections and after comments."""
    document = read_document("# title\na:\n  b: 1\n\n  c:\n    - x\n    - {d: 2}\n", "study.yaml")

    assert document.lines["a"] == 2
    assert document.lines["a.b"] == 3
    assert document.lines["a.c"] == 5
    assert document.lines["a.c[1]"] == 7
    assert document.lines["a.c[1].d"] == 7


def test_a_repeated_key_is_a_problem_that_names_both_lines() -> None:
    """YAML forbids equal keys; none of the two is taken silently."""
    document = read_document("a: 1\nb: 2\na: 3\n", "study.yaml")

    (problem,) = document.problems
    assert problem.where == "line 3"
    assert problem.field == "a"
    assert "first in line 1" in problem.found


@pytest.mark.parametrize(
    ("text", "line"), [("a: [1, 2\nb: 3\n", 2), ("a: 1\n b: 2\n", 2), ("a: 1\nb: 'x\n", 3), ("a: \x07\n", 1)]
)
def test_a_syntax_error_is_a_problem_with_its_line(text: str, line: int) -> None:
    """Text that is no YAML yields one problem and no content."""
    document = read_document(text, "study.yaml")

    (problem,) = document.problems
    assert document.content is None
    assert problem.where == f"line {line}"
    assert problem.remedy


@pytest.mark.parametrize(
    "text", ["a: !!python/name:os.system x\n", "a: !secret x\n", "a: &a [*a]\n", "[1]: 2\n"]
)
def test_a_construct_beyond_plain_values_is_refused(text: str) -> None:
    """Tags, endless aliases and keys that are no text are problems; nothing is constructed."""
    document = read_document(text, "study.yaml")

    assert [problem.where for problem in document.problems] == ["line 1"]


def test_an_alias_stands_for_what_its_anchor_holds() -> None:
    """An anchored block may be reused."""
    document = read_document("a: &e {length_s: 4}\nb: *e\n", "study.yaml")

    assert document.content == {"a": {"length_s": 4}, "b": {"length_s": 4}}
