"""Any byte of a header flipped or cut away: a named error or a correct reading, never other samples unnoticed."""

from __future__ import annotations

import dataclasses
from fractions import Fraction
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest
from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st

from bandcairn.errors import RecordingError
from bandcairn.recordings import Declared, content_digests, inspect, read

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    Build = Callable[..., Path]
    Make = Callable[..., Any]

N_RECORDS = 120
LABELS = ("Cz", "EMG")
N_SIGNALS = {"one.edf": 2, "plus.edf": 3, "gaps.edf": 3, "one.bdf": 2}
# Noise, so that bytes at a wrong place are other samples; its first byte is no blank.
RNG = np.random.default_rng(12)
DIGITAL = {"Cz": RNG.integers(-9000, 9000, N_RECORDS * 64), "EMG": RNG.integers(-9000, 9000, N_RECORDS * 100)}
DIGITAL["Cz"][0] = 4242

SETTINGS = settings(
    suppress_health_check=[HealthCheck.function_scoped_fixture],
    deadline=None,
    max_examples=400,
    derandomize=True,
)
names = st.sampled_from(sorted(N_SIGNALS))
places = st.integers(0, 256 * 4 - 1)


@dataclasses.dataclass
class Sound:
    """An undamaged file and what is read from it."""

    content: bytes
    runs: dict[str, Any]


@pytest.fixture
def sound(build: Build, channel: Make) -> dict[str, Sound]:
    """Write the files that are then damaged."""
    made = {}
    for name in N_SIGNALS:
        text: dict[str, Any] = {}
        if name in {"plus.edf", "gaps.edf"}:
            jumps = name == "gaps.edf"
            starts = [record + (1000 if jumps and record > 50 else 0) for record in range(N_RECORDS)]
            text = {"reserved": "EDF+D" if jumps else "EDF+C"}
            text["lists"] = tuple(f"+{start}\x14\x14".encode() for start in starts)
        channels = [channel("Cz", DIGITAL["Cz"], per_record=64), channel("EMG", DIGITAL["EMG"])]
        path = build(channels, name=name, **text)
        made[name] = Sound(path.read_bytes(), {label: whole(path, label).runs for label in LABELS})
    return made


def whole(path: Path, label: str) -> Any:  # noqa: ANN401
    """Read one channel as a whole."""
    return read(path, (label,), Declared(), None, None)


def check(path: Path, before: Sound) -> None:
    """Hold what is read of a damaged file against the sound one.

    A number of the header that became another number cannot be noticed by anyone: the scaling and the rate of a
    file without time stamps are then what the header says. The integers, their order and their gaps are as they
    were; where fewer records are used, the file tells it.
    """
    try:
        facts = inspect(path)
        content_digests(path)
    except RecordingError:
        return
    for label in LABELS:
        try:
            raw = whole(path, label)
        except RecordingError:
            continue
        samples = raw.samples[0]
        np.testing.assert_array_equal(samples, DIGITAL[label][: len(samples)])
        assert len(samples) == len(DIGITAL[label]) or facts.repair is not None
        if len(before.runs[label]) > 1 and len(samples) == len(DIGITAL[label]):
            assert [(run.first, run.stop) for run in raw.runs] == [
                (run.first, run.stop) for run in before.runs[label]
            ]


@given(name=names, place=places, value=st.integers(0, 255))
@example(name="one.edf", place=236, value=ord("2"))
@example(name="gaps.edf", place=196, value=ord("C"))
@example(name="gaps.edf", place=192, value=ord("X"))
@example(name="gaps.edf", place=244, value=ord("2"))
@SETTINGS
def test_p6_a_flipped_byte_is_a_named_error_or_the_same_samples(
    sound: dict[str, Sound], tmp_path: Path, name: str, place: int, value: int
) -> None:
    """Digits, blanks, control characters, letters: anywhere in the header."""
    before = sound[name]
    place %= 256 * (N_SIGNALS[name] + 1)
    path = tmp_path / name
    path.write_bytes(before.content[:place] + bytes([value]) + before.content[place + 1 :])
    check(path, before)


@given(name=names, place=places, value=st.sampled_from(b"0123456789 -+.,"))
@SETTINGS
def test_p6_a_flipped_digit_is_a_named_error_or_the_same_samples(
    sound: dict[str, Sound], tmp_path: Path, name: str, place: int, value: int
) -> None:
    """What turns one number into another is the hardest to notice."""
    before = sound[name]
    place = 184 + place % (256 * (N_SIGNALS[name] + 1) - 184)
    path = tmp_path / name
    path.write_bytes(before.content[:place] + bytes([value]) + before.content[place + 1 :])
    check(path, before)


@given(name=names, place=places, length=st.integers(1, 300))
@SETTINGS
def test_p6_bytes_cut_out_of_the_header_are_a_named_error_or_the_same_samples(
    sound: dict[str, Sound], tmp_path: Path, name: str, place: int, length: int
) -> None:
    """Everything behind them then lies at another place."""
    before = sound[name]
    header_bytes = 256 * (N_SIGNALS[name] + 1)
    place %= header_bytes
    path = tmp_path / name
    path.write_bytes(before.content[:place] + before.content[min(place + length, header_bytes) :])
    check(path, before)


@given(name=names, size=st.integers(0, 256 * 4))
@SETTINGS
def test_p6_a_file_that_ends_within_its_header_is_a_named_error(
    sound: dict[str, Sound], tmp_path: Path, name: str, size: int
) -> None:
    """Whatever is left of it."""
    path = tmp_path / name
    path.write_bytes(sound[name].content[: min(size, 256 * (N_SIGNALS[name] + 1))])
    for reader in (inspect, content_digests, lambda file: whole(file, "Cz")):
        with pytest.raises(RecordingError, match=rf"^{name}: found "):
            reader(path)


def test_a_damaged_scale_is_read_as_the_header_says(sound: dict[str, Sound], tmp_path: Path) -> None:
    """The property's one exception, spelled out: the file holds no second word on its scale."""
    content = sound["one.edf"].content
    assert content.count(b"-3276.8 ") == 2
    path = tmp_path / "one.edf"
    path.write_bytes(content.replace(b"-3276.8 ", b"-3276.9 ", 1))
    step_uv = Fraction("6553.6") / 65535
    assert whole(path, "Cz").gain_uv[0] == float(step_uv)
