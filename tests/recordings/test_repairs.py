"""Pain P6: a size that does not fit the header is told, and refused past a share; never silently mended."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest

from bandcairn.errors import RecordingError
from bandcairn.recordings import Declared, content_digests, inspect, read
from bandcairn.signal import Repair

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    Build = Callable[..., Path]
    Make = Callable[..., Any]

N_RECORDS = 100
PER_RECORD = 50
SAMPLES = np.arange(N_RECORDS * PER_RECORD) % 3001 - 1500


@pytest.fixture(params=["one.edf", "one.bdf"])
def sound(request: pytest.FixtureRequest, build: Build, channel: Make) -> Path:
    """Write a hundred records of a second."""
    return build([channel("Cz", SAMPLES, per_record=PER_RECORD)], name=request.param)


def record_bytes(path: Path) -> int:
    """Return the bytes of one data record."""
    return PER_RECORD * (2 if path.suffix == ".edf" else 3)


def digital(path: Path, **declared: Fraction) -> list[int]:
    """Return the integers of the channel."""
    found: list[int] = read(path, ("Cz",), Declared(**declared), None, None).samples[0].tolist()  # type: ignore[arg-type]
    return found


def test_p6_a_sound_file_has_nothing_to_tell(sound: Path) -> None:
    """No repair where none is needed."""
    assert inspect(sound).repair is None


@pytest.mark.parametrize("lost", [1, 7, 90])
def test_p6_a_file_cut_short_gives_its_whole_records_and_says_so(sound: Path, lost: int) -> None:
    """99 of 100 records are there: one per cent is missing, which is allowed."""
    whole = sound.read_bytes()
    sound.write_bytes(whole[:-lost])
    facts = inspect(sound)
    assert facts.repair == Repair(100, 99, record_bytes(sound) - lost)
    assert facts.channels[0].n_samples == 4950
    assert facts.duration_s == 99
    assert digital(sound) == SAMPLES[:4950].tolist()


def test_p6_more_than_the_share_missing_is_refused_with_both_numbers(sound: Path) -> None:
    """Two of a hundred; a larger share can be declared."""
    sound.write_bytes(sound.read_bytes()[: -2 * record_bytes(sound)])
    match = r"the header says 100 data records, 98 found, 0 bytes dropped.*at most 0\.01 of the records"
    with pytest.raises(RecordingError, match=match):
        digital(sound)
    assert digital(sound, max_missing_share=Fraction(2, 100)) == SAMPLES[:4900].tolist()


def test_p6_bytes_behind_the_last_record_are_dropped_and_counted(sound: Path) -> None:
    """Whatever trails is no part of the recording that the header describes."""
    sound.write_bytes(sound.read_bytes() + b"\x11" * 7)
    assert inspect(sound).repair == Repair(100, 100, 7)
    assert digital(sound) == SAMPLES.tolist()


def test_p6_a_record_too_many_is_dropped_and_three_are_refused(sound: Path) -> None:
    """The header's number holds, within the share."""
    more = record_bytes(sound)
    whole = sound.read_bytes()
    sound.write_bytes(whole + b"\x11" * more)
    assert inspect(sound).repair == Repair(100, 101, more)
    assert digital(sound) == SAMPLES.tolist()
    sound.write_bytes(whole + b"\x11" * 3 * more)
    with pytest.raises(RecordingError, match="says 100 data records, 103 found"):
        digital(sound)


@pytest.mark.parametrize("rest", [0, 5])
def test_p6_an_unknown_number_of_records_is_counted_and_told(build: Build, channel: Make, rest: int) -> None:
    """-1 stands there until a recorder closes the file: there is no claim to hold it against."""
    path = build([channel("Cz", SAMPLES, per_record=PER_RECORD)], n_records="-1")
    path.write_bytes(path.read_bytes() + b"\x11" * rest)
    repair = inspect(path).repair
    assert repair == Repair(-1, 100, rest)
    assert str(repair) == f"the header states no number of data records (-1), 100 found, {rest} bytes dropped"
    assert digital(path) == SAMPLES.tolist()


def test_p6_a_file_without_a_whole_record_is_refused(build: Build, channel: Make) -> None:
    """Nothing is left to be used."""
    path = build([channel("Cz")], n_records="-1")
    path.write_bytes(path.read_bytes()[:600])
    with pytest.raises(RecordingError, match="-1 data records by the header, 0 whole ones in the file"):
        inspect(path)


def test_p6_a_size_that_one_other_character_of_the_header_would_fit_is_refused(
    build: Build, channel: Make
) -> None:
    """256 or 257 samples a record: a damaged header would shift every sample, and looks like a file cut short."""
    path = build([channel("Cz", np.arange(256 * 400) % 999, per_record=256)])
    content = path.read_bytes()
    assert content.count(b"256     ") == 1
    path.write_bytes(content.replace(b"256     ", b"257     "))
    with pytest.raises(RecordingError, match="257 samples per record of Cz, and data that fit 256"):
        inspect(path)


def test_p6_a_header_that_has_lost_a_byte_is_no_file_cut_short(build: Build, channel: Make) -> None:
    """Every sample would be read from the wrong bytes."""
    path = build([channel("Cz", SAMPLES, per_record=PER_RECORD)])
    content = path.read_bytes()
    path.write_bytes(content[:500] + content[501:])
    with pytest.raises(RecordingError, match="a header that does not end in blanks"):
        inspect(path)


def test_p6_a_file_cut_short_has_the_content_of_its_whole_records(build: Build, channel: Make) -> None:
    """The digest is of what is used: as that of a file that ends there by itself, and not as that of the whole."""
    whole = build([channel("Cz", SAMPLES, per_record=PER_RECORD)])
    short = build([channel("Cz", SAMPLES[:4950], per_record=PER_RECORD)], name="short.edf")
    before = content_digests(whole).channels
    whole.write_bytes(whole.read_bytes()[:-50])
    assert content_digests(whole).channels == content_digests(short).channels != before
