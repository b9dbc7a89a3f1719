"""Looks at the samples of the first files: at which frequency the mains hum stands, and in which unit."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING

from bandcairn.drafting.findings import Choice
from bandcairn.errors import RecordingError
from bandcairn.recordings import Declared, read

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence
    from pathlib import Path

    import numpy as np
    from numpy.typing import NDArray

    from bandcairn.drafting.findings import FoundChannel, FoundRecording

_FILES, _CHANNELS_A_FILE = 3, 2
_STRETCH_S, _WINDOW_S = 60, 4
# A peak or a notch, and its lead over the other frequency, that is no chance of the spectrum.
_CLEAR_DB = 6.0
_SLOWEST_HZ = 140  # the noise floor is taken up to 66 Hz
# Spread (half of the range from the 16th to the 84th percentile) that each kind has in uV, generously; from
# common practice. Neighbouring units are a factor of 1000 apart, so that two never fit at once.
_USUAL_SPREAD_UV = {"eeg": (1.5, 500.0), "ecg": (10.0, 3000.0), "emg": (2.0, 1500.0)}
_FACTORS = {"nV": 1e-3, "uV": 1.0, "mV": 1e3, "V": 1e6}


@dataclass(frozen=True, slots=True, eq=False)
class _Look:
    """A stretch of one channel, in uV or, where its unit is not known, in its own."""

    channel: FoundChannel
    rate_hz: Fraction
    values: NDArray[np.float64]


def guess_mains(folder: Path, recordings: Sequence[FoundRecording]) -> Choice:
    """Guess the mains frequency by the power at 50 and 60 Hz against that around them.

    Parameters
    ----------
    folder : Path
        The study folder.
    recordings : sequence of FoundRecording
        The first few are looked at.

    Returns
    -------
    Choice
        A peak counts, and so does the notch of a recorder. None where neither frequency stands out.
    """
    import numpy as np

    looks = [look for look in _looks(folder, recordings) if look.rate_hz >= _SLOWEST_HZ]
    if not looks:
        return Choice(None, "50 or 60, where it was recorded; no file is fast enough to tell")
    at_50_db = float(np.mean([_above_floor_db(look, 50) for look in looks]))
    at_60_db = float(np.mean([_above_floor_db(look, 60) for look in looks]))
    seen = f"{_signed(at_50_db)} dB at 50 Hz, {_signed(at_60_db)} dB at 60 Hz"
    for found, one_db, other_db in (("50", at_50_db, at_60_db), ("60", at_60_db, at_50_db)):
        if one_db >= _CLEAR_DB and one_db - other_db >= _CLEAR_DB:
            return Choice(found, f"hum in the first files, {seen}", guessed=True)
        if one_db <= -_CLEAR_DB and other_db - one_db >= _CLEAR_DB and other_db < _CLEAR_DB:
            return Choice(found, f"a notch filter in the first files, {seen}", guessed=True)
    return Choice(None, f"50 or 60, where it was recorded; the files do not tell: {seen}")


def guess_unit(folder: Path, recordings: Sequence[FoundRecording]) -> Choice:
    """Guess the unit of delimited files by the spread of their numbers.

    Parameters
    ----------
    folder : Path
        The study folder.
    recordings : sequence of FoundRecording
        Those whose channels state no unit; the first few are looked at.

    Returns
    -------
    Choice
        None where the channels looked at do not agree on one unit.
    """
    votes: dict[str, str] = {}
    for look in _looks(folder, recordings):
        spread = _spread(look.values)
        low_uv, high_uv = _USUAL_SPREAD_UV[look.channel.kind]
        fitting = [unit for unit, factor in _FACTORS.items() if low_uv <= spread * factor <= high_uv]
        told = (
            f"{look.channel.label} varies by about {spread:.3g}, which is usual in {fitting[0]}"
            if fitting
            else ""
        )
        votes.setdefault(fitting[0] if fitting else "", told)
    if len(votes) == 1 and "" not in votes:
        unit, why = next(iter(votes.items()))
        return Choice(unit, why, guessed=True)
    return Choice(None, f"one of {', '.join(_FACTORS)}; the numbers do not tell")


def _signed(level_db: float) -> str:
    return f"{round(level_db):+d}" if round(level_db) else "0"


def _looks(folder: Path, recordings: Sequence[FoundRecording]) -> Iterator[_Look]:
    """Yield stretches of the first usable channels of the first recordings, from their middle."""
    for recording in recordings[:_FILES]:
        usable = [channel for channel in recording.channels if channel.kind]
        spread_out = usable[:: max(1, len(usable) // _CHANNELS_A_FILE)]
        for channel in spread_out[:_CHANNELS_A_FILE]:
            look = _look(folder / recording.file, channel)
            if look is not None:
                yield look


def _look(path: Path, channel: FoundChannel) -> _Look | None:
    length_s = channel.n_samples if channel.length_s is None else channel.length_s
    start_s = max(0.0, (length_s - _STRETCH_S) / 2)
    stop_s = None if length_s <= _STRETCH_S else start_s + _STRETCH_S
    # Without a rate a second stands for a sample: good enough for the spread, too slow for the mains.
    declared = Declared(Fraction(1) if channel.rate_hz is None else None, "uV")
    try:
        raw = read(path, (channel.label,), declared, start_s, stop_s)
    except RecordingError:
        return None  # the check of the study tells what is wrong with the file
    return _Look(channel, raw.rate_hz, raw.to_signal().samples[0])


def _spread(values: NDArray[np.float64]) -> float:
    import numpy as np

    low, high = np.percentile(values, (16, 84))
    return float(high - low) / 2


def _above_floor_db(look: _Look, frequency_hz: float) -> float:
    """Return the power within half a hertz of a frequency against the median 2 to 6 Hz from it."""
    import numpy as np

    frequencies_hz, power = _periodogram(look.values, float(look.rate_hz))
    away_hz = np.abs(frequencies_hz - frequency_hz)
    floor = np.median(power[(away_hz >= 2) & (away_hz <= 6)])
    peak = np.mean(power[away_hz <= 0.5])
    if not floor > 0 or not peak > 0:
        return 0.0
    return float(10 * np.log10(peak / floor))


def _periodogram(
    values: NDArray[np.float64], rate_hz: float
) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Return frequencies in Hz and the mean periodogram over windows of a few seconds, in no unit."""
    import numpy as np

    size = min(values.size, round(_WINDOW_S * rate_hz))
    windows = values[: values.size // size * size].reshape(-1, size)
    tapered = (windows - windows.mean(axis=1, keepdims=True)) * np.hanning(size)
    power = np.abs(np.fft.rfft(tapered)) ** 2
    mean: NDArray[np.float64] = power.mean(axis=0, dtype=np.float64)
    return np.asarray(np.fft.rfftfreq(size, 1 / rate_hz), np.float64), mean
