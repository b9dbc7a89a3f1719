"""Quality of acquisition: what can be said of a signal before anything is done to it.

Nothing here knows a limit: what was measured is judged elsewhere, so that a limit may change without measuring anew.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.errors import StepError
from bandcairn.steps.amplitude import amplitude
from bandcairn.steps.clipping import Stretches, clipped, find_rests, flat
from bandcairn.steps.mains import mains, other_line, true_frequency_hz
from bandcairn.steps.spectrum import Spectrum, power_density

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from bandcairn.signal import Run, Signal
    from bandcairn.steps.amplitude import Amplitude
    from bandcairn.steps.clipping import Rests
    from bandcairn.steps.mains import Line, Mains, MainsHz

SEGMENT_S = 2
# Segments of a longer recording are spread evenly over it: two minutes tell line and floor as well as a day.
MOST_SEGMENTS = 60


@dataclass(frozen=True, slots=True)
class Gaps:
    """What is missing between the runs of a signal.

    Attributes
    ----------
    count : int
        Number of gaps.
    longest_s : float
        Length of the longest.
    missing_share : float
        Missing time over the time from the first sample to the last, 0 to 1.
    """

    count: int
    longest_s: float
    missing_share: float


@dataclass(frozen=True, slots=True)
class ChannelQuality:
    """What is measured of one channel.

    Attributes
    ----------
    clipped, flat : Stretches
        Where it rests at an extreme for three samples or longer, and where it does not change for a second or longer.
    clipped_share, flat_share : float
        Share of the samples, 0 to 1, within them.
    clipped_longest_s, flat_longest_s : float
        The longest of them.
    peak_to_peak_uv, rms_uv : float
        Largest minus smallest sample; root mean square about the mean.
    typical_peak_to_peak_uv, typical_rms_uv : float or None
        As in `bandcairn.steps.amplitude.Amplitude`.
    smallest_step_uv : float or None
        Smallest difference of two neighbouring samples that differ; None where none do.
    mains : Mains or None
        Lines of the declared mains frequency; None where no run holds a segment of two seconds, or nothing moves.
    mains_frequency_hz : float or None
        Its true frequency; None where the line is not clear.
    identical : tuple of int
        Indices of the other channels that hold the same samples; a channel that never changes has none.
    """

    clipped: Stretches
    flat: Stretches
    clipped_share: float
    clipped_longest_s: float
    flat_share: float
    flat_longest_s: float
    peak_to_peak_uv: float
    rms_uv: float
    typical_peak_to_peak_uv: float | None
    typical_rms_uv: float | None
    smallest_step_uv: float | None
    mains: Mains | None
    mains_frequency_hz: float | None
    identical: tuple[int, ...]


@dataclass(frozen=True, slots=True)
class Quality:
    """What is measured of a signal.

    Attributes
    ----------
    channels : tuple of ChannelQuality
        In the order of the signal.
    gaps : Gaps
        Alike for all channels.
    spectrum : Spectrum or None
        Mean density of segments of two seconds as recorded, shape (n_channels, n_freq), in uV^2/Hz; None where no run
        is that long.
    """

    channels: tuple[ChannelQuality, ...]
    gaps: Gaps
    spectrum: Spectrum | None


def assess(
    signal: Signal,
    mains_hz: MainsHz,
    range_uv: tuple[float, float] | None = None,
    *,
    accept_other_mains: bool = False,
) -> Quality:
    """Measure clipped and flat stretches, gaps, amplitude, steps and mains of each channel.

    Parameters
    ----------
    signal : Signal
        As recorded, unfiltered.
    mains_hz : {50, 60}
        The declared mains frequency.
    range_uv : tuple of float or None
        The lowest and the highest value that the recorder can give, in microvolt; None if unknown.
    accept_other_mains : bool
        Whether a line at the other mains frequency, and none at the declared one, is no reason to refuse.

    Returns
    -------
    Quality

    Raises
    ------
    StepError
        If there are no samples, or the mains frequency is not the declared one.
    """
    if signal.samples.shape[-1] == 0:
        raise StepError("found a recording without samples; its quality cannot be assessed")
    rate_hz = float(signal.rate_hz)
    starts = [run.first for run in signal.runs]
    rests = [find_rests(channel, starts) for channel in signal.samples]
    segments = _segments(signal)
    spectrum = _recorded_spectrum(signal, segments) if segments.used else None
    moving = {
        index: Spectrum(spectrum.frequencies_hz, spectrum.density[index])
        for index, rest in enumerate(rests)
        if spectrum is not None and rest.smallest_step_uv is not None
    }
    lines = {index: mains(one, mains_hz, len(segments.used)) for index, one in moving.items()}
    if not accept_other_mains:
        other_hz: MainsHz = 60 if mains_hz == 50 else 50
        others = {index: mains(one, other_hz, len(segments.used)) for index, one in moving.items()}
        _refuse_other_mains(signal, segments, mains_hz, lines, others)
    frequencies_hz = {
        index: _true_frequency_hz(signal, segments, index, found.fundamental)
        for index, found in lines.items()
        if found.fundamental is not None and found.fundamental.clear
    }
    identical = _identical(signal.samples, rests)
    channels = tuple(
        _channel_quality(
            amplitude(signal.samples[index], signal.runs, rate_hz),
            rests[index],
            rate_hz,
            range_uv=range_uv,
            lines=lines.get(index),
            mains_frequency_hz=frequencies_hz.get(index),
            identical=identical[index],
            n_samples=signal.samples.shape[1],
        )
        for index in range(len(signal.channels))
    )
    return Quality(channels, _gaps(signal.runs, rate_hz), spectrum)


def _channel_quality(
    size: Amplitude,
    rests: Rests,
    rate_hz: float,
    *,
    range_uv: tuple[float, float] | None,
    lines: Mains | None,
    mains_frequency_hz: float | None,
    identical: tuple[int, ...],
    n_samples: int,
) -> ChannelQuality:
    at_limit, still = clipped(rests, size.low_uv, size.high_uv, range_uv), flat(rests, rate_hz)
    return ChannelQuality(
        clipped=at_limit,
        flat=still,
        clipped_share=int(at_limit.n_samples.sum()) / n_samples,
        clipped_longest_s=int(at_limit.n_samples.max(initial=0)) / rate_hz,
        flat_share=int(still.n_samples.sum()) / n_samples,
        flat_longest_s=int(still.n_samples.max(initial=0)) / rate_hz,
        peak_to_peak_uv=size.high_uv - size.low_uv,
        rms_uv=size.rms_uv,
        typical_peak_to_peak_uv=size.typical_peak_to_peak_uv,
        typical_rms_uv=size.typical_rms_uv,
        smallest_step_uv=rests.smallest_step_uv,
        mains=lines,
        mains_frequency_hz=mains_frequency_hz,
        identical=identical,
    )


@dataclass(frozen=True, slots=True)
class _Segments:
    """Segments of two seconds, evenly spread over the runs and without a sample in common.

    Attributes
    ----------
    length : int
        Samples of each.
    used : list of int
        First sample of each; empty where no run is that long.
    paired : list of int
        First samples of those that another follows in the same run.
    """

    length: int
    used: list[int]
    paired: list[int]


def _segments(signal: Signal) -> _Segments:
    length = round(SEGMENT_S * signal.rate_hz)
    counts = [run.n_samples // length if length > 1 else 0 for run in signal.runs]
    every = list(zip(signal.runs, counts, strict=True))
    starts = [run.first + index * length for run, count in every for index in range(count)]
    paired = [run.first + index * length for run, count in every for index in range(count - 1)]
    return _Segments(length, _spread(starts), _spread(paired))


def _spread(starts: list[int]) -> list[int]:
    """Return `MOST_SEGMENTS` or fewer, from the first to the last."""
    n_used = min(len(starts), MOST_SEGMENTS)
    return [starts[index * (len(starts) - 1) // max(1, n_used - 1)] for index in range(n_used)]


def _recorded_spectrum(signal: Signal, segments: _Segments) -> Spectrum:
    """Return the mean density of the segments, shape (n_channels, n_freq)."""
    # Channel by channel: the segments of one fit into a core's cache.
    spectra = [
        power_density(
            np.concatenate([channel[start : start + segments.length] for start in segments.used]),
            float(signal.rate_hz),
            method="welch",
            window="hann",
            segment_s=SEGMENT_S,
            overlap=0,
        )
        for channel in signal.samples
    ]
    return Spectrum(spectra[0].frequencies_hz, np.stack([one.density for one in spectra]))


def _true_frequency_hz(signal: Signal, segments: _Segments, index: int, line: Line) -> float:
    return true_frequency_hz(
        signal.samples[index], segments.paired, segments.length, float(signal.rate_hz), line.frequency_hz
    )


def _refuse_other_mains(
    signal: Signal,
    segments: _Segments,
    mains_hz: MainsHz,
    declared: Mapping[int, Mains],
    other: Mapping[int, Mains],
) -> None:
    found = other_line(declared, other)
    if found is None:
        return
    index, line = found
    raise StepError(
        f"found a line at {_true_frequency_hz(signal, segments, index, line):.2f} Hz in {signal.channels[index]}, "
        f"{line.peak_db:.0f} dB above its neighbours, and none of {mains_hz} Hz or its harmonics in any channel; "
        f"allowed: mains_hz as recorded, which study.yaml declares as {mains_hz}. Correct mains_hz, leave the "
        "recording out, or state in quality.accept_other_mains why the line is accepted."
    )


def _gaps(runs: Sequence[Run], rate_hz: float) -> Gaps:
    """Measure the gaps between runs: from where the next sample was due to where it stands."""
    lengths_s = [
        float(after.start_s - before.start_s) - before.n_samples / rate_hz for before, after in pairwise(runs)
    ]
    span_s = float(runs[-1].start_s - runs[0].start_s) + runs[-1].n_samples / rate_hz
    return Gaps(len(lengths_s), max(lengths_s, default=0.0), sum(lengths_s) / span_s)


def _identical(samples: NDArray[np.float64], rests: Sequence[Rests]) -> list[tuple[int, ...]]:
    """Return for each channel which others hold the same samples."""
    same: list[list[int]] = [[] for _ in samples]
    moving = [index for index, rest in enumerate(rests) if rest.smallest_step_uv is not None]
    for place, first in enumerate(moving):
        for second in moving[place + 1 :]:
            # A few samples tell most pairs apart.
            if np.array_equal(samples[first, :64], samples[second, :64]) and np.array_equal(
                samples[first], samples[second]
            ):
                same[first].append(second)
                same[second].append(first)
    return [tuple(others) for others in same]
