"""The line that the mains leave in a spectrum: its level, its true frequency, and whether it is the declared one."""

from __future__ import annotations

import math
from dataclasses import dataclass
from statistics import median
from typing import TYPE_CHECKING, Literal

import numpy as np

from bandcairn.steps.spectrum import window

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from bandcairn.steps.spectrum import Spectrum

    MainsHz = Literal[50, 60]

# A grid strays from its nominal frequency by less (common practice).
_STRAYS_HZ = 1.0
# The line of a Hann window of two seconds is 2 Hz wide between its zeros.
_LINE_HALF_HZ = 1.5
_NEIGHBOURS_HZ = 6.0
_HARMONICS = 5
# Harmonics that 50 and 60 Hz have in common tell nothing.
_COMMON_HZ = 300
# Common practice: a clear line stands 10 dB above the median of its neighbours and 6 dB above the largest of them
# (the harmonics of a regular pulse have neighbours as large as themselves); none at all is 3 dB or less.
_CLEAR_DB, _ALONE_DB, _NOTHING_DB = 10.0, 6.0, 3.0


@dataclass(frozen=True, slots=True)
class Line:
    """What stands at a frequency, against its neighbours.

    Attributes
    ----------
    frequency_hz : float
        By its three highest bins; `true_frequency_hz` tells more.
    power_uv2 : float
        Its power above the floor; a sine of amplitude A has A^2/2.
    level_db : float
        Power within 1.5 Hz of it, over what the floor alone would give there.
    peak_db : float
        Its highest bin over the floor.
    clear : bool
        Whether it is no chance and stands alone.
    """

    frequency_hz: float
    power_uv2: float
    level_db: float
    peak_db: float
    clear: bool


@dataclass(frozen=True, slots=True)
class Mains:
    """The lines at the harmonics of one mains frequency.

    Attributes
    ----------
    fundamental : Line or None
        None where the spectrum does not reach beyond it.
    rms_uv : float
        Root mean square of all clear lines together, up to the fifth harmonic.
    told_by : Line or None
        The clear line with the highest peak among the harmonics that only this frequency has.
    absent : bool
        Whether no harmonic shows anything.
    """

    fundamental: Line | None
    rms_uv: float
    told_by: Line | None
    absent: bool


def mains(spectrum: Spectrum, mains_hz: MainsHz, n_averaged: int) -> Mains:
    """Look for the lines of a mains frequency.

    Parameters
    ----------
    spectrum : Spectrum
        Mean density of segments of two seconds under a Hann window, shape (n_freq,), in uV^2/Hz.
    mains_hz : {50, 60}
        Nominal frequency.
    n_averaged : int
        Number of segments, which have no sample in common.

    Returns
    -------
    Mains
    """
    harmonics = range(mains_hz, mains_hz * _HARMONICS + 1, mains_hz)
    lines = {nominal_hz: find_line(spectrum, nominal_hz, n_averaged) for nominal_hz in harmonics}
    found = {nominal_hz: line for nominal_hz, line in lines.items() if line is not None}
    own = [line for nominal_hz, line in found.items() if nominal_hz % _COMMON_HZ]
    nothing_db = max(_NOTHING_DB, _chance_db(n_averaged, deviations=4))
    return Mains(
        fundamental=lines[mains_hz],
        rms_uv=math.sqrt(sum(line.power_uv2 for line in found.values() if line.clear)),
        told_by=max((line for line in own if line.clear), key=lambda line: line.peak_db, default=None),
        absent=all(line.peak_db < nothing_db for line in own),
    )


def other_line(declared: Mapping[int, Mains], other: Mapping[int, Mains]) -> tuple[int, Line] | None:
    """Return channel and line that speak against the declared mains frequency.

    Parameters
    ----------
    declared, other : mapping of int to Mains
        For each channel of a signal, by its index, what is found at the declared frequency and at the other one.

    Returns
    -------
    tuple of int and Line, or None
        Index of the channel whose line is highest; None where no channel has a clear line of the other frequency, or
        any channel shows the declared one.
    """
    if not all(mains.absent for mains in declared.values()):
        return None
    lines = [(index, mains.told_by) for index, mains in other.items() if mains.told_by is not None]
    return max(lines, key=lambda found: found[1].peak_db, default=None)


def find_line(spectrum: Spectrum, nominal_hz: float, n_averaged: int) -> Line | None:
    """Measure the highest bin near a frequency against its neighbours.

    The floor is the median of the neighbours up to 6 Hz away, corrected for the median of an average of
    exponential variables lying below its mean (Wilson-Hilferty).

    Parameters
    ----------
    spectrum : Spectrum
        As for `mains`.
    nominal_hz : float
        Where to look.
    n_averaged : int
        Number of segments behind the spectrum.

    Returns
    -------
    Line or None
        None where the line or its neighbours do not fit below the end of the spectrum, or hold no power.

    References
    ----------
    Wilson EB, Hilferty MM (1931) The distribution of chi-square. Proc Natl Acad Sci 17:684-688 (from memory).
    """
    step_hz = float(spectrum.frequencies_hz[1])
    half, around = round(_LINE_HALF_HZ / step_hz), round(_NEIGHBOURS_HZ / step_hz)
    first, last = (round((nominal_hz + side * _STRAYS_HZ) / step_hz) for side in (-1, 1))
    density = spectrum.density
    if last + half >= density.size:
        return None
    peak = first + int(np.argmax(density[first : last + 1]))
    below = density[max(1, peak - around) : max(1, peak - half)]
    neighbours = sorted((*below.tolist(), *density[peak + half + 1 : peak + around + 1].tolist()))
    floor = median(neighbours) / (1 - 1 / (9 * n_averaged)) ** 3
    if floor <= 0:
        return None
    near = density[peak - half : peak + half + 1]
    power = max(0.0, float(np.sum(near - floor)))
    peak_db = 10 * math.log10(density[peak] / floor) if density[peak] > 0 else -math.inf
    alone = density[peak] > neighbours[-1] * 10 ** (_ALONE_DB / 10)
    clear = bool(alone and peak_db >= max(_CLEAR_DB, _chance_db(n_averaged, deviations=5)))
    return Line(
        frequency_hz=(peak + _offset(density[peak - 1 : peak + 2], floor)) * step_hz,
        power_uv2=power * step_hz,
        level_db=10 * math.log10(max(float(np.mean(near)), np.finfo(float).tiny) / floor),
        peak_db=peak_db,
        clear=clear,
    )


def _offset(density: NDArray[np.float64], floor: float) -> float:
    """Return by what part of a bin a line lies beside the middle one of three bins of a Hann window."""
    before, middle, after = np.sqrt(np.maximum(density - floor, 0)).tolist()
    # Of a line at offset d the bins are as 1/((1+d)(2+d)), 1/((1-d)(1+d)) and 1/((1-d)(2-d)).
    offset: float = 2 * (after - before) / (before + 2 * middle + after) if middle > 0 else 0.0
    return offset


def true_frequency_hz(
    samples: NDArray[np.float64], starts: Sequence[int], length: int, rate_hz: float, near_hz: float
) -> float:
    """Return the frequency of a line by the phase that it gains from one segment to the next.

    Parameters
    ----------
    samples : ndarray, shape (n_samples,)
        One channel in microvolt.
    starts : sequence of int
        First samples of pairs of segments that follow one another without a gap.
    length : int
        Samples of a segment.
    rate_hz : float
        Sampling rate.
    near_hz : float
        A frequency that is off by less than half of one over a segment's length.

    Returns
    -------
    float
        Hertz; `near_hz` where there is no pair.

    References
    ----------
    Kay SM (1989) A fast and accurate single frequency estimator. IEEE Trans Acoust Speech Signal Process 37:1987-1990
    (from memory): the angle of a mean of products of neighbours.
    """
    if not starts:
        return near_hz
    carrier = window("hann", length) * np.exp(-2j * np.pi * near_hz / rate_hz * np.arange(length))
    parts = np.stack([carrier.real, carrier.imag], axis=1)
    before, after = (
        np.stack([samples[start + shift : start + shift + length] for start in starts]) @ parts
        for shift in (0, length)
    )
    product = np.sum((after[:, 0] + 1j * after[:, 1]) * (before[:, 0] - 1j * before[:, 1]))
    segment_s = length / rate_hz
    gained = (float(np.angle(product)) / (2 * np.pi) - near_hz * segment_s + 0.5) % 1 - 0.5
    return near_hz + gained / segment_s


def _chance_db(n_averaged: int, deviations: float) -> float:
    """Return what a bin of averaged noise exceeds its mean by, as rarely as a normal variable its deviations."""
    part = 1 / (9 * n_averaged)
    return 30 * math.log10(1 - part + deviations * math.sqrt(part))
