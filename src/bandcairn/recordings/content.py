"""Digests of what a recording says, whoever it belongs to and however its bytes are laid out.

The digest of a channel covers its label, samples as stored, scaling, unit, rate and gaps; not the identity
fields, dates, texts on sensors, reserved bytes, other channels or the name of the file. So a de-identified
copy keeps its digests, and one sample more by one step changes one of them.

Layout, format 1: the ASCII line ``bandcairn channel 1``, a line feed, a JSON object with sorted keys and
without blanks, a line feed, and the samples: little-endian two's complement of two bytes (EDF) or three
(BDF), or little-endian IEEE 754 doubles (tables, FIF and BrainVision). Exact numbers are fractions written as text.
Runs are gap-free stretches: first sample, the sample behind the last, and the time of the first in seconds.
Annotations: the line ``bandcairn annotations 1``, a line feed, and a JSON list of [onset in s, duration in s,
text], sorted.
"""

from __future__ import annotations

import hashlib
import json
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING

from bandcairn.recordings.annotations import read_timeline
from bandcairn.recordings.brainvision import companions_of
from bandcairn.recordings.converted import open_converted
from bandcairn.recordings.header import plain_number, read_header
from bandcairn.recordings.reading import family_of, open_table
from bandcairn.recordings.records import bytes_of, each_block, each_byte_block
from bandcairn.recordings.refusal import unreadable

if TYPE_CHECKING:
    from collections.abc import Mapping
    from pathlib import Path

    import numpy as np
    from numpy.typing import NDArray

    from bandcairn.recordings.header import Header, SignalHeader
    from bandcairn.signal import Annotation, Run

CONTENT_FORMAT = 1


@dataclass(frozen=True, slots=True)
class ChannelContent:
    """Digest of one channel.

    Attributes
    ----------
    label : str
        Name as written in the file.
    sha256 : str
        64 hexadecimal digits.
    """

    label: str
    sha256: str


@dataclass(frozen=True, slots=True)
class FileContent:
    """Digests of one file.

    Attributes
    ----------
    file_sha256 : str
        Of the bytes of the file (BrainVision: header, samples, markers): tells a copy from the original; never
        part of a key.
    annotations_sha256 : str
        Of onsets, durations and texts of all annotations.
    channels : tuple of ChannelContent
        In the order of the file; annotation and status channels are left out.
    """

    file_sha256: str
    annotations_sha256: str
    channels: tuple[ChannelContent, ...]

    def of(self, labels: tuple[str, ...]) -> tuple[str, ...]:
        """Return the digests of the named channels; KeyError for a name that does not occur once."""
        names = [channel.label for channel in self.channels]
        for label in labels:
            if names.count(label) != 1:
                raise KeyError(label)
        return tuple(self.channels[names.index(label)].sha256 for label in labels)


def content_digests(path: Path) -> FileContent:
    """Read a file once and digest the content of every channel.

    Values are not judged here: a cell that is no number, or a range that is empty, is digested as it stands
    and refused by `read` if the channel is used.

    Parameters
    ----------
    path : Path
        With one of the suffixes that `read` takes, in any case.

    Returns
    -------
    FileContent
        The same for every copy of the signals.

    Raises
    ------
    RecordingError
        If the file cannot be read or its layout is at fault.
    """
    family = family_of(path)
    if family == "table":
        return _of_table(path)
    return _of_converted(path) if family == "converted" else _of_edf(path)


def _of_edf(path: Path) -> FileContent:
    header = read_header(path)
    timeline = read_timeline(path, header)
    annotations = _of_annotations(timeline.annotations)
    channels = [
        (signal, _opened(_description(header, signal, timeline.runs(signal)))) for signal in header.channels
    ]
    whole_file = hashlib.sha256(_head(path, header.header_bytes), usedforsecurity=False)
    for block in each_block(path, header):
        whole_file.update(block.data)
        for signal, digest in channels:
            digest.update(bytes_of(block, signal).data)
    for rest in each_byte_block(path, header.header_bytes + header.n_records * header.record_bytes):
        whole_file.update(rest)
    return FileContent(
        file_sha256=whole_file.hexdigest(),
        annotations_sha256=annotations,
        channels=tuple(ChannelContent(signal.label, digest.hexdigest()) for signal, digest in channels),
    )


def _of_table(path: Path) -> FileContent:
    table = open_table(path)
    # A clock that leaves the rate open but has gaps: their samples count, for seconds need the rate.
    runs = table.runs(table.rate_hz or Fraction(1))
    channels = [
        ChannelContent(table.names[place], _of_column(table.names[place], table.rate_hz, runs, column))
        for place, column in zip(table.channels, table.parse(table.channels), strict=True)
    ]
    return FileContent(
        file_sha256=_of_bytes(path),
        annotations_sha256=_of_annotations(()),
        channels=tuple(channels),
    )


def _of_converted(path: Path) -> FileContent:
    import numpy as np

    file = open_converted(path)
    digests = [
        _opened(
            {
                "label": label,
                "unit": file.unit(label),
                "rate_hz": str(file.rate_hz),
                "samples": "float64",
                "runs": _run_rows(file.runs),
            }
        )
        for label in file.labels
    ]
    for block in file.each_block(file.labels):
        for digest, samples in zip(digests, block, strict=True):
            digest.update(np.ascontiguousarray(samples, dtype="<f8").data)
    companions = companions_of(path) if file.details.format == "BrainVision" else ()
    return FileContent(
        file_sha256=_of_bytes(path, *companions),
        annotations_sha256=_of_annotations(file.annotations),
        channels=tuple(
            ChannelContent(label, digest.hexdigest())
            for label, digest in zip(file.labels, digests, strict=True)
        ),
    )


def _description(header: Header, signal: SignalHeader, runs: tuple[Run, ...]) -> dict[str, object]:
    return {
        "label": signal.label,
        "unit": signal.unit,
        "rate_hz": str(header.rate_hz(signal)),
        "scaling": [plain_number(text) for text in signal.scaling_texts],
        "samples": f"int{8 * header.sample_bytes}",
        "runs": _run_rows(runs),
    }


def _run_rows(runs: tuple[Run, ...]) -> list[list[int | str]]:
    return [[run.first, run.stop, str(run.start_s)] for run in runs]


def _of_bytes(*paths: Path) -> str:
    digest = hashlib.sha256(usedforsecurity=False)
    for path in paths:
        for block in each_byte_block(path):
            digest.update(block)
    return digest.hexdigest()


def _of_column(
    label: str,
    rate_hz: Fraction | None,
    runs: tuple[Run, ...],
    column: NDArray[np.float64] | tuple[str, ...],
) -> str:
    import numpy as np

    numeric = isinstance(column, np.ndarray)
    digest = _opened(
        {
            "label": label,
            "rate_hz": None if rate_hz is None else str(rate_hz),
            "samples": "float64" if numeric else "text",
            "runs": _run_rows(runs),
        }
    )
    if isinstance(column, np.ndarray):
        digest.update(np.ascontiguousarray(column, dtype="<f8").data)
    else:
        digest.update("\n".join(column).encode())
    return digest.hexdigest()


def _of_annotations(annotations: tuple[Annotation, ...]) -> str:
    rows = [[one.onset_s, one.duration_s, one.text] for one in annotations]
    return hashlib.sha256(
        f"bandcairn annotations {CONTENT_FORMAT}\n".encode() + _canonical(rows), usedforsecurity=False
    ).hexdigest()


def _opened(description: Mapping[str, object]) -> hashlib._Hash:
    opening = f"bandcairn channel {CONTENT_FORMAT}\n".encode() + _canonical(description) + b"\n"
    return hashlib.sha256(opening, usedforsecurity=False)


def _canonical(value: object) -> bytes:
    return json.dumps(value, sort_keys=True, separators=(",", ":"), ensure_ascii=True).encode()


def _head(path: Path, n_bytes: int = -1) -> bytes:
    try:
        with path.open("rb") as file:
            return file.read(n_bytes)
    except OSError as error:
        raise unreadable(path, error) from error
