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
from bandcairn.signal import Repair

if TYPE_CHECKING:
    from pathlib import Path

_BLOCK_BYTES = 256
_VERSIONS = {"EDF": b"0       ", "BDF": b"\xffBIOSEMI"}
_SAMPLE_BYTES = {"EDF": 2, "BDF": 3}
# Width of the fields of the signal headers, which are grouped by field: all labels, then all transducers ...
_SIGNAL_FIELDS = (16, 80, 8, 8, 8, 8, 8, 80, 8, 32)
_WIDTH = 8  # of every field that holds a number
# Names under which recorders and converters store trigger words (common practice): numbers, but no voltages.
_TRIGGER = re.compile(r"status|trig(gers?)?|markers?|events?|stim|sti ?[0-9]+", re.IGNORECASE)
_DATE_AND_TIME = re.compile(
    rb"(0[1-9]|[12][0-9]|3[01])\.(0[1-9]|1[0-2])\.[0-9]{2}([01][0-9]|2[0-3])\.[0-5][0-9]\.[0-5][0-9]"
)
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
    prefilter : str
        The recorder's filters as written.
    """

    label: str
    unit: str
    scaling_texts: tuple[str, str, str, str]
    samples_per_record: int
    first_byte: int
    stop_byte: int
    prefilter: str = ""


@dataclass(frozen=True, slots=True)
class Header:
    """What the header says of the file; checked against the file's size.

    Attributes
    ----------
    container : str
        ``"EDF"`` or ``"BDF"``.
    header_bytes, record_bytes, n_records : int
        Size of the header, size and number of the data records.
        `n_records` counts those that are used.
    record_s : Fraction
        Duration of a data record, exact.
    record_s_text : str
        The same as written.
    signals : tuple of SignalHeader
        All of them, annotations included, in the order of the file.
    discontinuous : bool
        Whether the file declares that its data records may have gaps between them (EDF+D, BDF+D).
    repair : Repair or None
        What was found where the size of the file does not fit the header.
    start : str
        Local date and time as written.
    encoding : str
        What reads its texts: ASCII, UTF-8 or Latin-1.
    """

    container: str
    header_bytes: int
    record_bytes: int
    n_records: int
    record_s: Fraction
    record_s_text: str
    signals: tuple[SignalHeader, ...]
    discontinuous: bool
    repair: Repair | None
    start: str
    encoding: str

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
        """Signals that hold samples of the body: neither annotations nor trigger words."""
        return tuple(signal for signal in self.signals if not is_marker(signal.label))

    @property
    def left_out(self) -> tuple[str, ...]:
        """Labels of the signals that are no channels."""
        return tuple(signal.label for signal in self.signals if is_marker(signal.label))

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
        Where the size does not fit the number of records, the whole records are used and `repair` says so.

    Raises
    ------
    RecordingError
        If the file is empty, is not what its suffix says, contradicts itself, or holds no whole record.
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
    claimed = _whole(path, main[236:244], "the number of data records", at_least=-1)
    record_bytes = parsed[-1].stop_byte
    repair = _repair(path, claimed, n_bytes - header_bytes, record_bytes)
    if repair is not None:
        _check_layout(path, parsed, repair, n_bytes - header_bytes, _SAMPLE_BYTES[container])
        _check_padding(path, signals[-_SIGNAL_FIELDS[-1] :])
    header = Header(
        container=container,
        header_bytes=header_bytes,
        record_bytes=record_bytes,
        n_records=_n_used(claimed, repair),
        record_s=decimal(path, as_text(main[244:252]), "the duration of a data record"),
        record_s_text=as_text(main[244:252]),
        signals=parsed,
        discontinuous=main[192:197] == f"{container}+D".encode(),
        repair=repair,
        start=_start(main),
        encoding=encoding_of(main[8:] + signals),
    )
    _check_duration(path, header)
    _check_time_stamps(path, header)
    return header


def is_marker(label: str) -> bool:
    """Return whether a label names annotations, a status word or triggers rather than a signal."""
    return label in {"EDF Annotations", "BDF Annotations"} or bool(_TRIGGER.fullmatch(label))


def encoding_of(texts: bytes) -> str:
    """Return what `as_text` reads the texts as."""
    if texts.isascii():
        return "ASCII"
    try:
        texts.decode()
    except UnicodeDecodeError:
        return "Latin-1"
    return "UTF-8"


def one_character_apart(first: str, second: str) -> bool:
    """Return whether two header fields differ in one character, as damage of one byte leaves them."""
    pairs = zip(first.ljust(_WIDTH), second.ljust(_WIDTH), strict=True)
    return sum(one != other for one, other in pairs) == 1


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


def _repair(path: Path, claimed: int, n_data_bytes: int, record_bytes: int) -> Repair | None:
    """Return what was found where the data do not fit the claimed number of records, None where they do."""
    found, rest = divmod(n_data_bytes, record_bytes)
    if claimed == 0 or not found:
        remedy = "The recording holds no samples: copy it again from the recorder."
        stated = f"{claimed} data records by the header, {found} whole ones in the file"
        raise refusal(path, stated, "one or more", remedy)
    if (claimed, 0) == (found, rest):
        return None
    used = found if claimed < 0 else min(claimed, found)
    return Repair(claimed, found, n_data_bytes - used * record_bytes)


def _n_used(claimed: int, repair: Repair | None) -> int:
    if repair is None:
        return claimed
    return repair.n_records_found if claimed < 0 else min(claimed, repair.n_records_found)


def _check_layout(
    path: Path, signals: tuple[SignalHeader, ...], repair: Repair, n_data_bytes: int, sample_bytes: int
) -> None:
    """Refuse a size that the claimed number of records fits if one character of one field were another.

    A damaged number of samples per record would shift every sample behind it; a file cut short looks alike.
    """
    claimed = repair.n_records_header
    if claimed <= 0 or n_data_bytes % (claimed * sample_bytes):
        return
    more = (n_data_bytes // claimed - signals[-1].stop_byte) // sample_bytes
    for signal in signals:
        stated, other = signal.samples_per_record, signal.samples_per_record + more
        if more and other > 0 and one_character_apart(str(stated), str(other)):
            found = f"{stated} samples per record of {signal.label}, and data that fit {other}"
            remedy = (
                "The header or the end of the file is damaged, which of them cannot be told: copy it again."
            )
            raise refusal(path, found, "numbers that fit the size of the file", remedy)


def _check_padding(path: Path, last_field: bytes) -> None:
    """Refuse a file cut short whose header does not end as headers do: then bytes of the header are missing."""
    if not last_field.strip(b"\0") or (last_field.endswith(b" ") and last_field.isascii()):
        return
    found = "a size that does not fit, and a header that does not end in blanks"
    raise refusal(path, found, "a whole header", "The header is damaged: restore the original.")


def _check_time_stamps(path: Path, header: Header) -> None:
    if header.discontinuous and not header.annotation_signals:
        found = f"a discontinuous file ({header.container}+D) without the time stamps of its data records"
        remedy = "Export the file anew from the recorder: where its gaps lie cannot be told."
        raise refusal(path, found, f"a signal {header.container} Annotations", remedy)


def _start(main: bytes) -> str:
    written = f"{as_text(main[168:176])} {as_text(main[176:184])}"
    return written if _DATE_AND_TIME.fullmatch(main[168:184]) else f"{written} (no valid date and time)"


def _signals(path: Path, fields: bytes, n_signals: int, sample_bytes: int) -> tuple[SignalHeader, ...]:
    columns: list[list[bytes]] = []
    place = 0
    for width in _SIGNAL_FIELDS:
        columns.append([fields[place + i * width : place + (i + 1) * width] for i in range(n_signals)])
        place += width * n_signals
    signals = []
    stop_byte = 0
    for label, _, unit, low, high, digital_low, digital_high, prefilter, n_samples, _ in zip(
        *columns, strict=True
    ):
        name = as_text(label)
        samples_per_record = _whole(path, n_samples, f"the samples per record of {name}", at_least=1)
        first_byte, stop_byte = stop_byte, stop_byte + samples_per_record * sample_bytes
        texts = (as_text(low), as_text(high), as_text(digital_low), as_text(digital_high))
        place_in_record = samples_per_record, first_byte, stop_byte
        signals.append(SignalHeader(name, as_text(unit), texts, *place_in_record, as_text(prefilter)))
    return tuple(signals)


def _check_duration(path: Path, header: Header) -> None:
    # Zero is right only for files that hold annotations and nothing else.
    if header.record_s < 0 or (header.record_s == 0 and header.channels):
        found = f"data records of {float(header.record_s):g} s"
        raise refusal(path, found, "a duration above 0 s", "The header is damaged: restore the original.")
