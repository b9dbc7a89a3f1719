"""The header of EDF, EDF+, BDF and BDF+ files: fixed-width text in 256-byte blocks.

References
----------
Kemp B., Värri A., Rosa A. C., Nielsen K. D., Gade J. (1992). A simple format for exchange of digitized
polygraphic recordings. Electroencephalography and Clinical Neurophysiology 82, 391-393.
Kemp B., Olivan J. (2003). European data format 'plus' (EDF+), an EDF alike standard format for the exchange
of physiological data. Clinical Neurophysiology 114, 1755-1761.
"""

from __future__ import annotations

import os
import re
from dataclasses import dataclass
from fractions import Fraction
from functools import lru_cache
from typing import TYPE_CHECKING

from bandcairn.recordings.refusal import refusal, unreadable

if TYPE_CHECKING:
    from pathlib import Path

_BLOCK_BYTES = 256
_VERSIONS = {"EDF": b"0       ", "BDF": b"\xffBIOSEMI"}
_SAMPLE_BYTES = {"EDF": 2, "BDF": 3}
# Width of the fields of the signal headers, which are grouped by field: all labels, then all transducers ...
_SIGNAL_FIELDS = (16, 80, 8, 8, 8, 8, 8, 80, 8, 32)
_WHOLE_NUMBER = re.compile(r"[+-]?[0-9]+")
# Two digits of exponent: more would not fit a double once scaled.
_DECIMAL_NUMBER = re.compile(r"[+-]?([0-9]+\.?[0-9]*|\.[0-9]+)([eE][+-]?[0-9]{1,2})?")


@dataclass(frozen=True, slots=True)
class Scaling:
    """How digital values map to physical ones, exactly as the header's decimals say."""

    physical_min: Fraction
    physical_max: Fraction
    digital_min: int
    digital_max: int


@dataclass(frozen=True, slots=True)
class SignalHeader:
    """What the header says of one signal.

    Attributes
    ----------
    label, unit : str
        Without blanks around them.
    scaling_texts : tuple of str
        Physical minimum and maximum, digital minimum and maximum as written; read by `scaling_of` only for
        the channels that are used, so that a marker channel without a range spoils nothing.
    samples_per_record : int
        Number of samples in each data record.
    first_byte, stop_byte : int
        Place of the samples inside a data record.
    """

    label: str
    unit: str
    scaling_texts: tuple[str, str, str, str]
    samples_per_record: int
    first_byte: int
    stop_byte: int


@dataclass(frozen=True, slots=True)
class Header:
    """What the header says of the file; checked against the file's size.

    Attributes
    ----------
    container : str
        ``"EDF"`` or ``"BDF"``.
    header_bytes, record_bytes, n_records : int
        Size of the header, size and number of the data records.
    record_s : Fraction
        Duration of a data record, exact.
    signals : tuple of SignalHeader
        All of them, annotations included, in the order of the file.
    """

    container: str
    header_bytes: int
    record_bytes: int
    n_records: int
    record_s: Fraction
    signals: tuple[SignalHeader, ...]

    @property
    def sample_bytes(self) -> int:
        """Bytes of one sample."""
        return _SAMPLE_BYTES[self.container]

    @property
    def annotation_signals(self) -> tuple[SignalHeader, ...]:
        """Signals that hold annotations."""
        return tuple(signal for signal in self.signals if signal.label == f"{self.container} Annotations")

    @property
    def channels(self) -> tuple[SignalHeader, ...]:
        """Signals that hold samples of the body: neither annotations nor the trigger words of BDF."""
        left_out = {"EDF Annotations"} if self.container == "EDF" else {"BDF Annotations", "Status"}
        return tuple(signal for signal in self.signals if signal.label not in left_out)

    def rate_hz(self, signal: SignalHeader) -> Fraction:
        """Return the sampling rate of `signal`, exact: a rate stands nowhere in the file."""
        return signal.samples_per_record / self.record_s

    def n_samples(self, signal: SignalHeader) -> int:
        """Return the number of samples of `signal` in the file."""
        return signal.samples_per_record * self.n_records


def read_header(path: Path) -> Header:
    """Read the header of an EDF or BDF file and check it against the size of the file.

    Parameters
    ----------
    path : Path
        Its suffix, ``.edf`` or ``.bdf`` in any case, says which of the two it must be.

    Returns
    -------
    Header
        Nothing is repaired.

    Raises
    ------
    RecordingError
        If the file is empty, is not what its suffix says, is discontinuous, or if its number of records
        is unknown or does not fit its size.
    """
    container = path.suffix[1:].upper()
    try:
        with path.open("rb") as file:
            main = file.read(_BLOCK_BYTES)
            _check_start(path, main, container)
            n_signals = _whole(path, main[252:256], "the number of signals", at_least=1)
            signals = file.read(_BLOCK_BYTES * n_signals)
            n_bytes = os.fstat(file.fileno()).st_size
    except OSError as error:
        raise unreadable(path, error) from error
    header_bytes = _header_bytes(path, main, n_signals, n_bytes)
    parsed = _signals(path, signals, n_signals, _SAMPLE_BYTES[container])
    header = Header(
        container=container,
        header_bytes=header_bytes,
        record_bytes=parsed[-1].stop_byte,
        n_records=_n_records(path, main),
        record_s=decimal(path, as_text(main[244:252]), "the duration of a data record"),
        signals=parsed,
    )
    _check_duration(path, header)
    _check_size(path, header, n_bytes)
    return header


def scaling_of(path: Path, signal: SignalHeader) -> Scaling:
    """Return the scaling of `signal`; refused if a number is unreadable or a range is empty."""
    channel = f"channel {signal.label}"
    low, high, digital_low, digital_high = signal.scaling_texts
    scaling = Scaling(
        physical_min=decimal(path, low, f"the physical minimum of {channel}"),
        physical_max=decimal(path, high, f"the physical maximum of {channel}"),
        digital_min=_whole(path, digital_low.encode(), f"the digital minimum of {channel}"),
        digital_max=_whole(path, digital_high.encode(), f"the digital maximum of {channel}"),
    )
    if scaling.digital_max <= scaling.digital_min:
        found = f"{channel} with digital range {digital_low} to {digital_high}"
        raise refusal(path, found, "a maximum above the minimum", "Export the file anew from the recorder.")
    if scaling.physical_max == scaling.physical_min:
        found = f"{channel} with physical range {low} to {high}"
        raise refusal(path, found, "a range that is not empty", "Export the file anew from the recorder.")
    return scaling


def as_text(field: bytes) -> str:
    """Decode a text: UTF-8, else Latin-1, in which older recorders write the micro sign."""
    try:
        return field.decode().strip(" \0")
    except UnicodeDecodeError:
        return field.decode("latin-1").strip(" \0")


def decimal(path: Path, text: str, what: str) -> Fraction:
    """Return the exact value of a decimal number; `what` names it in the refusal."""
    if not _DECIMAL_NUMBER.fullmatch(text):
        hint = "Write a decimal point." if "," in text else "Export the file anew from the recorder."
        raise refusal(path, f"{text!r} as {what}", "a decimal number", hint)
    return Fraction(text)


# Channels of one recorder share their ranges.
@lru_cache(maxsize=1024)
def plain_number(text: str) -> str:
    """Return a decimal number as a fraction, so that 1.50 and 1.5 are alike; any other text unchanged."""
    return str(Fraction(text)) if _DECIMAL_NUMBER.fullmatch(text) else text


def _whole(path: Path, field: bytes, what: str, at_least: int | None = None) -> int:
    text = as_text(field)
    if not _WHOLE_NUMBER.fullmatch(text) or (at_least is not None and int(text) < at_least):
        allowed = "a whole number" if at_least is None else f"a whole number from {at_least}"
        raise refusal(path, f"{text!r} as {what}", allowed, "The header is damaged: restore the original.")
    return int(text)


def _check_start(path: Path, main: bytes, container: str) -> None:
    if not main:
        raise refusal(path, "an empty file", "a recording", "Copy it again from the recorder.")
    actual = next((name for name, version in _VERSIONS.items() if main[:8] == version), None)
    if actual != container:
        found = f"{actual} inside" if actual else f"the first bytes {main[:8]!r}"
        remedy = f"Rename it to .{actual.lower()}." if actual else "Restore the original file."
        raise refusal(path, found, f"{container}, as its suffix says", remedy)
    if len(main) < _BLOCK_BYTES:
        raise refusal(path, f"{len(main)} bytes", "a header of at least 512 bytes", "Copy it again.")
    if main[192:197] in {b"EDF+D", b"BDF+D"}:
        found = f"a discontinuous file ({as_text(main[192:197])})"
        remedy = "Export each stretch as a file of its own: stretches are never glued together."
        raise refusal(path, found, "a continuous one (gaps are not supported yet)", remedy)


def _header_bytes(path: Path, main: bytes, n_signals: int, n_bytes: int) -> int:
    header_bytes = _whole(path, main[184:192], "the size of the header")
    expected = _BLOCK_BYTES * (n_signals + 1)
    if header_bytes != expected:
        found = f"a header of {header_bytes} bytes for {n_signals} signals"
        raise refusal(path, found, f"{expected} bytes", "The header is damaged: restore the original.")
    if n_bytes < header_bytes:
        found = f"{n_bytes} bytes in the file"
        raise refusal(path, found, f"{header_bytes} or more", "The file is truncated: copy it again.")
    return header_bytes


def _n_records(path: Path, main: bytes) -> int:
    if as_text(main[236:244]) == "-1":
        remedy = "The recording was not closed: finish or export it in the recorder."
        raise refusal(path, "-1 as the number of data records (unknown)", "a whole number from 1", remedy)
    return _whole(path, main[236:244], "the number of data records", at_least=1)


def _signals(path: Path, fields: bytes, n_signals: int, sample_bytes: int) -> tuple[SignalHeader, ...]:
    columns: list[list[bytes]] = []
    place = 0
    for width in _SIGNAL_FIELDS:
        columns.append([fields[place + i * width : place + (i + 1) * width] for i in range(n_signals)])
        place += width * n_signals
    signals = []
    stop_byte = 0
    for label, _, unit, low, high, digital_low, digital_high, _, n_samples, _ in zip(*columns, strict=True):
        name = as_text(label)
        samples_per_record = _whole(path, n_samples, f"the samples per record of {name}", at_least=1)
        first_byte, stop_byte = stop_byte, stop_byte + samples_per_record * sample_bytes
        texts = (as_text(low), as_text(high), as_text(digital_low), as_text(digital_high))
        signals.append(SignalHeader(name, as_text(unit), texts, samples_per_record, first_byte, stop_byte))
    return tuple(signals)


def _check_duration(path: Path, header: Header) -> None:
    # Zero is right only for files that hold annotations and nothing else.
    if header.record_s < 0 or (header.record_s == 0 and header.channels):
        found = f"data records of {float(header.record_s):g} s"
        raise refusal(path, found, "a duration above 0 s", "The header is damaged: restore the original.")


def _check_size(path: Path, header: Header, n_bytes: int) -> None:
    expected = header.header_bytes + header.n_records * header.record_bytes
    if n_bytes != expected:
        fault = f"{expected - n_bytes} bytes are missing" if n_bytes < expected else "bytes trail behind"
        n_records = (n_bytes - header.header_bytes) / header.record_bytes
        found = f"{n_bytes} bytes, that is {n_records:.6g} data records ({fault})"
        allowed = f"{expected} bytes, for the header says {header.n_records} data records"
        raise refusal(path, found, allowed, "Copy the file again or export it anew: nothing is repaired.")
