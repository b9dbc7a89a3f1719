"""EDF and BDF: facts, samples and scaling equal the header's formula and two independent readers."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path
from typing import TYPE_CHECKING, Any

import edfio
import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from bandcairn.errors import RecordingError, UnknownUnitError
from bandcairn.recordings import Declared, RawSignal, inspect, read
from bandcairn.recordings.edf import _scale_uv
from bandcairn.recordings.export import ExportChannel, write_bdf, write_edf
from bandcairn.recordings.header import SignalHeader
from bandcairn.signal import Annotation, ChannelFacts, Run

if TYPE_CHECKING:
    from collections.abc import Callable
    from decimal import Decimal

    Build = Callable[..., Path]
    Make = Callable[..., Any]

NOTHING = Declared()


def whole(path: Path, *labels: str) -> RawSignal:
    """Read without a cut."""
    return read(path, labels, NOTHING, None, None)


def test_facts_of_a_plain_file_are_those_of_its_header(build: Build, channel: Make) -> None:
    """Rates are exact, units as written, nothing is computed from samples."""
    path = build([channel("Cz"), channel("EMG", np.zeros(600), per_record=300, unit=b"mV")], record_s="0.3")
    facts = inspect(path)
    assert facts.channels == (
        ChannelFacts("Cz", Fraction(1000, 3), "uV", 200),
        ChannelFacts("EMG", Fraction(1000), "mV", 600),
    )
    assert facts.annotations == ()


def test_status_of_bdf_and_annotation_channels_are_no_channels(build: Build, channel: Make) -> None:
    """Trigger words and lists are never taken for a signal."""
    lists = (b"+0\x14\x14", b"+1\x14\x14")
    path = build([channel("Cz"), channel("Status")], name="one.bdf", lists=lists, reserved="BDF+C")
    assert [one.label for one in inspect(path).channels] == ["Cz"]


@pytest.mark.parametrize("name", ["one.edf", "one.EDF", "one.bdf", "One.Bdf"])
def test_suffix_in_any_case_is_read(build: Build, channel: Make, name: str) -> None:
    """Recorders write capital letters."""
    assert whole(build([channel("Cz")], name=name), "Cz").samples[0].tolist() == list(range(-100, 100))


def test_samples_stay_integers_with_their_scaling_beside(build: Build, channel: Make) -> None:
    """The load node stores integers: 16 bits from EDF, 32 from BDF, both read-only."""
    edf = whole(build([channel("Cz")]), "Cz")
    bdf = whole(build([channel("Cz")], name="one.bdf"), "Cz")
    assert [str(raw.samples[0].dtype) for raw in (edf, bdf)] == ["int16", "int32"]
    assert not edf.samples[0].flags.writeable
    assert edf.runs == (Run(0, 200, Fraction(0)),)
    assert edf.gain_uv == pytest.approx((0.1,), rel=1e-15)


def test_extreme_values_of_24_bits_keep_their_sign(build: Build, channel: Make) -> None:
    """Two's complement of three bytes: lowest, -1, 0, 1, highest."""
    values = np.array([-(2**23), -1, 0, 1, 2**23 - 1] * 40)
    signal = channel("Cz", values, physical=("-262144", "262143"), limits=("-8388608", "8388607"))
    path = build([channel("A"), signal], name="two.bdf")
    assert whole(path, "Cz").samples[0].tolist() == values.tolist()


@pytest.mark.parametrize(
    ("unit", "factor"),
    [
        (b"nV", 1e-3),
        (b"uV", 1.0),
        (b"\xb5V", 1.0),
        ("µV".encode(), 1.0),
        ("μV".encode(), 1.0),
        (b"mV", 1e3),
        (b"V", 1e6),
    ],
)
def test_every_known_unit_becomes_microvolt(build: Build, channel: Make, unit: bytes, factor: float) -> None:
    """The micro sign comes as Latin-1, as UTF-8, or as the Greek letter."""
    digital = np.arange(-100, 100)
    path = build([channel("Cz", digital, unit=unit, physical=("-32.768", "32.767"))])
    expected = (-32.768 + (32.767 + 32.768) * (digital + 32768) / 65535) * factor
    scaled = whole(path, "Cz").to_signal().samples[0]
    # A few units in the last place of the range, since the formula subtracts its ends.
    np.testing.assert_allclose(scaled, expected, rtol=0, atol=8 * np.spacing(32.768 * factor))


@pytest.mark.parametrize("unit", [b"", b"UV", b"%", b"degC", b"MV"])
def test_blank_or_unknown_unit_is_refused(build: Build, channel: Make, unit: bytes) -> None:
    """A wrong scale is worse than no data."""
    path = build([channel("Cz", unit=unit)])
    with pytest.raises(UnknownUnitError, match=r"one\.edf: found channel Cz in .*allowed: nV, uV"):
        whole(path, "Cz")


def test_inverted_polarity_keeps_its_sign(build: Build, channel: Make) -> None:
    """A physical minimum above the maximum turns the signal around, as the format allows."""
    path = build([channel("Cz", np.full(200, 100), physical=("3276.7", "-3276.8"))])
    assert whole(path, "Cz").to_signal().samples[0, 0] == pytest.approx(-10.1, abs=1e-9)


@pytest.mark.parametrize("write", [write_edf, write_bdf])
def test_values_equal_those_of_two_other_readers(tmp_path: Path, write: Callable[..., None]) -> None:
    """Independent libraries: edfio in the file's unit, mne in volt; each at the channel's own rate."""
    mne = pytest.importorskip("mne")
    rng = np.random.default_rng(7)
    channels = [
        ExportChannel("Cz", "uV", 256, rng.normal(0, 40, 2560), (-500.0, 700.0)),
        ExportChannel("ECG", "mV", 500, rng.normal(0, 0.4, 5000), (-4.0, 5.5)),
    ]
    path = tmp_path / ("one.edf" if write is write_edf else "one.bdf")
    write(path, channels)
    other = (edfio.read_edf if write is write_edf else edfio.read_bdf)(path)
    reader = mne.io.read_raw_edf if write is write_edf else mne.io.read_raw_bdf
    for channel, per_uv in zip(channels, (1.0, 1e3), strict=True):
        signal = whole(path, channel.label).to_signal()
        span_uv = 12e2 if channel.unit == "uV" else 9.5e3
        assert signal.rate_hz == channel.rate_hz
        np.testing.assert_allclose(
            signal.samples[0],
            other.get_signal(channel.label).data * per_uv,
            rtol=0,
            atol=8 * np.spacing(span_uv),
        )
        alone = reader(path, include=[channel.label], preload=True, verbose="error")
        np.testing.assert_allclose(
            signal.samples, alone.get_data() * 1e6, rtol=0, atol=16 * np.spacing(span_uv)
        )


@given(
    ends=st.tuples(st.decimals(-99999, 99999, places=2), st.decimals(-99999, 99999, places=2)),
    digital_low=st.integers(-32768, 32000),
    steps=st.integers(1, 700),
)
def test_scaling_equals_the_exact_formula(
    ends: tuple[Decimal, Decimal], digital_low: int, steps: int
) -> None:
    """For any range, upright or inverted, the digital range meets the physical one in exact arithmetic."""
    assume(ends[0] != ends[1])
    low, high = Fraction(ends[0]), Fraction(ends[1])
    texts = (str(ends[0]), str(ends[1]), str(digital_low), str(digital_low + steps))
    gain_uv, offset_uv = _scale_uv(Path("one.edf"), SignalHeader("Cz", "mV", texts, 1, 0, 2, ""), NOTHING)
    for digital in (digital_low, digital_low + steps // 2, digital_low + steps):
        exact_uv = float((low + (high - low) * (digital - digital_low) / steps) * 1000)
        # Gain, product, offset and sum are each rounded once, relative to the larger term.
        slack_uv = 4 * float(np.spacing(abs(gain_uv * digital) + abs(offset_uv)))
        assert abs(gain_uv * digital + offset_uv - exact_uv) <= slack_uv


@pytest.mark.parametrize("name", ["one.edf", "one.bdf"])
@pytest.mark.parametrize(
    ("times_s", "first", "stop"),
    [
        ((None, None), 0, 200),
        ((0.1, None), 10, 200),
        ((0.101, 1.9), 11, 190),
        ((0.1, 0.1001), 10, 11),
        ((0.5, 2.0), 50, 200),
        ((None, 0.3), 0, 30),
    ],
)
def test_cut_holds_the_samples_at_or_after_start_and_before_stop(
    build: Build, channel: Make, *, name: str, times_s: tuple[float, float], first: int, stop: int
) -> None:
    """Half-open; 0.1 s at 100 Hz is sample 10 though its binary neighbour lies above 0.1."""
    path = build([channel("A", np.zeros(200)), channel("Cz")], name=name)
    raw = read(path, ("Cz",), NOTHING, *times_s)
    assert raw.samples[0].tolist() == list(range(first - 100, stop - 100))
    assert raw.runs == (Run(0, stop - first, Fraction(first, 100)),)


@pytest.mark.parametrize(
    ("start_s", "stop_s"),
    [
        (-0.1, 1.0),
        (0.0, 2.01),
        (1.0, 1.0),
        (1.5, 0.5),
        (2.0, None),
        (float("nan"), None),
        (0.0, float("inf")),
    ],
)
def test_cut_beyond_the_file_is_refused(
    build: Build, channel: Make, start_s: float, stop_s: float | None
) -> None:
    """The length of the file is named."""
    path = build([channel("Cz")])
    with pytest.raises(
        RecordingError, match=r"one\.edf: found a cut from .*allowed: 0 <= start < stop <= 2 s"
    ):
        read(path, ("Cz",), NOTHING, start_s, stop_s)


def test_cut_between_two_samples_is_refused(build: Build, channel: Make) -> None:
    """A stretch without a sample is no signal."""
    path = build([channel("Cz")])
    with pytest.raises(RecordingError, match="without a sample at 100 Hz"):
        read(path, ("Cz",), NOTHING, 0.101, 0.109)


def test_channel_that_is_absent_is_refused_with_those_present(build: Build, channel: Make) -> None:
    """The remedy needs the names of the file."""
    with pytest.raises(RecordingError, match=r"found no channel Pz; allowed: one of Cz, Fz"):
        whole(build([channel("Cz"), channel("Fz")]), "Pz")


def test_channel_that_appears_twice_is_refused(build: Build, channel: Make) -> None:
    """Nobody can tell which of the two is meant; others stay readable."""
    path = build([channel("Cz"), channel("Cz"), channel("Fz")])
    with pytest.raises(RecordingError, match="found 2 channels named Cz"):
        whole(path, "Cz")
    assert whole(path, "Fz").labels == ("Fz",)


def test_two_rates_within_a_signal_are_refused(build: Build, channel: Make) -> None:
    """Nothing is resampled silently."""
    path = build([channel("Cz"), channel("EMG", np.zeros(400), per_record=200)])
    with pytest.raises(RecordingError, match="found Cz at 100 Hz, EMG at 200 Hz; allowed: one rate"):
        whole(path, "Cz", "EMG")


def test_order_of_labels_is_the_order_asked_for(build: Build, channel: Make) -> None:
    """Rows follow the study, not the file."""
    path = build([channel("A", np.zeros(200)), channel("B", np.ones(200))])
    assert [int(samples[0]) for samples in whole(path, "B", "A").samples] == [1, 0]


def test_channel_without_a_range_spoils_only_itself(build: Build, channel: Make) -> None:
    """A marker channel may hold 0 to 0; the EEG beside it is sound."""
    path = build([channel("Cz"), channel("Mark", physical=("0", "0")), channel("Dig", limits=("5", "5"))])
    assert whole(path, "Cz").labels == ("Cz",)
    with pytest.raises(RecordingError, match="channel Mark with physical range 0 to 0"):
        whole(path, "Mark")
    with pytest.raises(RecordingError, match="channel Dig with digital range 5 to 5"):
        whole(path, "Dig")


def test_range_beyond_any_double_is_refused(build: Build, channel: Make) -> None:
    """Eight characters can hold 1e999999."""
    with pytest.raises(RecordingError, match="'1e999999' as the physical maximum of channel Cz"):
        whole(build([channel("Cz", physical=("0", "1e999999"))]), "Cz")


def test_decimal_comma_in_the_header_is_refused_with_the_remedy(build: Build, channel: Make) -> None:
    """Some recorders follow the locale of their computer."""
    path = build([channel("Cz", physical=("-3276,8", "3276,7"))])
    with pytest.raises(
        RecordingError, match=r"'-3276,8' as the physical minimum of channel Cz.*decimal point"
    ):
        whole(path, "Cz")


def test_continuous_file_whose_clock_jumps_is_refused(build: Build, channel: Make) -> None:
    """The declaration EDF+C is checked against the start time of every record."""
    path = build([channel("Cz")], reserved="EDF+C", lists=(b"+0\x14\x14", b"+9\x14\x14"))
    for reader in (inspect, lambda file: whole(file, "Cz")):
        with pytest.raises(RecordingError, match="data record 2 starting at 9 s; allowed: 1 s"):
            reader(path)


@pytest.mark.parametrize(
    ("record", "problem"),
    [
        (b"", "data record 2 without its start time"),
        (b"+1\x14\x14\0nonsense", "the annotation b'nonsense'"),
        (b"+" + b"9" * 5000 + b"\x14\x14", "data record 2 without its start time"),
        (b"+1\x14\x14\0+" + b"9" * 5000 + b"\x14x\x14", r"the annotation b'\+999"),
    ],
)
def test_damaged_annotation_list_is_refused(build: Build, channel: Make, record: bytes, problem: str) -> None:
    """With the bytes that stand there."""
    path = build([channel("Cz")], reserved="EDF+C", lists=(b"+0\x14\x14", record))
    with pytest.raises(RecordingError, match=problem):
        inspect(path)


def test_annotations_count_from_the_first_sample_and_are_sorted(build: Build, channel: Make) -> None:
    """A sub-second start is taken off exactly; several texts share an onset; any record may carry any list."""
    lists = (
        b"+0.25\x14\x14\0+2.0\x1530\x14late\x14".replace(b"2.0", b"1.75"),
        b"+1.25\x14\x14\0+0.35\x14eyes closed\x14lights \xc3\xb6ff\x14",
    )
    second = (b"+0.25\x14\x14\0+0.3\x14B\x14", b"")
    path = build([channel("Cz")], reserved="EDF+C", lists=lists, second_lists=second)
    assert inspect(path).annotations == (
        Annotation(0.05, 0.0, "B"),
        Annotation(0.1, 0.0, "eyes closed"),
        Annotation(0.1, 0.0, "lights öff"),
        Annotation(1.5, 30.0, "late"),
    )


def test_file_of_annotations_alone_has_no_channels(tmp_path: Path) -> None:
    """Scorings come as EDF+ files with records of 0 s."""
    path = tmp_path / "scoring.edf"
    edfio.Edf([], annotations=[edfio.EdfAnnotation(30, 30, "N2")]).write(path)
    facts = inspect(path)
    assert (facts.channels, facts.annotations) == ((), (Annotation(30.0, 30.0, "N2"),))
    with pytest.raises(RecordingError, match="no channel Cz"):
        whole(path, "Cz")


@pytest.mark.parametrize("write", [write_edf, write_bdf])
def test_annotations_written_are_read_back(tmp_path: Path, write: Callable[..., None]) -> None:
    """Through an independent writer."""
    notes = (Annotation(0.5, 2.0, "eyes closed"), Annotation(3.125, 0.0, "contraction 1"))
    path = tmp_path / ("one.edf" if write is write_edf else "one.bdf")
    write(path, [ExportChannel("Cz", "uV", 100, np.zeros(1000), (-100, 100))], notes)
    assert inspect(path).annotations == notes


@pytest.mark.parametrize(
    ("content", "problem"),
    [
        (b"", "an empty file"),
        (b"not a recording at all", "the first bytes b'not a re'"),
        (b"0       ", "8 bytes"),
        (b"\xffBIOSEMI" + b" " * 600, r"BDF inside; allowed: EDF.*Rename it to \.bdf"),
        (b"0".ljust(8) + b" " * 248, "'' as the number of signals"),
    ],
)
def test_file_that_is_no_recording_is_refused(tmp_path: Path, content: bytes, problem: str) -> None:
    """Never an error of a library."""
    path = tmp_path / "one.edf"
    path.write_bytes(content)
    with pytest.raises(RecordingError, match=rf"^one\.edf: found {problem}"):
        inspect(path)


def test_any_damage_to_the_header_is_a_recording_error_or_nothing(build: Build, channel: Make) -> None:
    """A thousand headers with a damaged byte: no other error comes out."""
    path = build([channel("Cz")], reserved="EDF+C", lists=(b"+0\x14\x14", b"+1\x14\x14"))
    sound = path.read_bytes()
    rng = np.random.default_rng(3)
    refused = 0
    for place, value in zip(rng.integers(0, 768, 1000), rng.integers(0, 256, 1000), strict=True):
        path.write_bytes(sound[:place] + bytes([value]) + sound[place + 1 :])
        try:
            inspect(path)
            whole(path, "Cz")
        except RecordingError:
            refused += 1
    assert refused > 100


def test_unknown_suffix_missing_file_and_folder_are_refused(tmp_path: Path) -> None:
    """Each says what is allowed or why the system said no."""
    with pytest.raises(RecordingError, match=r"the suffix \.eeg; allowed: \.edf, \.bdf, \.csv, \.tsv"):
        inspect(tmp_path / "one.eeg")
    (tmp_path / "folder.edf").mkdir()
    for name in ("absent.edf", "absent.csv", "folder.edf"):
        with pytest.raises(RecordingError, match=rf"^{name}: found (no such file|is a) "):
            inspect(tmp_path / name)


def test_non_integer_record_duration_gives_the_exact_rate(build: Build, channel: Make) -> None:
    """999.4121 Hz is not 999: samples per record over the duration as written."""
    path = build([channel("Cz")], record_s="0.100059")
    assert inspect(path).channels[0].rate_hz == Fraction(100_000_000, 100_059)


def test_file_longer_than_one_block_is_read_whole(tmp_path: Path) -> None:
    """Blocks of a mebibyte are put together without a seam."""
    rng = np.random.default_rng(11)
    digital = rng.integers(-32768, 32767, 1_500_000).astype(np.float64)
    path = tmp_path / "one.edf"
    write_edf(path, [ExportChannel("Cz", "uV", 1000, digital, (-32768, 32767))], None)
    np.testing.assert_array_equal(whole(path, "Cz").samples[0], digital)
    cut = read(path, ("Cz",), NOTHING, 700.001, 1400.5)
    np.testing.assert_array_equal(cut.samples[0], digital[700_001:1_400_500])
