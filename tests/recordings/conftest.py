"""Files built byte by byte, so that no library stands between a test and the format."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
import pytest

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    from numpy.typing import NDArray


@dataclass
class Channel:
    """One signal of a file: header texts and digital samples, all as they will stand in the file."""

    label: str = "Cz"
    digital: NDArray[np.int64] = field(default_factory=lambda: np.arange(-100, 100))
    per_record: int = 100
    unit: bytes = b"uV"
    physical: tuple[str, str] = ("-3276.8", "3276.7")
    limits: tuple[str, str] = ("-32768", "32767")


@dataclass
class FileText:
    """Main header of a file."""

    container: str = "EDF"
    patient: str = "X X X X"
    start: str = "01.01.0100.00.00"
    reserved: str = ""
    n_records: str | None = None
    record_s: str = "1"
    lists: tuple[bytes, ...] = ()  # annotation bytes of each record
    second_lists: tuple[bytes, ...] = ()


def _records(text: FileText, channels: list[Channel]) -> list[bytes]:
    width = 2 if text.container == "EDF" else 3
    n_records = len(channels[0].digital) // channels[0].per_record
    records = []
    for record in range(n_records):
        parts = [
            b"".join(
                int(value).to_bytes(width, "little", signed=True)
                for value in one.digital[record * one.per_record : (record + 1) * one.per_record]
            )
            for one in channels
        ]
        parts += [
            lists[record].ljust(_list_bytes(text, lists), b"\0")
            for lists in (text.lists, text.second_lists)
            if lists
        ]
        records.append(b"".join(parts))
    return records


def _list_bytes(text: FileText, lists: tuple[bytes, ...]) -> int:
    longest = max(len(one) for one in lists) + 1
    width = 2 if text.container == "EDF" else 3
    return -(-longest // width) * width


def build_bytes(text: FileText, channels: list[Channel]) -> bytes:
    """Return the bytes of an EDF or BDF file."""
    width = 2 if text.container == "EDF" else 3
    rows = [(one.label.encode(), one.unit, *one.physical, *one.limits, one.per_record) for one in channels]
    for lists in (text.lists, text.second_lists):
        if lists:
            per_record = _list_bytes(text, lists) // width
            rows.append(
                (f"{text.container} Annotations".encode(), b"", "-1", "1", "-32768", "32767", per_record)
            )
    columns = list(zip(*rows, strict=True))
    fields: list[tuple[list[object], int]] = [
        (list(columns[0]), 16),
        ([""] * len(rows), 80),
        (list(columns[1]), 8),
        (list(columns[2]), 8),
        (list(columns[3]), 8),
        (list(columns[4]), 8),
        (list(columns[5]), 8),
        ([""] * len(rows), 80),
        (list(columns[6]), 8),
        ([""] * len(rows), 32),
    ]
    records = _records(text, channels)
    version = b"0".ljust(8) if text.container == "EDF" else b"\xffBIOSEMI"
    n_records = str(len(records)) if text.n_records is None else text.n_records
    main = (
        text.patient.ljust(80)
        + "X".ljust(80)
        + text.start
        + str(256 * (len(rows) + 1)).ljust(8)
        + text.reserved.ljust(44)
        + n_records.ljust(8)
        + text.record_s.ljust(8)
        + str(len(rows)).ljust(4)
    )
    signals = b"".join(
        (value if isinstance(value, bytes) else str(value).encode()).ljust(size)
        for values, size in fields
        for value in values
    )
    return version + main.encode() + signals + b"".join(records)


@pytest.fixture
def channel() -> type[Channel]:
    """Hand out the description of one channel."""
    return Channel


@pytest.fixture
def build(tmp_path: Path) -> Callable[..., Path]:
    """Write a file: `build(channels, name=..., **main header)` returns its path."""

    def write(channels: list[Channel], name: str = "one.edf", **text: object) -> Path:
        container = name.rpartition(".")[2].upper()
        path = tmp_path / name
        path.write_bytes(build_bytes(FileText(container=container, **text), channels))  # type: ignore[arg-type]
        return path

    return write


@pytest.fixture
def delimited(tmp_path: Path) -> Callable[..., Path]:
    """Write delimited text as it stands and return its path."""

    def write(content: str | bytes, name: str = "one.csv") -> Path:
        path = tmp_path / name
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
        return path

    return write
