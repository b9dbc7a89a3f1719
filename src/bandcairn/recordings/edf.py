"""EDF and BDF files: what they say of themselves and the samples of a signal."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING

from bandcairn.errors import UnknownUnitError
from bandcairn.recordings.annotations import read_annotations
from bandcairn.recordings.header import read_header, scaling_of
from bandcairn.recordings.raw import RawSignal, cut
from bandcairn.recordings.refusal import refusal, unreadable
from bandcairn.signal import ChannelFacts, FileFacts, Run
from bandcairn.units import KNOWN_UNITS, microvolts_per

if TYPE_CHECKING:
    from pathlib import Path

    import numpy as np
    from numpy.typing import NDArray

    from bandcairn.recordings.header import Header, SignalHeader


def inspect_edf(path: Path) -> FileFacts:
    """Read the header and the annotations, not the samples."""
    header = read_header(path)
    return FileFacts(channels=channel_facts(header), annotations=read_annotations(path, header))


def channel_facts(header: Header) -> tuple[ChannelFacts, ...]:
    """Return what the header says of the channels."""
    return tuple(
        ChannelFacts(signal.label, header.rate_hz(signal), signal.unit or None, header.n_samples(signal))
        for signal in header.channels
    )


def read_edf(path: Path, labels: tuple[str, ...], start_s: float | None, stop_s: float | None) -> RawSignal:
    """Read channels that share one rate as integers with their scaling."""
    header = read_header(path)
    if header.annotation_signals:
        read_annotations(path, header)  # refuses a file whose clock jumps
    signals = tuple(_channel(path, header, label) for label in labels)
    rate_hz = _common_rate_hz(path, header, signals)
    scales = [_scale_uv(path, signal) for signal in signals]
    stretch = cut(path, header.n_samples(signals[0]), rate_hz, start_s, stop_s)
    return RawSignal(
        labels=labels,
        rate_hz=rate_hz,
        samples=_digital(path, header, signals, slice(stretch.first, stretch.stop)),
        gain_uv=tuple(gain for gain, _ in scales),
        offset_uv=tuple(offset for _, offset in scales),
        runs=(Run(0, stretch.n_samples, stretch.start_s),),
    )


def _digital(
    path: Path, header: Header, signals: tuple[SignalHeader, ...], stretch: slice
) -> tuple[NDArray[np.int16] | NDArray[np.int32], ...]:
    """Read the integers of channels at their own rate; the header has been checked before."""
    import edfio

    try:
        file: edfio.Edf | edfio.Bdf
        if header.container == "EDF":
            file = edfio.read_edf(path, lazy_load_data=True, header_encoding="latin-1")
        else:
            file = edfio.read_bdf(path, header_encoding="latin-1")
        ordinary = [signal for signal in header.signals if signal not in header.annotation_signals]
        return tuple(file.signals[ordinary.index(signal)].digital[stretch] for signal in signals)
    except OSError as error:
        raise unreadable(path, error) from error
    except ValueError as error:
        raise refusal(
            path, str(error), "an EDF or BDF file", "Export the file anew from the recorder."
        ) from error


def _channel(path: Path, header: Header, label: str) -> SignalHeader:
    found = [signal for signal in header.channels if signal.label == label]
    if len(found) == 1:
        return found[0]
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


def _scale_uv(path: Path, signal: SignalHeader) -> tuple[float, float]:
    """Return gain and offset to microvolt, computed exactly and rounded once."""
    try:
        unit_uv = Fraction(str(microvolts_per(signal.unit)))
    except UnknownUnitError as error:
        remedy = "State the true unit when exporting: a wrong scale is worse than no data."
        found = f"channel {signal.label} in {signal.unit or 'no unit'}"
        raise UnknownUnitError(str(refusal(path, found, ", ".join(KNOWN_UNITS), remedy))) from error
    scaling = scaling_of(path, signal)
    steps = scaling.digital_max - scaling.digital_min
    gain = (scaling.physical_max - scaling.physical_min) / steps * unit_uv
    return float(gain), float(scaling.physical_min * unit_uv - gain * scaling.digital_min)
