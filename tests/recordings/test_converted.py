"""FIF and BrainVision: the samples of the library, at the file's own rate, gaps at their true times."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING, Any

import mne
import numpy as np
import pytest

from bandcairn.errors import RecordingError, UnknownUnitError
from bandcairn.recordings import Declared, RawIndex, content_digests, inspect, parts_of, read
from bandcairn.signal import Annotation, Gap, Run

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

NOTHING = Declared()
N = 2000
LABELS = ("Fz", "Cz", "EMG", "STI 014")
HEADER = """Brain Vision Data Exchange Header File Version 1.0
[Common Infos]
Codepage=UTF-8
DataFile=one.eeg
MarkerFile=one.vmrk
DataFormat=BINARY
DataOrientation=MULTIPLEXED
NumberOfChannels=2
SamplingInterval={interval}
[Binary Infos]
BinaryFormat=INT_16
[Channel Infos]
Ch1=Fz,,0.1,µV
Ch2=Cz,,0.5,{unit}
"""
MARKERS = """Brain Vision Data Exchange Marker File, Version 1.0
[Common Infos]
Codepage=UTF-8
DataFile=one.eeg
[Marker Infos]
"""


@pytest.fixture
def fif(tmp_path: Path) -> Callable[..., Path]:
    """Write a FIF file: `fif(rate_hz=250, notes=())` returns its path."""

    def write(rate_hz: float = 250.0, notes: tuple[tuple[float, float, str], ...] = ()) -> Path:
        rng = np.random.default_rng(1)
        samples = rng.normal(0, 2e-5, (4, N))
        samples[3] = 0
        info = mne.create_info(list(LABELS), rate_hz, ["eeg", "eeg", "emg", "stim"], verbose="error")
        raw = mne.io.RawArray(samples, info, verbose="error")
        if notes:
            raw.set_annotations(mne.Annotations(*map(list, zip(*notes, strict=True))), verbose="error")
        path = tmp_path / "one.fif"
        raw.save(path, fmt="double", overwrite=True, verbose="error")
        return path

    return write


@pytest.fixture
def brainvision(tmp_path: Path) -> Callable[..., Path]:
    """Write a BrainVision file: `brainvision(marks="", interval="4000", unit="mV")` returns the header's path."""

    def write(marks: str = "", interval: str = "4000", unit: str = "mV") -> Path:
        (tmp_path / "one.eeg").write_bytes(integers().tobytes())
        (tmp_path / "one.vmrk").write_text(MARKERS + marks, "utf-8")
        path = tmp_path / "one.vhdr"
        path.write_text(HEADER.format(interval=interval, unit=unit), "utf-8")
        return path

    return write


def integers() -> np.ndarray[Any, np.dtype[np.int16]]:
    """Return the samples of both channels as stored, shape (N, 2)."""
    return np.random.default_rng(2).integers(-2000, 2000, (N, 2)).astype("<i2")


def test_b6_fif_gives_the_samples_of_the_library_at_the_files_rate(fif: Callable[..., Path]) -> None:
    """In microvolt, a channel by itself or among others."""
    path = fif()
    raw = read(path, ("Cz", "EMG"), NOTHING, 1.0, 3.0)
    other = mne.io.read_raw_fif(path, verbose="error").get_data(["Cz", "EMG"])[:, 250:750]
    np.testing.assert_allclose(raw.to_signal().samples, other * 1e6, rtol=1e-15)
    assert raw.runs == (Run(0, 500, Fraction(1)),)
    facts = inspect(path)
    assert [(one.label, one.rate_hz, one.unit) for one in facts.channels] == [
        (label, Fraction(250), "V") for label in ("Fz", "Cz", "EMG")
    ]
    assert facts.duration_s == 8


def test_p7_a_rate_of_fif_is_kept_as_stored(fif: Callable[..., Path]) -> None:
    """FIF holds single precision: that number, exactly, and nothing rounder."""
    assert inspect(fif(999.4121)).channels[0].rate_hz == Fraction(float(np.float32(999.4121)))


def test_p13_a_trigger_channel_of_fif_is_never_a_signal(fif: Callable[..., Path]) -> None:
    """It is named among what is left out."""
    path = fif()
    assert inspect(path).details.left_out == ("STI 014",)
    with pytest.raises(RecordingError, match="STI 014, which holds triggers"):
        read(path, ("STI 014",), NOTHING, None, None)


def test_p4_skipped_stretches_of_fif_are_gaps(fif: Callable[..., Path]) -> None:
    """Filler is no sample; annotations keep their times."""
    path = fif(notes=((2.0, 1.0, "BAD_ACQ_SKIP"), (5.0, 0.5, "eyes closed")))
    raw = read(path, ("Cz",), NOTHING, None, None)
    assert raw.runs == (Run(0, 500, Fraction(0)), Run(500, 1750, Fraction(3)))
    facts = inspect(path)
    assert facts.gaps == (Gap(Fraction(2), Fraction(3)),)
    assert facts.annotations == (Annotation(5.0, 0.5, "eyes closed"),)
    assert content_digests(path).of(("Cz",)) != content_digests(fif()).of(("Cz",))


def test_p19_joined_recordings_are_refused(fif: Callable[..., Path]) -> None:
    """How long the time between them is cannot be told."""
    with pytest.raises(RecordingError, match="a join"):
        inspect(fif(notes=((4.0, 0.0, "EDGE boundary"),)))


def test_b6_brainvision_gives_the_stored_integers_in_microvolt(brainvision: Callable[..., Path]) -> None:
    """Resolution and unit of each channel; the rate is a million over the interval, exactly."""
    path = brainvision("Mk1=New Segment,,1,1,0,20250102030405000000\nMk2=Stimulus,S  1,251,1,0\n")
    raw = read(path, ("Fz", "Cz"), NOTHING, None, None)
    expected_uv = integers().T * np.array([[0.1], [500.0]])
    np.testing.assert_allclose(raw.to_signal().samples, expected_uv, rtol=1e-14)
    facts = inspect(path)
    assert facts.annotations == (Annotation(1.0, 0.004, "Stimulus/S  1"),)
    assert facts.details.start == "20250102030405000000"


@pytest.mark.parametrize(
    ("interval", "rate_hz"), [("1953.125", 512), ("3333.3", Fraction(10_000_000, 33_333))]
)
def test_p7_the_rate_of_brainvision_is_exact(
    brainvision: Callable[..., Path], interval: str, rate_hz: Fraction
) -> None:
    """As the decimal says."""
    assert inspect(brainvision(interval=interval)).channels[0].rate_hz == rate_hz


def test_p4_segments_of_brainvision_lie_at_their_dates(brainvision: Callable[..., Path]) -> None:
    """The recorder was stopped for ten seconds; markers behind it move with the samples."""
    marks = (
        "Mk1=New Segment,,1,1,0,20250102030405000000\n"
        "Mk2=New Segment,,1001,1,0,20250102030419000000\n"
        "Mk3=Stimulus,S  2,1251,1,0\n"
    )
    path = brainvision(marks)
    assert read(path, ("Fz",), NOTHING, None, None).runs == (
        Run(0, 1000, Fraction(0)),
        Run(1000, 2000, Fraction(14)),
    )
    facts = inspect(path)
    assert facts.gaps == (Gap(Fraction(4), Fraction(14)),)
    assert facts.annotations[0].onset_s == 15.0


@pytest.mark.parametrize(
    ("mark", "problem"),
    [
        ("Mk2=New Segment,,1001,1,0\n", "a new segment at sample 1001 without its date"),
        ("Mk2=New Segment,,1001,1,0,20250102030407000000\n", r"a segment that starts at 2\.000000 s"),
        ("Mk2=New Segment,,9999,1,0,20250102030507000000\n", "a new segment at sample 9999 of 2000"),
    ],
)
def test_p4_a_segment_whose_gap_cannot_be_told_is_refused(
    brainvision: Callable[..., Path], mark: str, problem: str
) -> None:
    """Nothing is glued on a guess."""
    path = brainvision("Mk1=New Segment,,1,1,0,20250102030405000000\n" + mark)
    with pytest.raises(RecordingError, match=problem):
        inspect(path)


def test_p1_a_channel_that_is_no_voltage_is_refused(brainvision: Callable[..., Path]) -> None:
    """Degrees Celsius stay what they are."""
    with pytest.raises(UnknownUnitError, match=r"channel Cz in unit -?\d+ of FIF; allowed: a voltage"):
        read(brainvision(unit="C"), ("Cz",), NOTHING, None, None)


def test_samples_beside_the_header_belong_to_the_state_of_a_file(
    brainvision: Callable[..., Path], tmp_path: Path
) -> None:
    """The header stays as it is when its samples change: that must not go unnoticed."""
    import time

    path = brainvision()
    assert [part.name for part in parts_of(path)] == ["one.vhdr", "one.eeg", "one.vmrk"]
    time.sleep(0.12)
    memory = RawIndex.load(tmp_path / "index.json")
    before = memory.content(path, tmp_path)
    (tmp_path / "one.eeg").write_bytes((integers() + np.int16(1)).tobytes())
    after = memory.content(path, tmp_path)
    assert before.of(("Fz",)) != after.of(("Fz",))
    assert before.file_sha256 != after.file_sha256


@pytest.mark.parametrize("name", ["one.fif", "one.vhdr"])
@pytest.mark.parametrize("content", [b"", b"nothing of the kind", b"SamplingInterval=4000\n"])
def test_a_file_that_cannot_be_read_is_refused(tmp_path: Path, name: str, content: bytes) -> None:
    """Never an error of the library."""
    path = tmp_path / name
    path.write_bytes(content)
    with pytest.raises(RecordingError, match=rf"^{name}: found "):
        inspect(path)


@pytest.mark.parametrize("seed", range(4))
def test_any_damage_is_a_recording_error_or_nothing(
    fif: Callable[..., Path], brainvision: Callable[..., Path], seed: int
) -> None:
    """A byte flipped or the end cut off, of either format: no error of the library comes out."""
    rng = np.random.default_rng(seed)
    vhdr = brainvision("Mk1=New Segment,,1,1,0,20250102030405000000\nMk2=Stimulus,S  1,251,1,0\n")
    outcomes = set()
    for path, damaged in ((fif(), "one.fif"), (vhdr, "one.vhdr"), (vhdr, "one.vmrk"), (vhdr, "one.eeg")):
        target = path.with_name(damaged)
        sound = target.read_bytes()
        for index, place in enumerate(rng.integers(0, min(len(sound), 4000), 16).tolist()):
            byte = bytes([int(rng.integers(0, 256))])
            target.write_bytes(sound[:place] + (byte + sound[place + 1 :] if index % 2 else b""))
            try:
                inspect(path)
                content_digests(path)
                read(path, ("Fz",), NOTHING, None, None)
                outcomes.add("read")
            except RecordingError:
                outcomes.add("refused")
        target.write_bytes(sound)
    assert outcomes == {"read", "refused"}
