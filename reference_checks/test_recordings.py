"""Recordings against the definitions of their formats and against two independent readers."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING

import edfio
import mne
import numpy as np
import pytest

from bandcairn.errors import RecordingError
from bandcairn.recordings import Declared, inspect, read
from reference import published

if TYPE_CHECKING:
    from pathlib import Path

    from numpy.typing import NDArray

# Width of the fields of the signal headers (Kemp et al. 1992): label, transducer, unit, four ends of the ranges,
# filters, samples per record, reserved.
FIELDS = (16, 80, 8, 8, 8, 8, 8, 80, 8, 32)


def write(
    path: Path,
    samples: list[NDArray[np.int64]],
    physical: tuple[str, str],
    digital: tuple[str, str],
    *,
    n_records: int = 1,
    reserved: str = "",
) -> None:
    """Write an EDF or BDF file byte by byte, so that no library stands between the check and the format."""
    width = 2 if path.suffix == ".edf" else 3
    per_record = [len(one) // n_records for one in samples]
    rows = [(f"C{i}", "", "uV", *physical, *digital, "", str(n), "") for i, n in enumerate(per_record)]
    main = "X".ljust(80) + "X".ljust(80) + "01.01.0100.00.00" + str(256 * (len(rows) + 1)).ljust(8)
    main += reserved.ljust(44) + str(n_records).ljust(8) + "1".ljust(8) + str(len(rows)).ljust(4)
    main += "".join(row[i].ljust(size) for i, size in enumerate(FIELDS) for row in rows)
    version = b"0".ljust(8) if width == 2 else b"\xffBIOSEMI"
    body = b"".join(
        int(value).to_bytes(width, "little", signed=True)
        for record in range(n_records)
        for one, n in zip(samples, per_record, strict=True)
        for value in one[record * n : (record + 1) * n]
    )
    path.write_bytes(version + main.encode("ascii") + body)


def signal_uv(path: Path, label: str) -> NDArray[np.float64]:
    """Return one channel in microvolt."""
    samples: NDArray[np.float64] = read(path, (label,), Declared(), None, None).to_signal().samples[0]
    return samples


def test_scaling_is_the_formula_of_the_standard(tmp_path: Path) -> None:
    """Definition. The printed values have six decimals, hence their tolerance."""
    entry = published("recordings", "IO-EDF-SCALE")
    path = tmp_path / "one.edf"
    write(path, [np.array(entry.inputs["digital"])], ("-440", "510"), ("-2048", "2047"))
    raw = read(path, ("C0",), Declared(), None, None)
    entry.assert_close(raw.gain_uv[0], "gain_uv_per_unit")
    entry.assert_close(signal_uv(path, "C0"), "physical_uv")


@pytest.mark.parametrize(
    ("name", "physical", "digital"),
    [
        ("one.edf", ("-440", "510"), ("-2048", "2047")),
        ("one.edf", ("-3276.8", "3276.7"), ("-32768", "32767")),
        ("one.edf", ("187.5", "-187.5"), ("-32768", "32767")),
        ("one.bdf", ("-262144", "262143"), ("-8388608", "8388607")),
        ("one.bdf", ("-1000.1", "999.3"), ("-8388608", "8388607")),
    ],
)
def test_gain_and_offset_are_the_standard_s_to_the_last_bit(
    tmp_path: Path, name: str, physical: tuple[str, str], digital: tuple[str, str]
) -> None:
    """Gain and offset are the doubles nearest to the exact fractions.

    Exact arithmetic. A value is a product and a sum, each rounded once, so it lies within two units in the last
    place of the larger term.
    """
    low, high = map(int, digital)
    values = np.unique(np.linspace(low, high, 5000).round()).astype(np.int64)
    path = tmp_path / name
    write(path, [values], physical, digital)
    bottom, top = map(Fraction, physical)
    gain = (top - bottom) / (high - low)
    raw = read(path, ("C0",), Declared(), None, None)
    assert raw.gain_uv == (float(gain),)
    assert raw.offset_uv == (float(bottom - gain * low),)
    exact_uv = np.array([float(bottom + gain * (int(value) - low)) for value in values])
    terms = np.maximum(np.abs(values * raw.gain_uv[0]), abs(raw.offset_uv[0]))
    assert (np.abs(signal_uv(path, "C0") - exact_uv) <= 2 * np.spacing(terms)).all()


def test_a_range_of_binary_steps_gives_exact_values(tmp_path: Path) -> None:
    """Closed form: the usual range of 24 bits has steps of 1/32 uV (31.25 nV), which doubles hold exactly."""
    values = np.array([-8388608, -1, 0, 1, 2, 12345, 8388607])
    path = tmp_path / "one.bdf"
    write(path, [values], ("-262144", "262143"), ("-8388608", "8388607"))
    # As printed, the range ends one microvolt below the power of two, and its step is 1.8e-6 short of 1/32.
    gain_uv = read(path, ("C0",), Declared(), None, None).gain_uv[0]
    assert gain_uv == pytest.approx(1 / 32, rel=2e-6)
    write(path, [values], ("-262144", "262144"), ("-8388608", "8388608"))
    np.testing.assert_array_equal(signal_uv(path, "C0"), values / 32)


def test_header_and_file_have_the_sizes_of_the_standard(tmp_path: Path) -> None:
    """Definition, exact: 256 bytes and 256 more a signal, two bytes a sample."""
    entry = published("recordings", "IO-EDF-HEADER")
    for n_signals, expected in zip(entry.inputs["ns"], entry.expected["header_bytes"], strict=True):
        path = tmp_path / "one.edf"
        write(path, [np.arange(4)] * n_signals, ("-1", "1"), ("-9", "9"), n_records=2)
        assert path.stat().st_size == expected + n_signals * 4 * 2
        assert len(inspect(path).channels) == n_signals
        path.write_bytes(path.read_bytes()[: expected - 1])
        with pytest.raises(RecordingError, match=f"allowed: {expected} or more"):
            inspect(path)
    example = entry.inputs["example"]
    path = tmp_path / "example.edf"
    samples = [np.zeros(n * example["n_records"], np.int64) for n in example["samples_per_record"]]
    write(path, samples, ("-1", "1"), ("-9", "9"), n_records=example["n_records"])
    assert path.stat().st_size == entry.expected["example_file_bytes"]
    facts = inspect(path)
    assert facts.repair is None
    assert facts.duration_s == example["n_records"] * example["record_s"]
    assert [channel.rate_hz for channel in facts.channels] == example["samples_per_record"]


@pytest.mark.parametrize("name", ["one.edf", "one.bdf"])
def test_samples_are_those_of_two_other_readers(tmp_path: Path, name: str) -> None:
    """Independent libraries, each with its own order of operations: equal to a few units in the last place."""
    rng = np.random.default_rng(5)
    limit = 32767 if name == "one.edf" else 8388607
    samples = [rng.integers(-limit, limit, n * 30) for n in (256, 256, 512)]
    path = tmp_path / name
    reserved = "" if name == "one.edf" else "24BIT"
    write(path, samples, ("-3200", "3200"), (str(-limit), str(limit)), n_records=30, reserved=reserved)
    edf = (edfio.read_edf if name == "one.edf" else edfio.read_bdf)(path)
    reader = mne.io.read_raw_edf if name == "one.edf" else mne.io.read_raw_bdf
    for label in ("C0", "C1", "C2"):
        found_uv = signal_uv(path, label)
        atol = 8 * np.spacing(3200.0)
        np.testing.assert_allclose(found_uv, edf.get_signal(label).data, rtol=0, atol=atol)
        alone = reader(path, include=[label], preload=True, verbose="error")
        np.testing.assert_allclose(found_uv, alone.get_data()[0] * 1e6, rtol=0, atol=16 * np.spacing(3200.0))


def test_the_other_readers_glue_what_this_one_parts(tmp_path: Path) -> None:
    """Measured: both libraries give a discontinuous file as one stretch; the time stamps say otherwise."""
    path = tmp_path / "one.edf"
    channel = edfio.EdfSignal(
        np.sin(np.arange(400.0)), 100, label="C0", physical_dimension="uV", physical_range=(-2, 2)
    )
    edfio.Edf([channel], annotations=[]).write(path)
    content = path.read_bytes()
    stamps = [f"+{record}\x14\x14".encode() for record in range(4)]
    later = [b"+0\x14\x14", b"+1\x14\x14", b"+7\x14\x14", b"+8\x14\x14"]
    for one, other in zip(stamps, later, strict=True):
        content = content[:768] + content[768:].replace(one, other, 1) if one != other else content
    path.write_bytes(content.replace(b"EDF+C", b"EDF+D"))
    runs = read(path, ("C0",), Declared(), None, None).runs
    assert [(run.first, run.stop, run.start_s) for run in runs] == [
        (0, 200, Fraction(0)),
        (200, 400, Fraction(7)),
    ]
    assert edfio.read_edf(path).duration == 4
    assert inspect(path).duration_s == 9
