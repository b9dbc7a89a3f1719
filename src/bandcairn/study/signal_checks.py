"""Checks of one signal that need no file: filters, bands, spectrum and epochs must fit one another."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

from bandcairn.study.faults import Fault, listed, suggestion
from bandcairn.study.filter_checks import (
    check_notch_rate,
    check_reference,
    check_stage_rates,
    check_stopped_bands,
    passband,
)
from bandcairn.study.models import EcgSignal, EegSignal, EmgSignal

if TYPE_CHECKING:
    from collections.abc import Iterator

    from bandcairn.study.faults import Path
    from bandcairn.study.filter_checks import Passband
    from bandcairn.study.models import AnySignal


@dataclass(frozen=True, slots=True)
class DeclaredRange:
    """A frequency range that a signal declares, and the key where it stands."""

    path: Path
    low_hz: float
    high_hz: float

    def __str__(self) -> str:
        return f"{self.low_hz:g} to {self.high_hz:g} Hz"


def check_signal(name: str, signal: AnySignal, mains_hz: float | None) -> Iterator[Fault]:
    """Yield what does not fit within one signal.

    Parameters
    ----------
    name : str
        Name of the signal.
    signal : AnySignal
        Its description.
    mains_hz : float or None
        Frequency of the mains; None where it could not be understood.

    Yields
    ------
    Fault
    """
    path: Path = ("signals", name)
    yield from _check_name(path, name)
    yield from check_reference(name, signal)
    passed = passband(signal)
    if passed.low_hz >= passed.high_hz:
        found = f"nothing passes: high-pass at {passed.low_hz:g} Hz, low-pass at {passed.high_hz:g} Hz"
        yield Fault((*path, "filter"), found, "a range that passes", "Exchange or correct the cut-offs.")
    elif isinstance(signal, EegSignal):
        yield from _check_bands_pass(path, signal, passed)
        yield from _check_bands_stopped(name, signal, mains_hz)
    if signal.resample is not None:
        origin = f"after resampling to {signal.resample.rate_hz:g} Hz"
        yield from check_nyquist(name, signal, signal.resample.rate_hz, origin, mains_hz)
    if isinstance(signal, EcgSignal):
        yield from _check_interpolation(path, signal)
    yield from _check_resolution(path, signal)


def check_segment_names(name: str, signal: AnySignal, declared: tuple[str, ...]) -> Iterator[Fault]:
    """Yield the segments that a signal uses and nothing declares.

    Parameters
    ----------
    name : str
        Name of the signal.
    signal : AnySignal
        Its description.
    declared : tuple of str
        Segment names of all recordings together.

    Yields
    ------
    Fault
    """
    for index, segment in enumerate(signal.segments or ()):
        if segment not in declared:
            remedy = suggestion(segment, declared, "Declare it in the segments table, or delete it here.")
            allowed = f"a declared segment: {listed(declared)}"
            yield Fault(("signals", name, "segments", index), segment, allowed, remedy)


def check_nyquist(
    name: str, signal: AnySignal, rate_hz: float, origin: str, mains_hz: float | None
) -> Iterator[Fault]:
    """Yield the cut-offs and bands that half a sampling rate cannot hold.

    Parameters
    ----------
    name : str
        Name of the signal.
    signal : AnySignal
        Its description.
    rate_hz : float
        Rate at which the filters work.
    origin : str
        Where that rate comes from, for the message.
    mains_hz : float or None
        Frequency of the mains; None where it could not be understood.

    Yields
    ------
    Fault
    """
    yield from check_stage_rates(name, signal, rate_hz, origin)
    if mains_hz is not None:
        yield from check_notch_rate(name, signal, rate_hz, origin, mains_hz)
    nyquist_hz = rate_hz / 2
    if isinstance(signal, EegSignal):
        for band in declared_ranges(name, signal):
            if band.high_hz > nyquist_hz:
                allowed = f"at most {nyquist_hz:g} Hz, half the rate {origin}"
                yield Fault(band.path, str(band), allowed, "Lower the band, or keep a higher rate.")


def declared_ranges(name: str, signal: EegSignal | EcgSignal) -> Iterator[DeclaredRange]:
    """Yield every band of a signal, and the range of its total power where one is declared."""
    features: Path = ("signals", name, "features")
    for band, (low_hz, high_hz) in signal.features.bands_hz.items():
        yield DeclaredRange((*features, "bands_hz", band), low_hz, high_hz)
    if isinstance(signal, EegSignal) and signal.features.total_hz is not None:
        yield DeclaredRange((*features, "total_hz"), *signal.features.total_hz)


def _check_name(path: Path, name: str) -> Iterator[Fault]:
    if any(letter in "/\\" or not letter.isprintable() for letter in name):
        yield Fault(
            path, repr(name), "printable text without / and \\", "Use letters, digits, blanks, _ or -."
        )


def _check_bands_pass(path: Path, signal: EegSignal, passed: Passband) -> Iterator[Fault]:
    for band in declared_ranges(str(path[1]), signal):
        if band.low_hz < passed.low_hz or band.high_hz > passed.high_hz:
            upper = "no limit" if math.isinf(passed.high_hz) else f"{passed.high_hz:g} Hz"
            allowed = f"within what the filters pass, {passed.low_hz:g} Hz to {upper}"
            remedy = (
                "Narrow the band, or widen the filter: outside it the power is the filter's, not the brain's."
            )
            yield Fault(band.path, str(band), allowed, remedy)
    total = signal.features.total_hz
    for name, (low_hz, high_hz) in signal.features.bands_hz.items():
        if total is not None and (low_hz < total[0] or high_hz > total[1]):
            allowed = f"within total_hz, {total[0]:g} to {total[1]:g} Hz"
            remedy = "Widen total_hz: a relative power is a share of the total."
            band_path = (*path, "features", "bands_hz", name)
            yield Fault(band_path, f"{low_hz:g} to {high_hz:g} Hz", allowed, remedy)


def _check_bands_stopped(name: str, signal: EegSignal, mains_hz: float | None) -> Iterator[Fault]:
    if mains_hz is None:
        return
    for band in declared_ranges(name, signal):
        yield from check_stopped_bands(band.path, (band.low_hz, band.high_hz), signal, mains_hz)


def _check_interpolation(path: Path, signal: EcgSignal) -> Iterator[Fault]:
    limit_hz = signal.spectrum.interpolation_hz / 2
    for band in declared_ranges(str(path[1]), signal):
        if band.high_hz > limit_hz:
            allowed = f"at most {limit_hz:g} Hz, half of interpolation_hz"
            yield Fault(band.path, str(band), allowed, "Lower the band, or raise interpolation_hz.")


# The intervals of an epoch begin with its first beat and end with its last: a second or two is lost at either end.
_ENDS_OF_INTERVALS_S = 4.0


def _check_resolution(path: Path, signal: AnySignal) -> Iterator[Fault]:
    epoch_s, segment_s = signal.epoch.window_s, signal.spectrum.segment_s
    epoch_key = "epoch.length_s" if signal.epoch.length_s is not None else "the epoch from start_s to stop_s"
    longest_s = epoch_s - _ENDS_OF_INTERVALS_S if isinstance(signal, EcgSignal) else epoch_s
    if segment_s is not None and segment_s > longest_s:
        allowed = f"at most {epoch_key}, {epoch_s:g} s"
        if longest_s < epoch_s:
            most = f"at most {longest_s:g} s" if longest_s > 0 else "nothing"
            allowed = f"{most}: {epoch_key}, {epoch_s:g} s, less an interval between beats at either end"
        remedy = "Shorten the segment, or lengthen the epoch."
        yield Fault((*path, "spectrum", "segment_s"), f"{segment_s:g} s", allowed, remedy)
    if isinstance(signal, EmgSignal):
        return
    bin_hz = 1 / (segment_s or epoch_s)
    source = "spectrum.segment_s" if segment_s else epoch_key
    for band in declared_ranges(str(path[1]), signal):
        width_hz = band.high_hz - band.low_hz
        # A hair of slack: 0.15 - 0.04 is not exactly 0.11 in binary.
        if width_hz < bin_hz * (1 - 1e-9):
            allowed = f"at least {bin_hz:g} Hz wide, one frequency bin (1/{source})"
            yield Fault(band.path, str(band), allowed, f"Widen the band, or lengthen {source}.")
