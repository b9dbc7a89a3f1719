"""Content digests: the same for every copy of the signals, another for any change of them."""

from __future__ import annotations

import hashlib
from concurrent.futures import ThreadPoolExecutor
from typing import TYPE_CHECKING, Any

import edfio
import numpy as np
import pytest

from bandcairn.errors import RecordingError
from bandcairn.recordings import FileContent, content_digests
from bandcairn.recordings.export import ExportChannel, Person, write_edf
from bandcairn.signal import Annotation

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    Build = Callable[..., Path]
    Make = Callable[..., Any]

LISTS = (b"+0\x14\x14\0+0.5\x1530\x14eyes closed\x14", b"+1\x14\x14")


def signals(content: FileContent) -> tuple[object, object]:
    """All that keys are made of: everything but the digest of the bytes."""
    return content.channels, content.annotations_sha256


@pytest.fixture
def sound(build: Build, channel: Make) -> FileContent:
    """Digest the file that the others are compared with."""
    path = build([channel("Cz"), channel("Fz", np.arange(200))], reserved="EDF+C", lists=LISTS)
    return content_digests(path)


def test_identity_dates_and_name_make_no_difference(build: Build, channel: Make, sound: FileContent) -> None:
    """A de-identified copy has the keys of its original, though its bytes differ."""
    other = content_digests(
        build(
            [channel("Cz"), channel("Fz", np.arange(200))],
            name="scrubbed.edf",
            patient="MCH-0234567 F 02-MAY-1951 Haagse_Harry",
            start="02.03.0409.10.11",
            reserved="EDF+C",
            lists=LISTS,
        )
    )
    assert signals(other) == signals(sound)
    assert other.file_sha256 != sound.file_sha256


def test_anonymized_by_another_library_makes_no_difference(tmp_path: Path) -> None:
    """The scrubbing that labs do in practice."""
    original, scrubbed = tmp_path / "one.edf", tmp_path / "two.edf"
    channels = [ExportChannel("Cz", "uV", 100, np.arange(1000.0), (-2000, 2000))]
    write_edf(original, channels, (Annotation(1.5, 2.0, "eyes closed"),), Person("P-17", "Jane_Doe"))
    edf = edfio.read_edf(original, lazy_load_data=False)
    edf.anonymize()
    edf.write(scrubbed)
    assert b"Jane_Doe" not in scrubbed.read_bytes()
    assert signals(content_digests(scrubbed)) == signals(content_digests(original))


def test_one_step_of_one_sample_changes_only_its_channel(
    build: Build, channel: Make, sound: FileContent
) -> None:
    """The last sample of the second channel, one step up."""
    digital = np.arange(200)
    digital[-1] += 1
    other = content_digests(build([channel("Cz"), channel("Fz", digital)], reserved="EDF+C", lists=LISTS))
    assert other.channels[0] == sound.channels[0]
    assert other.channels[1].sha256 != sound.channels[1].sha256
    assert other.annotations_sha256 == sound.annotations_sha256


def test_swapped_labels_change_both_channels(build: Build, channel: Make, sound: FileContent) -> None:
    """The label is part of the content: left taken for right is another recording."""
    other = content_digests(
        build([channel("Fz"), channel("Cz", np.arange(200))], reserved="EDF+C", lists=LISTS)
    )
    assert not {one.sha256 for one in other.channels} & {one.sha256 for one in sound.channels}


def test_swapped_order_keeps_every_digest(build: Build, channel: Make, sound: FileContent) -> None:
    """Where a channel stands in the file says nothing about it."""
    other = content_digests(
        build([channel("Fz", np.arange(200)), channel("Cz")], reserved="EDF+C", lists=LISTS)
    )
    assert other.of(("Cz", "Fz")) == sound.of(("Cz", "Fz"))


@pytest.mark.parametrize(
    ("change", "record_s"),
    [
        ({"unit": b"mV"}, "1"),
        ({"physical": ("-3276.8", "3276.6")}, "1"),
        ({"limits": ("-32767", "32767")}, "1"),
        ({}, "2"),
    ],
)
def test_scaling_unit_and_rate_are_content(
    build: Build, channel: Make, sound: FileContent, change: dict[str, Any], record_s: str
) -> None:
    """The same integers under another scale or clock are another signal."""
    lists = (LISTS[0], f"+{record_s}\x14\x14".encode())
    path = build([channel("Cz", **change)], record_s=record_s, reserved="EDF+C", lists=lists)
    assert content_digests(path).of(("Cz",)) != sound.of(("Cz",))


def test_layout_of_records_and_spelling_of_numbers_make_no_difference(build: Build, channel: Make) -> None:
    """Two records of 1 s or one of 2 s, 1.5 or 1.50: the same signal."""
    one = build([channel("Cz", physical=("-1.5", "1.5"))])
    two = build([channel("Cz", per_record=200, physical=("-1.50", "+1.5"))], name="two.edf", record_s="2")
    assert signals(content_digests(one)) == signals(content_digests(two))


def test_annotation_text_changes_only_the_annotations(
    build: Build, channel: Make, sound: FileContent
) -> None:
    """Channels keep their keys; nodes cut by annotations do not."""
    lists = (LISTS[0].replace(b"closed", b"opened"), LISTS[1])
    other = content_digests(
        build([channel("Cz"), channel("Fz", np.arange(200))], reserved="EDF+C", lists=lists)
    )
    assert other.channels == sound.channels
    assert other.annotations_sha256 != sound.annotations_sha256


def test_digest_of_the_bytes_is_that_of_the_file(build: Build, channel: Make, delimited: Build) -> None:
    """As any other tool computes it."""
    for path in (build([channel("Cz")]), build([channel("Cz")], name="one.bdf"), delimited("Fz\n1\n")):
        assert content_digests(path).file_sha256 == hashlib.sha256(path.read_bytes()).hexdigest()


@pytest.mark.parametrize(
    "content",
    [
        "Fz,Cz\r\n1.5,2\r\n3,4\r\n",
        b"\xef\xbb\xbfFz,Cz\n1.5,2\n3,4\n",
        "Fz,Cz\n1.50,2.0\n 3,4e0",
        '"Fz",Cz\n"1.5",2\n3,4\n',
    ],
)
def test_bytes_of_text_make_no_difference(delimited: Build, content: str | bytes) -> None:
    """Line ends, byte order mark, quotes and trailing zeros are no content."""
    sound = content_digests(delimited("Fz,Cz\n1.5,2\n3,4\n", "sound.csv"))
    assert signals(content_digests(delimited(content))) == signals(sound)


@pytest.mark.parametrize(
    ("content", "same"),
    [
        ("Fz,Cz\n1.5,2\n3,5\n", ("Fz",)),
        ("Cz,Fz\n1.5,2\n3,4\n", ()),
        ("time_s,Fz,Cz\n0.000000,1.5,2\n0.002000,3,4\n", ()),
        ("Fz,Cz\n1.5,2\n3,x\n", ("Fz",)),
        ("Fz,Cz\n1.5,2\n3,\n", ("Fz",)),
    ],
)
def test_values_labels_and_rate_of_text_are_content(
    delimited: Build, content: str, same: tuple[str, ...]
) -> None:
    """A cell that is no number is digested as it stands; reading judges it."""
    sound = content_digests(delimited("Fz,Cz\n1.5,2\n3,4\n", "sound.csv"))
    other = content_digests(delimited(content))
    assert tuple(label for label in ("Fz", "Cz") if other.of((label,)) == sound.of((label,))) == same


def test_channel_without_a_range_is_digested(build: Build, channel: Make) -> None:
    """Other channels of its file stay usable."""
    path = build([channel("Cz"), channel("Mark", physical=("0", "x"))])
    assert [one.label for one in content_digests(path).channels] == ["Cz", "Mark"]


def test_label_that_does_not_occur_once_has_no_digest(build: Build, channel: Make) -> None:
    """Reading refuses it with a sentence; a digest by position would be a guess."""
    content = content_digests(build([channel("Cz"), channel("Cz"), channel("Fz")]))
    for label in ("Cz", "Pz"):
        with pytest.raises(KeyError, match=label):
            content.of((label,))


def test_threads_give_the_same_digests(tmp_path: Path) -> None:
    """Hashing releases Python's lock; nothing is shared."""
    path = tmp_path / "one.edf"
    samples = np.random.default_rng(2).integers(-3000, 3000, 800_000).astype(np.float64)
    write_edf(path, [ExportChannel("Cz", "uV", 1000, samples, (-32768, 32767))])
    alone = content_digests(path)
    with ThreadPoolExecutor(4) as pool:
        assert set(pool.map(content_digests, [path] * 8)) == {alone}


def test_faulty_layout_is_refused(build: Build, channel: Make) -> None:
    """What cannot be read has no content."""
    with pytest.raises(RecordingError, match="'-2' as the number"):
        content_digests(build([channel("Cz")], n_records="-2"))


def test_layout_of_format_1_is_what_its_description_says(build: Build, channel: Make) -> None:
    """Recomputed by hand, so that others can check a key without this package."""
    path = build([channel("Cz", np.arange(200), physical=("-3276.8", "3276.7"))], record_s="0.3")
    opening = (
        b'bandcairn channel 1\n{"label":"Cz","rate_hz":"1000/3","runs":[[0,200,"0"]],"samples":"int16",'
        b'"scaling":["-16384/5","32767/10","-32768","32767"],"unit":"uV"}\n'
    )
    expected = hashlib.sha256(opening + np.arange(200, dtype="<i2").tobytes()).hexdigest()
    assert content_digests(path).channels[0].sha256 == expected


def test_layout_of_annotations_is_what_its_description_says(sound: FileContent) -> None:
    """The same by hand."""
    layout = b'bandcairn annotations 1\n[[0.5,30.0,"eyes closed"]]'
    assert sound.annotations_sha256 == hashlib.sha256(layout).hexdigest()


NOTES = "6e75583e38469024c3be42f58fe38d36cf421ea63ceea82ca6f10c3ac1e362a7"
GOLDEN = {
    "one.edf": ("e54bc26c3da15bd85d1065988f3f4aa18d0a27c29f614967380ca16a23a1da31", NOTES),
    "one.bdf": ("d8aa1bf42294802adcbcebfdf673af30d6cb1f791a730f91d1ef1865c0be5be9", NOTES),
    "one.csv": (
        "144314b8b146426b5622a0f1b4b48c3bb5a87ca0ccc1fdfabf9b24af68bbc445",
        "07904fb5bdb7007572d21f2823273e1c9ba2bc204c34d82d08c0f779a63544fc",
    ),
}


@pytest.mark.parametrize("name", sorted(GOLDEN))
def test_golden_digests_do_not_change(build: Build, channel: Make, delimited: Build, name: str) -> None:
    """Every store and seal rests on them: a change here needs a new CONTENT_FORMAT."""
    if name.endswith("csv"):
        path = delimited("time_s,Fz\n0.000000,1.5\n0.002000,-3e2\n", name)
    else:
        lists = (b"+0\x14\x14\0+0.5\x1530\x14eyes closed\x14", b"+1\x14\x14")
        path = build(
            [channel("Cz", np.arange(-7, 193))], name=name, reserved=f"{name[-3:].upper()}+C", lists=lists
        )
    content = content_digests(path)
    assert (content.channels[0].sha256, content.annotations_sha256) == GOLDEN[name]
