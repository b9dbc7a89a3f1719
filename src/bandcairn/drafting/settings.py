"""Settings that fit the rates and lengths of the recordings; each is a place to start from, and says why.

Values without a source are common practice.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Sequence

    from bandcairn.drafting.grouping import Group

Band = tuple[float, float]

_EEG_BANDS_HZ: dict[str, Band] = {
    "delta": (0.5, 4),
    "theta": (4, 8),
    "alpha": (8, 13),
    "beta": (13, 30),
    "gamma": (30, 45),
}
# Task Force of the ESC and NASPE (1996). Heart rate variability. Circulation 93, 1043-1065.
_ECG_BANDS_HZ: dict[str, Band] = {"vlf": (0.003, 0.04), "lf": (0.04, 0.15), "hf": (0.15, 0.4)}
_NEEDED_S = {"vlf": 300, "lf": 120, "hf": 0}
_WANTED_HZ: dict[str, Band] = {"eeg": (0.5, 45), "ecg": (0.5, 40), "emg": (20, 450)}
_ORDER = {"eeg": 4, "ecg": 2, "emg": 4}
# The share of half the rate up to which a filter is drafted: closer to it, its slope has no room.
_USABLE_SHARE = 0.9
# Rates to resample to, the first that fits; and up to which rate a file is left as it is.
_TARGETS_HZ = {
    "eeg": (128, 125, 100),
    "ecg": (500, 256, 250, 200, 128),
    "emg": (2000, 1024, 1000, 512, 500, 250),
}
_LEFT_ALONE_HZ = {"eeg": 160, "ecg": 512, "emg": 2048}
_LARGEST_FACTOR = 1000  # numerator and denominator of a change of rate that the resampling step takes
# Epoch and segment of its spectrum, in s; the first epoch that fits into every recording is taken.
_EEG_WINDOWS_S = ((4, 2), (2, 2), (1, 1))
_ECG_WINDOWS_S = ((300, 120), (240, 120), (180, 120), (120, 60), (60, 30), (30, 20), (10, 6))
_EMG_WINDOWS_S = ((1, 1), (0.5, 0.5), (0.25, 0.25))
_WINDOWS_S: dict[str, tuple[tuple[float, float], ...]] = {
    "eeg": _EEG_WINDOWS_S,
    "ecg": _ECG_WINDOWS_S,
    "emg": _EMG_WINDOWS_S,
}
# Beat intervals are measured over minutes: from segments shorter than this they are taken from the whole recording.
_SHORT_FOR_BEATS_S = 120


@dataclass(frozen=True, slots=True)
class Lengths:
    """The shortest recording of a study, and the shortest of the longest segments of each, in s.

    None where it is not known; `segment_s` also where no recording has segments.
    """

    recording_s: float | None
    segment_s: float | None


@dataclass(frozen=True, slots=True)
class Settings:
    """How one signal is processed.

    Attributes
    ----------
    whole : bool
        Whether the whole recording is used although there are segments.
    recorder_hz : tuple of float
        What the recorder passes, 0 and infinity where nothing states it.
    resample_hz : int or None
        None where the rate of the files is kept.
    filter_hz : tuple of float
        Cut-offs of the band-pass.
    order : int
        Of the filter.
    epoch_s, segment_s : float
        Length of an epoch and of the segments of its spectrum.
    bands_hz : dict
        Empty where the kind has none.
    problem : str
        Why the signal cannot be used as it stands; empty where it can.
    """

    whole: bool
    recorder_hz: Band
    resample_hz: int | None
    filter_hz: Band
    order: int
    epoch_s: float
    segment_s: float
    bands_hz: dict[str, Band]
    problem: str = ""


def settings_for(group: Group, lengths: Lengths) -> Settings:
    """Choose settings for a signal.

    Parameters
    ----------
    group : Group
        Its channels.
    lengths : Lengths
        Of the recordings.

    Returns
    -------
    Settings
    """
    rates_hz = group.rates_hz
    resample_hz = target_hz(group.kind, rates_hz)
    rate_hz = float(resample_hz or min(rates_hz, default=Fraction(10_000)))
    recorder_hz = _recorder_hz(group)
    low_hz, high_hz = _pass_hz(group.kind, rate_hz, recorder_hz)
    whole = group.kind == "ecg" and lengths.segment_s is not None and lengths.segment_s < _SHORT_FOR_BEATS_S
    available_s = lengths.segment_s if lengths.segment_s is not None and not whole else lengths.recording_s
    windows = _WINDOWS_S[group.kind]
    fitting = [window for window in windows if available_s is None or window[0] <= available_s + 1e-6]
    epoch_s, segment_s = fitting[0] if fitting else windows[-1]
    drafted = Settings(
        whole=whole,
        recorder_hz=recorder_hz,
        resample_hz=resample_hz,
        filter_hz=(low_hz, high_hz),
        order=_ORDER[group.kind],
        epoch_s=epoch_s,
        segment_s=segment_s,
        bands_hz=_bands_hz(group.kind, low_hz, high_hz, epoch_s),
    )
    too_short_s = None if fitting else available_s
    return replace(drafted, problem=_problem(group, drafted, rate_hz, too_short_s))


def _problem(group: Group, settings: Settings, rate_hz: float, too_short_s: float | None) -> str:
    """Return why a signal cannot be used as it stands; empty where it can."""
    low_hz, high_hz = settings.filter_hz
    if group.lacking:
        return f"not in {_some(group.lacking)}: delete those rows of recordings.csv to use it"
    if len(group.rates_hz) > 1 and settings.resample_hz is None:
        return "the recordings have rates that no common lower one fits: choose resample yourself"
    if low_hz * 2 > high_hz or (group.kind == "eeg" and not settings.bands_hz):
        return f"at {rate_hz:g} Hz no more than {low_hz:g} to {high_hz:g} Hz would pass"
    if too_short_s is not None:
        return f"the shortest recording or segment, {too_short_s:g} s, is too short for it"
    return ""


def target_hz(kind: str, rates_hz: Sequence[Fraction]) -> int | None:
    """Return a rate to resample to, never above any of `rates_hz`; None to keep the one rate there is."""
    if not rates_hz or (len(rates_hz) == 1 and rates_hz[0] <= _LEFT_ALONE_HZ[kind]):
        return None
    lowest = min(rates_hz)
    choices = [target for target in _TARGETS_HZ[kind] if target <= lowest]
    if lowest.denominator == 1:
        choices.append(int(lowest))
    fitting = (one for one in choices if all(_is_simple(Fraction(one) / rate) for rate in rates_hz))
    target = next(fitting, None)
    return None if target is not None and set(rates_hz) == {Fraction(target)} else target


def _is_simple(ratio: Fraction) -> bool:
    return max(ratio.numerator, ratio.denominator) <= _LARGEST_FACTOR


def _recorder_hz(group: Group) -> Band:
    """Return what every channel's recorder passes, as far as the dataset states it."""
    low_hz = max((one.low_hz for one in group.channels if one.low_hz), default=0.0)
    return low_hz, min((one.high_hz for one in group.channels if one.high_hz), default=math.inf)


def _pass_hz(kind: str, rate_hz: float, recorder_hz: Band) -> Band:
    """Return the cut-offs: the usual ones, narrowed to half the rate and to what the recorder passes."""
    low_hz, high_hz = _WANTED_HZ[kind]
    limit_hz = _USABLE_SHARE * rate_hz / 2
    return max(low_hz, recorder_hz[0]), min(high_hz, math.floor(limit_hz) or limit_hz, recorder_hz[1])


def _bands_hz(kind: str, low_hz: float, high_hz: float, epoch_s: float) -> dict[str, Band]:
    if kind == "ecg":
        return {name: band for name, band in _ECG_BANDS_HZ.items() if epoch_s >= _NEEDED_S[name]}
    if kind == "emg":
        return {}
    inside = {name: (max(low, low_hz), min(high, high_hz)) for name, (low, high) in _EEG_BANDS_HZ.items()}
    return {name: (low, high) for name, (low, high) in inside.items() if high - low >= 1}


def _some(names: Sequence[str]) -> str:
    return ", ".join(names[:4]) + (f" and {len(names) - 4} more" if len(names) > 4 else "")
