"""What file names say of people and conditions."""

from __future__ import annotations

from pathlib import PurePosixPath

from bandcairn.drafting.filenames import guess_design


def _paths(*names: str) -> list[PurePosixPath]:
    return [PurePosixPath(name) for name in names]


def test_numbers_with_letters_are_people_and_the_rest_is_a_condition() -> None:
    """`W01_day` is person W01 by day; both are marked as guesses."""
    guess = guess_design(_paths("W01_day.edf", "W01_night.edf", "W02_day.edf", "W02_night.edf"))
    assert guess.participants == ("W01", "W01", "W02", "W02")
    assert [dict(row) for row in guess.values] == [{"condition": level} for level in ("day", "night") * 2]
    assert guess.participants_choice.guessed
    assert guess.columns["condition"].guessed


def test_parts_without_a_separator_are_told_apart() -> None:
    """Letters after a number begin a new part."""
    guess = guess_design(_paths("p1pre.edf", "p1post.edf", "p2pre.edf", "p2post.edf"))
    assert guess.participants == ("p1", "p1", "p2", "p2")
    assert [row["condition"] for row in guess.values] == ["pre", "post", "pre", "post"]


def test_a_level_that_belongs_to_a_person_is_a_group() -> None:
    """Folders are parts of the name; one level a person makes a group."""
    guess = guess_design(
        _paths("raw/crew/p1.edf", "raw/crew/p2.edf", "raw/office/p3.edf", "raw/office/p4.edf")
    )
    assert [row["group"] for row in guess.values] == ["crew", "crew", "office", "office"]


def test_session_words_name_their_column() -> None:
    """`ses-1` after `sub-1` is a session, not a person."""
    guess = guess_design(_paths("sub-1_ses-1.edf", "sub-1_ses-2.edf", "sub-2_ses-1.edf", "sub-2_ses-2.edf"))
    assert guess.participants == ("1", "1", "2", "2")
    assert list(guess.columns) == ["session"]


def test_dates_become_no_column() -> None:
    """A date of recording is no design, and tells who someone is."""
    guess = guess_design(_paths("p1_20240105.edf", "p2_20240209.edf"))
    assert guess.participants == ("p1", "p2")
    assert not guess.columns


def test_a_file_named_differently_is_left_blank() -> None:
    """Where one name does not fit, its cells are blank, and the column is to be filled in."""
    guess = guess_design(_paths("p1_day.edf", "p1_night.edf", "p2_day.edf", "old recording of spring.edf"))
    assert guess.participants == ("p1", "p1", "p2", "")
    assert guess.participants_choice.value is None
    assert guess.values[-1] == {"condition": ""}


def test_names_that_tell_no_person_stay_blank() -> None:
    """Nobody is invented."""
    guess = guess_design(_paths("rest_left.edf", "rest_right.edf", "task_left.edf", "task_right.edf"))
    assert set(guess.participants) == {""}
    assert guess.participants_choice.value is None


def test_a_folder_for_each_person_is_no_group() -> None:
    """A name that stands in folder and file is one name."""
    guess = guess_design(_paths("p1/p1_day.edf", "p1/p1_night.edf", "p2/p2_day.edf", "p2/p2_night.edf"))
    assert guess.participants == ("p1", "p1", "p2", "p2")
    assert list(guess.columns) == ["condition"]
