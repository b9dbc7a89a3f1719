"""Delimited text: numbers are those printed, the rate is exact, every fault is named by row and column."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from bandcairn.errors import RecordingError, UnknownUnitError
from bandcairn.recordings import Declared, inspect, read
from bandcairn.recordings.export import write_delimited
from bandcairn.signal import ChannelFacts, Run

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    Write = Callable[..., Path]

AT_500 = Declared(Fraction(500), "uV")


def test_facts_hold_names_and_rows_and_no_unit(delimited: Write) -> None:
    """Without a clock the file states no rate; a last line without its end counts."""
    facts = inspect(delimited("Fz, Cz\n1,2\n3,4\n5,6"))
    assert facts.channels == (ChannelFacts("Fz", None, None, 3), ChannelFacts("Cz", None, None, 3))


def test_clock_gives_the_rate_and_is_no_channel(delimited: Write) -> None:
    """Six printed digits, 500 Hz."""
    facts = inspect(delimited("Fz\ttime_s\n1\t0.000000\n3\t0.002000\n5\t0.004000\n", "one.tsv"))
    assert facts.channels == (ChannelFacts("Fz", Fraction(500), None, 3),)


def test_clock_that_fits_several_whole_rates_states_none(delimited: Write) -> None:
    """Three rows of three digits fit 445 to 571 Hz: the study must declare which."""
    path = delimited("time_s,Fz\n0.000,1\n0.002,2\n0.004,3\n")
    assert inspect(path).channels[0].rate_hz is None
    with pytest.raises(RecordingError, match=r"a column time_s that allows 444\.4\d* to 571\.4\d* Hz"):
        read(path, ("Fz",), Declared(None, "uV"), None, None)
    assert read(path, ("Fz",), Declared(Fraction(512), "uV"), None, None).rate_hz == 512


@pytest.mark.parametrize(
    "content",
    [
        "Fz,Cz\n1.5,2\n-3e2,4\n",
        "Fz,Cz\r\n1.5,2\r\n-3e2,4\r\n",
        b"\xef\xbb\xbfFz,Cz\n1.5,2\n-3e2,4\n",
        " Fz , Cz\n 1.5,2 \n-3e2, 4",
        '"Fz","Cz"\n"1.5","2"\n"-3e2","4"\n',
    ],
)
def test_line_ends_marks_blanks_and_quotes_make_no_difference(delimited: Write, content: str) -> None:
    """Spreadsheets and scripts write the same table in different bytes."""
    raw = read(delimited(content), ("Cz", "Fz"), AT_500, None, None)
    assert [samples.tolist() for samples in raw.samples] == [[2.0, 4.0], [1.5, -300.0]]
    assert raw.rate_hz == 500
    assert raw.runs == (Run(0, 2, Fraction(0)),)


@pytest.mark.parametrize(("unit", "factor"), [("uV", 1.0), ("mV", 1e3), ("V", 1e6), ("nV", 1e-3)])
def test_declared_unit_becomes_microvolt(delimited: Write, unit: str, factor: float) -> None:
    """The samples stay as printed; the factor stands beside them."""
    raw = read(delimited("Fz\n1.25\n-2\n"), ("Fz",), Declared(Fraction(10), unit), None, None)
    assert raw.samples[0].tolist() == [1.25, -2.0]
    assert raw.to_signal().samples.tolist() == [[1.25 * factor, -2 * factor]]


@given(values=st.lists(st.floats(-1e12, 1e12), min_size=1, max_size=20))
@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], deadline=None)
def test_numbers_are_rounded_correctly(delimited: Write, values: list[float]) -> None:
    """Each cell becomes the nearest double, as Python itself reads it."""
    path = delimited("Fz,Cz\n" + "".join(f"{value!r},{value:.20e}\n" for value in values))
    raw = read(path, ("Fz", "Cz"), AT_500, None, None)
    assert raw.samples[0].tolist() == values
    assert raw.samples[1].tolist() == [float(f"{value:.20e}") for value in values]


def test_cut_follows_the_sample_rule(delimited: Write) -> None:
    """First sample at or after start, half-open stop, times from the start of the file."""
    path = delimited("Fz\n" + "".join(f"{value}\n" for value in range(100)))
    raw = read(path, ("Fz",), Declared(Fraction(10), "uV"), 0.3, 0.71)
    assert raw.samples[0].tolist() == [3, 4, 5, 6, 7]
    assert raw.runs == (Run(0, 5, Fraction(3, 10)),)
    with pytest.raises(RecordingError, match="stop <= 10 s"):
        read(path, ("Fz",), Declared(Fraction(10), "uV"), 0.3, 10.1)


@pytest.mark.parametrize(
    ("body", "problem"),
    [
        ("1,2\n3,4,5\n", r"3 cells in row 2 \(line 3\); allowed: 2, as in the header line.*decimal commas"),
        ("1,2,3\n4,5,6\n", r"3 cells in row 1 \(line 2\)"),
        ("1,2\n3\n", r"1 cells in row 2 \(line 3\); allowed: 2"),
        ("1,2,3\n4\n", r"3 cells in row 1"),
        ("1,2\n4\n1,2,3\n", r"1 cells in row 2"),
        ("1,2,3\n4\n5,6\n", r"3 cells in row 1"),
        ("1,2\n\n3,4\n", r"1 cells in row 2 \(line 3\)"),
        ("1,2\n3,x\n", r"'x' in row 2 \(line 3\), column Cz; allowed: a finite number"),
        ("1,2\n3,\n", r"a blank cell in row 2 \(line 3\), column Cz; .*not filled in"),
        ("1,2\n3,nan\n", r"'nan' in row 2 \(line 3\), column Cz"),
        ("1,2\n3,NA\n", r"'NA' in row 2 \(line 3\), column Cz"),
        ("1,inf\n3,4\n", r"'inf' in row 1 \(line 2\), column Cz"),
        ("1,1_0\n3,4\n", r"'1_0' in row 1 \(line 2\), column Cz"),
        ('1,"2,5"\n3,4\n', r"'2,5' in row 1 \(line 2\), column Cz.*decimal points, not commas"),
        ('1,"2\n5"\n3,4\n', r"3 lines that make 2 rows"),
        (b"1,2\n3,\xff\n", r"'\xff' in row 2 \(line 3\), column Cz"),
        (b"1,2\n3,\0\n", r".*row 2 \(line 3\), column Cz"),
        ("1,2\n3,true\n", r"'true' in row 2 \(line 3\), column Cz"),
        ("1,2\n3,0x10\n", r"'0x10' in row 2 \(line 3\), column Cz"),
    ],
)
def test_fault_in_a_row_is_named_by_row_and_column(delimited: Write, body: str | bytes, problem: str) -> None:
    """Never an error of a library; nothing is filled in, dropped or shifted."""
    body = body if isinstance(body, bytes) else body.encode()
    with pytest.raises(RecordingError, match=rf"^one\.csv: found {problem}"):
        read(delimited(b"Fz,Cz\n" + body), ("Cz",), AT_500, None, None)


@pytest.mark.parametrize(
    ("content", "name", "problem"),
    [
        (b"", "one.csv", "an empty file"),
        (b"\xef\xbb\xbf\n", "one.csv", "an empty file"),
        (b"Fz,Cz\n", "one.csv", "a header line without rows"),
        (b"Fz\tCz\n1\t2\n", "one.csv", r"columns parted by '\\t'; allowed: comma or semicolon in \.csv"),
        (b"Fz,Cz\n1,2\n", "one.tsv", r"columns parted by ','; allowed: tab in \.tsv"),
        ("Fz,Cz\n1,2\n".encode("utf-16-le"), "one.csv", "no line feeds or a wide encoding"),
        (b"Fz,Cz\r1,2\r", "one.csv", "a header line without rows|no line feeds"),
    ],
)
def test_file_of_another_layout_is_refused(delimited: Write, content: bytes, name: str, problem: str) -> None:
    """With the separator or encoding that is allowed."""
    with pytest.raises(RecordingError, match=problem):
        inspect(delimited(content, name))


@pytest.mark.parametrize("body", ["1,2,3\n4\n5,6\n", "1,2\n4\n5,6,7\n", '"1,2"\n'])
def test_ragged_row_is_refused_whichever_column_is_read(delimited: Write, body: str) -> None:
    """Cells that are too many in one row do not make up for those missing in another."""
    for label in ("Fz", "Cz"):
        with pytest.raises(RecordingError, match=r"cells in row"):
            read(delimited("Fz,Cz\n" + body), (label,), AT_500, None, None)


@given(cell=st.text("0123456789.eE+-_ nifaxd()'\t", max_size=8))
@settings(suppress_health_check=[HealthCheck.function_scoped_fixture], deadline=None, max_examples=500)
def test_only_finite_numbers_are_read(delimited: Write, cell: str) -> None:
    """The fast way and Python agree on what a number is, and on its value."""
    try:
        number = float(cell) if "_" not in cell else np.nan
    except ValueError:
        number = np.nan
    path = delimited(f"Fz,Cz\n1,{cell}\n")
    if np.isfinite(number):
        assert read(path, ("Cz",), AT_500, None, None).samples[0].tolist() == [number]
    else:
        with pytest.raises(RecordingError, match="in row 1"):
            read(path, ("Cz",), AT_500, None, None)


def test_text_column_beside_does_not_matter(delimited: Write) -> None:
    """A column of remarks spoils only itself."""
    path = delimited("Fz,remark\n1,start\n2,\n")
    assert read(path, ("Fz",), AT_500, None, None).samples[0].tolist() == [1, 2]


def test_column_absent_or_twice_is_refused(delimited: Write) -> None:
    """As for EDF."""
    path = delimited("Fz,Cz,Cz\n1,2,3\n")
    with pytest.raises(RecordingError, match="found no column Pz; allowed: one of Fz, Cz, Cz"):
        read(path, ("Pz",), AT_500, None, None)
    with pytest.raises(RecordingError, match="found 2 columns named Cz"):
        read(path, ("Cz",), AT_500, None, None)


@pytest.mark.parametrize(
    ("declared", "kind", "problem"),
    [
        (
            Declared(None, "uV"),
            RecordingError,
            r"no sampling rate; allowed: a column time_s of enough digits or a declaration.*rate_hz: 500",
        ),
        (
            Declared(Fraction(500), None),
            RecordingError,
            r"no declared unit; allowed: nV, .*load: \{unit: uV\}",
        ),
        (Declared(Fraction(500), "bananas"), UnknownUnitError, "the declared unit 'bananas'"),
    ],
)
def test_missing_declaration_is_refused(
    delimited: Write, declared: Declared, kind: type[RecordingError], problem: str
) -> None:
    """Text states neither unit nor rate: the study must."""
    with pytest.raises(kind, match=problem):
        read(delimited("Fz\n1\n2\n"), ("Fz",), declared, None, None)


def test_declared_rate_that_contradicts_the_clock_is_refused(delimited: Write) -> None:
    """Both are named; a declaration within the printed digits is taken as it stands."""
    path = delimited("time_s,Fz\n0.00000,1\n0.00200,2\n0.00400,3\n")
    with pytest.raises(
        RecordingError, match=r"declared rate of 512 Hz; allowed: 499\.3\d* to 500\.6\d* Hz, as time_s"
    ):
        read(path, ("Fz",), Declared(Fraction(512), "uV"), None, None)
    assert read(path, ("Fz",), Declared(Fraction("500.5"), "uV"), None, None).rate_hz == Fraction("500.5")


@pytest.mark.parametrize(
    "rate_hz",
    [Fraction(256), Fraction(500), Fraction(1000), Fraction(2048), Fraction(250, 3), Fraction(1, 30)],
)
@pytest.mark.parametrize("decimals", [4, 6, 9, 12])
def test_rate_of_a_printed_clock_is_exact(tmp_path: Path, rate_hz: Fraction, decimals: int) -> None:
    """Rounded times of a long file leave one simple rate."""
    path = tmp_path / "one.csv"
    times_s = np.array([float(index / rate_hz) for index in range(5000)])
    write_delimited(path, ["time_s", "Fz"], [times_s, times_s], decimals=decimals)
    assert inspect(path).channels[0].rate_hz == rate_hz


@pytest.mark.parametrize("form", ["{!r}", "{:.6g}", "{:.9e}", " {:.5f} "])
def test_clock_in_any_number_format_gives_the_rate(delimited: Write, form: str) -> None:
    """Each row counts with its own digits."""
    cells = [form.format(index / 512) for index in range(3000)]
    path = delimited("Fz,time_s\n" + "".join(f"1,{cell}\n" for cell in cells))
    assert inspect(path).channels[0].rate_hz == 512


def test_summed_clock_gives_the_rate(delimited: Write) -> None:
    """A recorder that adds up 1/rate drifts by less than a nanosecond."""
    times_s = np.cumsum(np.full(20_000, 1 / 500)) - 1 / 500
    path = delimited("time_s,Fz\n" + "".join(f"{float(time_s)!r},1\n" for time_s in times_s))
    assert inspect(path).channels[0].rate_hz == 500


@pytest.mark.parametrize(
    ("row", "cell", "problem"),
    [
        (
            700,
            "1.402",
            r"found 1\.402 in row 701 \(line 702\), column time_s, after 1\.398; allowed: steps of one length",
        ),
        (700, "1.398", r"found 1\.398 in row 701"),
        (700, "x", r"found 'x' in row 701 \(line 702\), column time_s"),
        (700, "", r"found '' in row 701"),
        (700, "nan", r"found 'nan' in row 701"),
        (700, "1" * 300, r"in row 701"),
        (0, "12.5", r"found 12\.5 in row 1, column time_s; allowed: 0"),
    ],
)
def test_irregular_clock_is_refused_at_its_first_row(
    delimited: Write, row: int, cell: str, problem: str
) -> None:
    """A lost or doubled sample, or a cell that is no time."""
    cells = [f"{index / 500:.3f}" for index in range(1000)]
    cells[row] = cell
    path = delimited("time_s,Fz\n" + "".join(f"{one},1\n" for one in cells))
    with pytest.raises(RecordingError, match=problem):
        inspect(path)


def test_gap_in_the_clock_is_refused_at_the_first_row_behind_it(delimited: Write) -> None:
    """One lost sample in ten thousand."""
    cells = [f"{(index + (index >= 6000)) / 500:.3f}" for index in range(10_000)]
    path = delimited("time_s,Fz\n" + "".join(f"{one},1\n" for one in cells))
    with pytest.raises(RecordingError, match=r"row 6001 \(line 6002\).*load: {missing: gap}"):
        read(path, ("Fz",), Declared(None, "uV"), None, None)


def test_clock_that_stands_still_is_refused(delimited: Write) -> None:
    """Whole seconds at 500 Hz tell no rate."""
    path = delimited("time_s,Fz\n" + "0,1\n" * 10)
    with pytest.raises(RecordingError, match="too coarse to tell the rate"):
        inspect(path)


def test_any_damage_is_a_recording_error_or_nothing(delimited: Write) -> None:
    """A thousand files with a damaged byte: no other error, no warning."""
    sound = b"time_s,Fz,Cz\n" + b"".join(
        f"{index / 500:.3f},{index},{-index}.5\n".encode() for index in range(12)
    )
    rng = np.random.default_rng(5)
    refused = 0
    for place, value in zip(rng.integers(0, len(sound), 1000), rng.integers(0, 256, 1000), strict=True):
        path = delimited(sound[:place] + bytes([value]) + sound[place + 1 :])
        try:
            inspect(path)
            read(path, ("Fz", "Cz"), Declared(Fraction(500), "uV"), None, None)
        except RecordingError:
            refused += 1
    assert refused > 300


def test_reading_names_the_type_of_all_samples(delimited: Write) -> None:
    """Whole numbers are float64 too."""
    raw: Any = read(delimited("Fz\n1\n2\n"), ("Fz",), AT_500, None, None)
    assert raw.samples[0].dtype == np.float64
    assert raw.samples[0].flags.c_contiguous
