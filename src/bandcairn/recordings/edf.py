"""EDF and BDF files: what they say of themselves and the samples of a signal."""

from __future__ import annotations

import contextlib
from fractions import Fraction
from typing import TYPE_CHECKING

from bandcairn.errors import UnknownUnitError
from bandcairn.recordings.annotations import read_timeline
from bandcairn.recordings.header import read_header, scaling_of
from bandcairn.recordings.raw import RawSignal, counted_from_zero, cut
from bandcairn.recordings.records import each_block, numbered_header
from bandcairn.recordings.refusal import refusal
from bandcairn.signal import ChannelFacts, FileDetails, FileFacts
from bandcairn.units import KNOWN_UNITS, microvolts_per

if TYPE_CHECKING:
    from pathlib import Path

    import edfio
    import numpy as np
    from numpy.typing import NDArray

    from bandcairn.recordings.declared import Declared
    from bandcairn.recordings.header import Header, SignalHeader
    from bandcairn.signal import Repair


def inspect_edf(path: Path) -> FileFacts:
    """Read the header and the annotations, not the samples."""
    header = read_header(path)
    timeline = read_timeline(path, header)
    return FileFacts(
        channels=channel_facts(header),
        annotations=timeline.annotations,
        duration_s=timeline.duration_s(header.record_s) if header.channels else None,
        gaps=timeline.gaps(header.record_s),
        repair=header.repair,
        details=FileDetails(
            format=header.container,
            encoding=max(header.encoding, timeline.encoding, key=("ASCII", "UTF-8", "Latin-1").index),
            start=header.start,
            start_offset_s=timeline.start_offset_s,
            left_out=header.left_out,
        ),
    )


def channel_facts(header: Header) -> tuple[ChannelFacts, ...]:
    """Return what the header says of the channels."""
    return tuple(
        ChannelFacts(
            label=signal.label,
            rate_hz=header.rate_hz(signal),
            unit=signal.unit or None,
            n_samples=header.n_samples(signal),
            prefilter=signal.prefilter or None,
        )
        for signal in header.channels
    )


def read_edf(
    path: Path, labels: tuple[str, ...], declared: Declared, start_s: float | None, stop_s: float | None
) -> RawSignal:
    """Read channels that share one rate as integers with their scaling."""
    header = read_header(path)
    check_repair(path, header.repair, declared.max_missing_share)
    timeline = read_timeline(path, header)
    signals = tuple(_channel(path, header, label) for label in labels)
    rate_hz = _common_rate_hz(path, header, signals)
    scales = [_scale_uv(path, signal, declared) for signal in signals]
    runs = cut(path, timeline.runs(signals[0]), rate_hz, start_s, stop_s)
    return RawSignal(
        labels=labels,
        rate_hz=rate_hz,
        samples=_digital(path, header, signals, slice(runs[0].first, runs[-1].stop)),
        gain_uv=tuple(gain for gain, _ in scales),
        offset_uv=tuple(offset for _, offset in scales),
        runs=counted_from_zero(runs),
    )


def check_repair(path: Path, repair: Repair | None, max_missing_share: Fraction) -> None:
    """Refuse a file that differs by more than a share of its records from what its header says.

    Raises
    ------
    RecordingError
        With both numbers.
    """
    if repair is not None and repair.mismatch_share > max_missing_share:
        found = f"a size that does not fit ({repair})"
        allowed = f"a difference of at most {float(max_missing_share):g} of the records"
        remedy = "Copy the file again, or raise `load: {max_missing_share: ...}` in study.yaml."
        raise refusal(path, found, allowed, remedy)


def _digital(
    path: Path, header: Header, signals: tuple[SignalHeader, ...], stretch: slice
) -> tuple[NDArray[np.int16] | NDArray[np.int32], ...]:
    """Read the integers of channels that share one rate, block by block; the header has been checked before."""
    import numpy as np

    per_record = signals[0].samples_per_record
    first, stop = stretch.start // per_record, -(-stretch.stop // per_record)
    ordinary = [signal for signal in header.signals if signal not in header.annotation_signals]
    places = [ordinary.index(signal) for signal in signals]
    dtype = np.int16 if header.container == "EDF" else np.int32
    whole = [np.empty((stop - first) * per_record, dtype) for _ in signals]
    done = 0
    for block in each_block(path, header, first, stop):
        decoded = _decoded(path, header, block)
        n_samples = len(block) * per_record
        for target, place in zip(whole, places, strict=True):
            target[done : done + n_samples] = decoded.signals[place].digital
        done += n_samples
    inside = slice(stretch.start - first * per_record, stretch.stop - first * per_record)
    return tuple(target[inside] for target in whole)


def _decoded(path: Path, header: Header, block: NDArray[np.uint8]) -> edfio.Edf | edfio.Bdf:
    """Decode some data records, under a header that counts just these."""
    import edfio

    content = numbered_header(path, header, len(block)) + block.tobytes()
    try:
        if header.container == "EDF":
            return edfio.read_edf(content, lazy_load_data=True, header_encoding="latin-1")
        return edfio.read_bdf(content, header_encoding="latin-1")
    except ValueError as error:
        allowed = "an EDF or BDF file"
        raise refusal(path, str(error), allowed, "Export the file anew from the recorder.") from error


def _channel(path: Path, header: Header, label: str) -> SignalHeader:
    found = [signal for signal in header.channels if signal.label == label]
    if len(found) == 1:
        return found[0]
    if label in header.left_out:
        what = f"{label}, which holds annotations or triggers"
        raise refusal(path, what, "a channel of voltages", "Correct `channels` in study.yaml.")
    names = ", ".join(signal.label for signal in header.channels)
    if not found:
        raise refusal(path, f"no channel {label}", f"one of {names}", "Correct `channels` in study.yaml.")
    times = f"{len(found)} channels named {label}"
    raise refusal(path, times, "names that occur once", "Rename them in the recorder's export.")


def _common_rate_hz(path: Path, header: Header, signals: tuple[SignalHeader, ...]) -> Fraction:
    rates = {header.rate_hz(signal) for signal in signals}
    if len(rates) > 1:
        found = ", ".join(f"{signal.label} at {float(header.rate_hz(signal)):g} Hz" for signal in signals)
        remedy = "Declare a signal of its own in study.yaml for each rate."
        raise refusal(path, found, "one rate within a signal", remedy)
    return rates.pop()


def _scale_uv(path: Path, signal: SignalHeader, declared: Declared) -> tuple[float, float]:
    """Return gain and offset to microvolt, computed exactly and rounded once."""
    unit_uv = _unit_uv(path, signal, declared)
    scaling = scaling_of(path, signal)
    steps = scaling.digital_max - scaling.digital_min
    gain = (scaling.physical_max - scaling.physical_min) / steps * unit_uv
    return float(gain), float(scaling.physical_min * unit_uv - gain * scaling.digital_min)


def _unit_uv(path: Path, signal: SignalHeader, declared: Declared) -> Fraction:
    """Return the microvolts of one unit: the file's own word, else what the study declares with a reason."""
    with contextlib.suppress(UnknownUnitError):
        return Fraction(str(microvolts_per(signal.unit)))
    found = f"channel {signal.label} in {signal.unit or 'no unit'}"
    if declared.unit is not None and declared.unit_reason is not None:
        with contextlib.suppress(UnknownUnitError):
            return Fraction(str(microvolts_per(declared.unit)))
        found = f"the declared unit {declared.unit!r}"
    remedy = (
        "State the true unit when exporting, or declare `load: {unit: ..., unit_reason: ...}`: "
        "a wrong scale is worse than no data."
    )
    raise UnknownUnitError(str(refusal(path, found, ", ".join(KNOWN_UNITS), remedy)))
