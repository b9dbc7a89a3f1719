"""Pains P1, P2, P9 and P13: units are never guessed, texts always read, trigger words never taken for voltages."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest

from bandcairn.errors import RecordingError, UnknownUnitError
from bandcairn.recordings import Declared, content_digests, inspect, read

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    Build = Callable[..., Path]
    Make = Callable[..., Any]

NOTHING = Declared()
REASON = Declared(unit="mV", unit_reason="the recorder writes no unit; its manual says mV")


@pytest.mark.parametrize("unit", [b"", b".V", b"mmHg", b"UV"])
def test_p1_a_blank_or_unknown_unit_is_refused_unless_declared_with_a_reason(
    build: Build, channel: Make, unit: bytes
) -> None:
    """Neither a unit without a reason nor a reason without a unit will do."""
    path = build([channel("Cz", unit=unit)])
    for declared in (NOTHING, Declared(unit="mV"), Declared(unit_reason="because")):
        with pytest.raises(UnknownUnitError, match=r"channel Cz in .*unit: \.\.\., unit_reason: \.\.\."):
            read(path, ("Cz",), declared, None, None)
    assert read(path, ("Cz",), REASON, None, None).gain_uv[0] == pytest.approx(100.0)


@pytest.mark.parametrize(
    ("unit", "factor"), [("uV", 1), ("µV", 1), ("μV", 1), ("mV", 1e3), ("V", 1e6), ("nV", 1e-3)]
)
def test_p1_every_known_unit_of_a_header_is_its_own_word(
    build: Build, channel: Make, unit: str, factor: float
) -> None:
    """In either encoding; a declaration does not touch it."""
    spellings = {unit.encode(), unit.encode("latin-1", "ignore")} - {b"V"} if unit != "V" else {b"V"}
    for spelling in spellings:
        path = build([channel("Cz", unit=spelling)])
        for declared in (NOTHING, REASON):
            gain_uv = read(path, ("Cz",), declared, None, None).gain_uv[0]
            assert gain_uv == pytest.approx(0.1 * factor, rel=1e-12)


@pytest.mark.parametrize("label", ["Status", "STATUS", "Trigger", "TRIG", "Marker", "STI 014", "Event"])
@pytest.mark.parametrize("name", ["one.edf", "one.bdf"])
def test_p13_trigger_channels_are_never_signals(build: Build, channel: Make, label: str, name: str) -> None:
    """They are told apart, digested nowhere, and refused by name."""
    path = build([channel("Cz"), channel(label)], name=name)
    facts = inspect(path)
    assert [one.label for one in facts.channels] == ["Cz"]
    assert facts.details.left_out == (label,)
    assert [one.label for one in content_digests(path).channels] == ["Cz"]
    with pytest.raises(RecordingError, match=f"{label}, which holds annotations or triggers"):
        read(path, (label,), NOTHING, None, None)


def test_p3_channels_of_two_rates_keep_their_own(build: Build, channel: Make) -> None:
    """Nothing is brought to the rate of another channel, in either container."""
    for name in ("one.edf", "one.bdf"):
        path = build([channel("Cz"), channel("EMG", np.arange(400), per_record=200)], name=name)
        for label, rate_hz, n_samples in (("Cz", 100, 200), ("EMG", 200, 400)):
            raw = read(path, (label,), NOTHING, None, None)
            assert (raw.rate_hz, len(raw.samples[0])) == (Fraction(rate_hz), n_samples)


@pytest.mark.parametrize(
    ("note", "encoding"),
    [(b"closed", "ASCII"), ("geschloßen".encode(), "UTF-8"), ("geschloßen".encode("latin-1"), "Latin-1")],
)
def test_p9_annotations_are_utf_8_else_latin_1_and_which_is_told(
    build: Build, channel: Make, note: bytes, encoding: str
) -> None:
    """The text is the same in either."""
    path = build(
        [channel("Cz")], reserved="EDF+C", lists=(b"+0\x14\x14\0+0.5\x14" + note + b"\x14", b"+1\x14\x14")
    )
    facts = inspect(path)
    assert facts.details.encoding == encoding
    assert facts.annotations[0].text in {"closed", "geschloßen"}


def test_p8_reading_leaves_the_original_untouched(build: Build, channel: Make) -> None:
    """A rewritten header rounds its ranges to eight characters: raw files are only ever read."""
    path = build([channel("Cz", physical=("-1.2e-06", "1.2e-06"))])
    path.chmod(0o444)
    before = path.read_bytes()
    read(path, ("Cz",), NOTHING, None, None)
    content_digests(path)
    assert path.read_bytes() == before


def test_p15_scrubbed_identity_leaves_samples_onsets_and_digests(build: Build, channel: Make) -> None:
    """Names, dates and numbers of devices are no content."""
    lists = (b"+0\x14\x14\0+0.5\x1530\x14eyes closed\x14", b"+1\x14\x14")
    one = build(
        [channel("Cz")], name="one.edf", patient="MCH F 02-MAY-1951 Jane_Doe", reserved="EDF+C", lists=lists
    )
    two = build([channel("Cz")], name="two.edf", start="03.04.8505.06.07", reserved="EDF+C", lists=lists)
    assert inspect(one).annotations == inspect(two).annotations
    assert content_digests(one).channels == content_digests(two).channels
    assert content_digests(one).annotations_sha256 == content_digests(two).annotations_sha256
