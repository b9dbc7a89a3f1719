"""Tables as spreadsheets and recorders write them: decimal commas, semicolons, Latin-1, Parquet, missing samples."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING

import numpy as np
import pandas as pd
import pytest

from bandcairn.errors import RecordingError
from bandcairn.recordings import Declared, content_digests, inspect, read
from bandcairn.signal import Gap, Run

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    Write = Callable[..., Path]

AT_10 = Declared(Fraction(10), "uV")
GAPS = Declared(Fraction(10), "uV", missing_are_gaps=True)
CLOCKED = Declared(None, "uV", missing_are_gaps=True)


@pytest.mark.parametrize(
    ("content", "name", "layout"),
    [
        ("Fz;Cz\n1,5;2,25\n-3e2;0,125\n", "one.csv", "separator semicolon, decimal comma"),
        ('Fz;Cz\n"1,5";"2,25"\r\n-3e2; 0,125 \r\n', "one.csv", "separator semicolon, decimal comma"),
        ("Fz;Cz\n1.5;2.25\n-3e2;0.125\n", "one.csv", "separator semicolon, decimal point"),
        ("Fz\tCz\n1,5\t2,25\n-3e2\t0,125\n", "one.tsv", "separator tab, decimal comma"),
        ("Fz,Cz\n1.5,2.25\n-3e2,0.125\n", "one.csv", "separator comma, decimal point"),
    ],
)
def test_b6_separator_and_decimal_mark_are_found_and_told(
    delimited: Write, content: str, name: str, layout: str
) -> None:
    """The same table in the spellings of several countries: the same numbers, the same content."""
    path = delimited(content, name)
    raw = read(path, ("Fz", "Cz"), AT_10, None, None)
    assert [samples.tolist() for samples in raw.samples] == [[1.5, -300.0], [2.25, 0.125]]
    assert inspect(path).details.layout == layout
    plain = delimited("Fz,Cz\n1.5,2.25\n-300,0.125\n", "plain.csv")
    assert content_digests(path).channels == content_digests(plain).channels


@pytest.mark.parametrize(
    ("content", "name", "problem"),
    [
        ("Fz;Cz\n1,5;2.5\n", "one.csv", r"numbers with a comma and with a point: 1,5 and 2\.5"),
        ("Fz;Cz\n1.234,5;2\n", "one.csv", r"'1\.234,5' in row 1"),
        ("Fz;Cz\n12,345;1,250\n", "one.csv", "numbers whose comma may be a decimal mark or part thousands"),
        ("Fz;Cz,Pz\n1;2,3\n", "one.csv", "semicolons and commas in the header line"),
        ("Fz\n1,5\n2,5\n", "one.csv", r"2 cells in row 1"),
    ],
)
def test_b6_what_cannot_be_told_is_refused(delimited: Write, content: str, name: str, problem: str) -> None:
    """A factor of a thousand is never guessed."""
    with pytest.raises(RecordingError, match=problem):
        read(delimited(content, name), ("Fz",), AT_10, None, None)


def test_b6_a_comma_that_can_part_no_thousands_settles_it(delimited: Write) -> None:
    """0,125 is no thousand, so 12,345 beside it is none either."""
    raw = read(delimited("Fz;Cz\n12,345;0,125\n"), ("Fz",), AT_10, None, None)
    assert raw.samples[0].tolist() == [12.345]


def test_b6_decimal_commas_in_the_clock_are_understood(delimited: Write) -> None:
    """A clock is a column like any other."""
    rows = "".join(f"{index / 500:.4f};1,5\n".replace(".", ",") for index in range(200))
    facts = inspect(delimited("time_s;Fz\n" + rows))
    assert facts.channels[0].rate_hz == 500
    assert facts.duration_s == Fraction(200, 500)


@pytest.mark.parametrize(
    ("content", "encoding"),
    [(b"Fz\n1\n", "ASCII"), ("Füz\n1\n".encode(), "UTF-8"), ("Füz\n1\n".encode("latin-1"), "Latin-1")],
)
def test_p9_texts_are_utf_8_else_latin_1_and_which_is_told(
    delimited: Write, content: bytes, encoding: str
) -> None:
    """Names with accents are the same in either."""
    facts = inspect(delimited(content))
    assert facts.details.encoding == encoding
    assert facts.channels[0].label in {"Fz", "Füz"}


def test_p24_missing_cells_are_refused_with_their_rows(delimited: Write) -> None:
    """One would spread over everything: nothing is filled in unless the study says what it is."""
    path = delimited("Fz,Cz\n1,1\n,1\nnan,1\n4,1\nNA,1\n")
    match = r"a blank cell in row 2 \(line 3\), column Fz, and 2 more \(rows 3, 5\).*missing: gap"
    with pytest.raises(RecordingError, match=match):
        read(path, ("Fz",), AT_10, None, None)


def test_p24_missing_cells_declared_as_gaps_part_the_signal(delimited: Write) -> None:
    """A row that lacks one channel of the signal is missing; the others keep their times."""
    path = delimited("Fz,Cz\n,0\n1,1\n2,2\n,3\n4,nan\n5,5\n6,6\n7,\n")
    raw = read(path, ("Fz", "Cz"), GAPS, None, None)
    assert raw.samples[0].tolist() == [1, 2, 5, 6]
    assert raw.runs == (Run(0, 2, Fraction(1, 10)), Run(2, 4, Fraction(1, 2)))
    alone = read(path, ("Fz",), GAPS, 0.2, 0.7)
    assert alone.samples[0].tolist() == [2, 4, 5, 6]
    assert alone.runs == (Run(0, 1, Fraction(2, 10)), Run(1, 4, Fraction(4, 10)))


def test_p24_a_word_is_no_missing_sample(delimited: Write) -> None:
    """Nor is an infinite number."""
    for cell in ("off", "inf", "1_0"):
        with pytest.raises(RecordingError, match=rf"'{cell}' in row 2"):
            read(delimited(f"Fz\n1\n{cell}\n"), ("Fz",), GAPS, None, None)


def test_p24_a_signal_without_any_sample_is_refused(delimited: Write) -> None:
    """Nothing is left."""
    with pytest.raises(RecordingError, match="a missing sample in every row"):
        read(delimited("Fz,Cz\n,1\n1,\n"), ("Fz", "Cz"), GAPS, None, None)


@pytest.mark.parametrize("decimals", [3, 4, 6])
@pytest.mark.parametrize("rate_hz", [500, 512, 1000])
def test_p4_whole_missing_samples_in_the_clock_are_a_gap_if_declared(
    delimited: Write, rate_hz: int, decimals: int
) -> None:
    """Two holes of different lengths; the rate stays exact, the times true."""
    kept = [index for index in range(4000) if not 1000 <= index < 1003 and not 2500 <= index < 3700]
    path = delimited("time_s,Fz\n" + "".join(f"{index / rate_hz:.{decimals}f},{index}\n" for index in kept))
    facts = inspect(path)
    assert facts.channels[0].rate_hz == rate_hz
    assert facts.gaps == (
        Gap(Fraction(1000, rate_hz), Fraction(1003, rate_hz)),
        Gap(Fraction(2500, rate_hz), Fraction(3700, rate_hz)),
    )
    assert facts.duration_s == Fraction(4000, rate_hz)
    raw = read(path, ("Fz",), CLOCKED, None, None)
    assert raw.samples[0].tolist() == kept
    assert [run.start_s * rate_hz for run in raw.runs] == [0, 1003, 3700]
    with pytest.raises(RecordingError, match=r"row 1001 \(line 1002\).*declare `load: {missing: gap}`"):
        read(path, ("Fz",), Declared(None, "uV"), None, None)


def test_p7_a_jump_of_no_whole_number_of_samples_is_refused(delimited: Write) -> None:
    """Half a sample is a fault of the clock, not a gap: declared or not."""
    times_s = [(index + (index >= 600) * 3.5) / 500 for index in range(1000)]
    path = delimited("time_s,Fz\n" + "".join(f"{time_s:.6f},1\n" for time_s in times_s))
    with pytest.raises(RecordingError, match=r"row 601 \(line 602\)"):
        read(path, ("Fz",), CLOCKED, None, None)


def test_p4_a_gap_in_the_clock_is_content(delimited: Write) -> None:
    """The same rows at other times are another recording."""
    digests = set()
    for skipped in (0, 5, 6):
        cells = [f"{(index + (index >= 60) * skipped) / 500:.3f},{index}\n" for index in range(200)]
        path = delimited("time_s,Fz\n" + "".join(cells), f"skip{skipped}.csv")
        digests.add(content_digests(path).of(("Fz",)))
    assert len(digests) == 3


def test_b6_parquet_gives_the_samples_of_the_same_text(delimited: Write, tmp_path: Path) -> None:
    """Numbers, rate and content; integers count as numbers."""
    rng = np.random.default_rng(3)
    table = pd.DataFrame(
        {
            "time_s": np.arange(500) / 250,
            "Fz": rng.normal(0, 50, 500),
            "Cz": rng.integers(-900, 900, 500).astype(np.int32),
        }
    )
    path = tmp_path / "one.parquet"
    table.to_parquet(path)
    text = delimited(table.to_csv(index=False), "one.csv")
    raw, other = (read(file, ("Cz", "Fz"), Declared(None, "mV"), 0.5, 1.5) for file in (path, text))
    for one, two in zip(raw.samples, other.samples, strict=True):
        np.testing.assert_array_equal(one, two)
    assert (raw.rate_hz, raw.runs) == (Fraction(250), (Run(0, 250, Fraction(1, 2)),))
    assert content_digests(path).channels == content_digests(text).channels
    assert inspect(path).details.format == "Parquet"


def test_b6_nulls_of_parquet_are_missing_samples(tmp_path: Path) -> None:
    """Null and NaN alike; a column of text is named."""
    path = tmp_path / "one.parquet"
    frame = {
        "Fz": [1.0, None, 3.0, float("nan"), 5.0],
        "n": pd.array([1, None, 3, 4, 5], "Int64"),
        "x": list("abcde"),
    }
    pd.DataFrame(frame).to_parquet(path)
    with pytest.raises(RecordingError, match=r"'nan' in row 2, column Fz, and 1 more \(rows 4\)"):
        read(path, ("Fz",), AT_10, None, None)
    assert read(path, ("Fz", "n"), GAPS, None, None).samples[1].tolist() == [1, 3, 5]
    with pytest.raises(RecordingError, match="'a' in row 1, column x"):
        read(path, ("x",), GAPS, None, None)


@pytest.mark.parametrize("content", [b"", b"PAR1", b"PAR1 nothing of the kind PAR1"])
def test_b6_a_file_that_is_no_parquet_is_refused(tmp_path: Path, content: bytes) -> None:
    """Never an error of a library."""
    path = tmp_path / "one.parquet"
    path.write_bytes(content)
    with pytest.raises(RecordingError, match=r"^one\.parquet: found no Parquet"):
        inspect(path)
