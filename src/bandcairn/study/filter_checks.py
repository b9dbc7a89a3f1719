"""Checks of a signal's filter and reference that need no file: rates, bands and channels must suit them."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

from bandcairn.study.faults import Fault, listed, suggestion
from bandcairn.study.reference_blocks import BipolarPairs

if TYPE_CHECKING:
    from collections.abc import Iterator

    from bandcairn.study.faults import Path
    from bandcairn.study.filter_blocks import FilterStage
    from bandcairn.study.models import AnySignal

# As the filter step has them: nearer to half the rate than this no cut-off, and no harmonic of the mains, can be.
LARGEST_SHARE_OF_NYQUIST = 0.98
HARMONICS_SHARE_OF_NYQUIST = 0.95
# Length of a fir times its transition: Ifeachor and Jervis (2002), table 7.3, as the filter step has it.
TRANSITION_TIMES_LENGTH = {"hann": 3.1, "hamming": 3.3, "blackman": 5.5}


@dataclass(frozen=True, slots=True)
class Passband:
    """What the filters of a signal let pass, by their nominal cut-offs, in Hz."""

    low_hz: float
    high_hz: float


@dataclass(frozen=True, slots=True)
class StopBand:
    """What one stage takes away between two nominal edges, in Hz."""

    stage: int
    low_hz: float
    high_hz: float


def passband(signal: AnySignal) -> Passband:
    """Return the range that all lowpass, highpass and bandpass stages let pass."""
    low_hz, high_hz = 0.0, math.inf
    for stage in signal.filter:
        if stage.type in ("highpass", "bandpass"):
            low_hz = max(low_hz, stage.edges_hz[0])
        if stage.type in ("lowpass", "bandpass"):
            high_hz = min(high_hz, stage.edges_hz[-1])
    return Passband(low_hz, high_hz)


def stop_bands(signal: AnySignal, mains_hz: float, up_to_hz: float) -> Iterator[StopBand]:
    """Yield what bandstop and notch stages take away below a frequency."""
    for index, stage in enumerate(signal.filter):
        if stage.type == "bandstop":
            yield StopBand(index, *stage.edges_hz)
        elif stage.type == "notch":
            half_hz = (stage.width_hz or 0.0) / 2
            count = math.floor(up_to_hz / mains_hz) if stage.harmonics else 1
            for centre_hz in (mains_hz * multiple for multiple in range(1, count + 1)):
                yield StopBand(index, centre_hz - half_hz, centre_hz + half_hz)


def check_stage_rates(name: str, signal: AnySignal, rate_hz: float, origin: str) -> Iterator[Fault]:
    """Yield the cut-offs and transitions that half a sampling rate cannot hold.

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

    Yields
    ------
    Fault
    """
    limit_hz = LARGEST_SHARE_OF_NYQUIST * rate_hz / 2
    for index, stage in enumerate(signal.filter):
        path: Path = ("signals", name, "filter", index)
        highest_hz = max(stage.edges_hz, default=0.0)
        if highest_hz >= limit_hz:
            allowed = f"below {limit_hz:g} Hz, 0.98 of half the rate {origin}"
            remedy = "Lower the cut-off, or keep a higher rate."
            yield Fault((*path, "cutoff_hz"), f"{highest_hz:g} Hz", allowed, remedy)
        elif stage.transition_hz is not None and highest_hz + stage.transition_hz / 2 > rate_hz / 2:
            room_hz = 2 * (rate_hz / 2 - highest_hz)
            allowed = f"at most {room_hz:g} Hz, so that it ends below half the rate {origin}"
            yield Fault((*path, "transition_hz"), f"{stage.transition_hz:g} Hz", allowed, "Lower it.")


def check_notch_rate(
    name: str, signal: AnySignal, rate_hz: float, origin: str, mains_hz: float
) -> Iterator[Fault]:
    """Yield each notch whose mains a sampling rate cannot hold; the parameters are those above, and the mains."""
    limit_hz = HARMONICS_SHARE_OF_NYQUIST * rate_hz / 2
    for index, stage in enumerate(signal.filter):
        if stage.type == "notch" and mains_hz >= limit_hz:
            allowed = f"mains below {limit_hz:g} Hz, 0.95 of half the rate {origin}"
            remedy = "Delete the notch: what remains of the signal holds no mains."
            yield Fault(("signals", name, "filter", index), f"a notch at {mains_hz:g} Hz", allowed, remedy)


def check_stopped_bands(
    path: Path, band: tuple[float, float], signal: AnySignal, mains_hz: float
) -> Iterator[Fault]:
    """Yield a fault where a band lies wholly within what one stage takes away; parts are told at the feature.

    Parameters
    ----------
    path : Path
        Where the band is declared.
    band : (float, float)
        Its edges in Hz.
    signal : AnySignal
        The signal.
    mains_hz : float
        Frequency of the mains.

    Yields
    ------
    Fault
    """
    for stop in stop_bands(signal, mains_hz, band[1] + mains_hz):
        if stop.low_hz <= band[0] and band[1] <= stop.high_hz:
            found = f"{band[0]:g} to {band[1]:g} Hz, all of it in the stop band {stop.low_hz:g} to {stop.high_hz:g} Hz"
            allowed = f"a band that filter[{stop.stage}] lets pass, in part at least"
            yield Fault(path, found, allowed, "Widen the band, or narrow the stop band.")


def reach_s(stage: FilterStage) -> float:
    """Return how far the taps of a fir reach to either side, in seconds; 0 for other designs."""
    if stage.transition_hz is None:
        return 0.0
    if stage.window is not None:
        return TRANSITION_TIMES_LENGTH[stage.window] / stage.transition_hz / 2
    # Kaiser (1974): length - 1 = (attenuation - 7.95) / (2.285 times the transition in radians a sample).
    return ((stage.attenuation_db or 0.0) - 7.95) / (2.285 * 2 * math.pi * stage.transition_hz) / 2


def check_reference(name: str, signal: AnySignal) -> Iterator[Fault]:
    """Yield what does not fit between a reference and the channels of its signal.

    Parameters
    ----------
    name : str
        Name of the signal.
    signal : AnySignal
        Its description.

    Yields
    ------
    Fault
    """
    path: Path = ("signals", name, "reference")
    reference, channels = signal.reference, signal.channels
    if reference == "average" and len(channels) < 2:
        remedy = "Add channels, or delete reference: a channel less itself is nothing."
        yield Fault(path, "the average of one channel", "at least 2 channels", remedy)
    elif isinstance(reference, BipolarPairs):
        for pair, members in reference.pairs.items():
            yield from _check_pair((*path, "pairs", pair), pair, members, channels)
    elif isinstance(reference, tuple):
        yield from _unknown(path, reference, channels)
        if set(channels) <= set(reference):
            remedy = "Leave a channel out of reference: those named are taken out of the signal."
            yield Fault(path, "every channel", "at least one channel besides", remedy)


def _check_pair(
    path: Path, pair: str, members: tuple[str, str], channels: tuple[str, ...]
) -> Iterator[Fault]:
    yield from _unknown(path, members, channels)
    if members[0] == members[1]:
        remedy = "Name another channel: a channel less itself is nothing."
        yield Fault(path, f"{members[0]} twice", "two different channels", remedy)
    if pair in channels:
        allowed = "a name that no channel of the signal has"
        yield Fault(path, pair, allowed, f"Call it {members[0]}-{members[1]}.")


def _unknown(path: Path, names: tuple[str, ...], channels: tuple[str, ...]) -> Iterator[Fault]:
    for index, name in enumerate(names):
        if name not in channels:
            remedy = suggestion(name, channels, "Add it to channels, or name another.")
            yield Fault((*path, index), name, f"a channel of the signal: {listed(channels)}", remedy)
