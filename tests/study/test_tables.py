"""The tables of recordings and segments."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pytest

from bandcairn.study.tables import RESULTS_COLUMNS, read_recordings, read_segments

if TYPE_CHECKING:
    from pathlib import Path

HEADER = "recording,participant,file,condition"


def write(folder: Path, text: str, name: str = "recordings.csv") -> Path:
    """Write a table and return its path."""
    path = folder / name
    path.write_text(text, encoding="utf-8")
    return path


@pytest.mark.parametrize(("name", "separator"), [("recordings.csv", ","), ("recordings.tsv", "\t")])
def test_a_sound_table_yields_its_rows_with_line_and_design(
    tmp_path: Path, name: str, separator: str
) -> None:
    """Blanks around cells, a byte order mark, blank lines and quoted separators are understood."""
    late = f'"night{separator} late"'
    lines: tuple[list[str], ...] = (
        [*HEADER.split(","), "start_s", "stop_s"],
        ["r 1", "p1", " raw/a.edf ", "day", "", ""],
        [],
        ["r-2", "p1", "raw/a.edf", late, "10", "2e2"],
    )
    path = write(tmp_path, "\ufeff" + "\n".join(separator.join(cells) for cells in lines), name)

    table = read_recordings(path, name)

    assert table.problems == ()
    assert table.design_columns == ("condition",)
    first, second = table.rows
    assert (first.recording, first.file, first.start_s, first.stop_s, first.row) == (
        "r 1",
        "raw/a.edf",
        None,
        None,
        2,
    )
    assert (second.design["condition"], second.start_s, second.stop_s, second.row) == (
        f"night{separator} late",
        10.0,
        200.0,
        4,
    )


@pytest.mark.parametrize(
    ("text", "where", "found"),
    [
        ("", "", "no header"),
        (f"{HEADER}\n", "", "no rows"),
        ("recording,participant,condition\nr,p,c\n", "row 1, column file", "the columns recording"),
        ("recording;participant;file\nr;p;f\n", "row 1, column recording", "recording;participant"),
        (f"{HEADER},condition\nr,p,f,c,c\n", "row 1, column condition", "condition twice"),
        (f"{HEADER},\nr,p,f,c,\n", "row 1, column number 5", "a blank name"),
        (f"{HEADER}\nr,p,f\n", "row 2", "3 cells"),
        (f"{HEADER}\nr,p,f,c,d\n", "row 2", "5 cells"),
        (f"{HEADER}\nr,,f,c\n", "row 2, column participant", "a blank cell"),
        (f"{HEADER}\nr,p,f,c\nr,p,g,c\n", "row 3, column recording", r"first in row 2"),
        (f"{HEADER}\nr,p,f,c\ns,p,f,c\n", "row 3, column file", r"first in row 2"),
        (f"{HEADER}\nr,p,f,c\ns,p,./f,c\n", "row 3, column file", r"first in row 2"),
        (f"{HEADER}\na/b,p,f,c\n", "row 2, column recording", "a/b"),
        (f"{HEADER}\nr,p,/data/f,c\n", "row 2, column file", "/data/f"),
        (f"{HEADER}\nr,p,../f,c\n", "row 2, column file", "../f"),
        (f"{HEADER}\nr,p,C:/f,c\n", "row 2, column file", "C:/f"),
        (f"{HEADER}\nr,p,raw\\f,c\n", "row 2, column file", "raw"),
        (f"{HEADER},start_s\nr,p,f,c,soon\n", "row 2, column start_s", "soon"),
        (f"{HEADER},start_s\nr,p,f,c,-1\n", "row 2, column start_s", "-1"),
        (f"{HEADER},stop_s\nr,p,f,c,nan\n", "row 2, column stop_s", "nan"),
        (f"{HEADER},start_s,stop_s\nr,p,f,c,9,9\n", "row 2, column stop_s", "9"),
        (f'{HEADER}\nr,p,f,"c\n', "row 2", "unexpected end of data"),
    ],
)
def test_a_fault_of_the_recordings_table_names_row_and_column(
    tmp_path: Path, text: str, where: str, found: str
) -> None:
    """Each fault is one problem, with its place, what was found, what is allowed and the remedy."""
    problems = read_recordings(write(tmp_path, text), "recordings.csv").problems

    assert [problem.where for problem in problems][:1] == [where]
    assert found in problems[0].found
    assert problems[0].file == "recordings.csv"
    assert problems[0].allowed
    assert problems[0].remedy


@pytest.mark.parametrize("column", RESULTS_COLUMNS)
def test_a_design_column_named_like_a_results_column_is_refused(tmp_path: Path, column: str) -> None:
    """A design column travels into the results, where the name is taken."""
    path = write(tmp_path, f"{HEADER},{column}\nr,p,f,c,x\n")

    (problem,) = read_recordings(path, "recordings.csv").problems

    assert problem.where == f"row 1, column {column}"


def test_a_row_after_a_cell_with_a_line_break_is_named_by_its_line(tmp_path: Path) -> None:
    """Row numbers are lines of the file, so that an editor finds them."""
    path = write(tmp_path, f'{HEADER}\nr,p,f,"two\nlines"\ns,,g,c\n')

    (problem,) = read_recordings(path, "recordings.csv").problems

    assert problem.where == "row 4, column participant"


def test_a_table_that_is_no_text_or_not_there_is_refused(tmp_path: Path) -> None:
    """A wrong suffix, a wrong encoding and an absent file are problems, not tracebacks."""
    latin = tmp_path / "latin.csv"
    latin.write_bytes(b"recording,participant,file\nM\xfcller,p,f\n")

    assert "no UTF-8" in read_recordings(latin, "latin.csv").problems[0].found
    assert ".csv or .tsv" in read_recordings(tmp_path / "r.xlsx", "r.xlsx").problems[0].allowed
    assert "No such file" in read_recordings(tmp_path / "r.csv", "r.csv").problems[0].found


def test_all_faults_of_a_table_come_in_one_pass(tmp_path: Path) -> None:
    """A second fault is not hidden by the first, in the same row or another."""
    path = write(tmp_path, f"{HEADER},start_s\n,p,/f,c,x\nr,,f,c,1\n")

    wheres = [problem.where for problem in read_recordings(path, "recordings.csv").problems]

    assert wheres == [
        "row 2, column recording",
        "row 2, column file",
        "row 2, column start_s",
        "row 3, column participant",
    ]


@pytest.mark.parametrize(
    ("row", "where"),
    [
        ("r,,0,1", "row 2, column segment"),
        ("r,a,,1", "row 2, column start_s"),
        ("r,a,2,1", "row 2, column stop_s"),
        ("r,a/b,0,1", "row 2, column segment"),
        ("r,a,0,1\nr,a,2,3", "row 3, column segment"),
    ],
)
def test_a_fault_of_the_segments_table_names_row_and_column(tmp_path: Path, row: str, where: str) -> None:
    """Each segment needs a name of its own within its recording, a start and a later stop."""
    path = write(tmp_path, f"recording,segment,start_s,stop_s\n{row}\n", "segments.csv")

    (problem,) = read_segments(path, "segments.csv").problems

    assert problem.where == where


def test_an_unknown_column_of_the_segments_table_is_refused(tmp_path: Path) -> None:
    """The segments table carries no design columns: they would be lost."""
    path = write(tmp_path, "recording,segment,start_s,stop_s,mood\nr,a,0,1,x\n", "segments.csv")

    (problem,) = read_segments(path, "segments.csv").problems

    assert problem.where == "row 1, column mood"
