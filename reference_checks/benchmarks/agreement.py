"""Values that both sides define alike, held side by side: they show that equal work was done."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import pandas as pd

if TYPE_CHECKING:
    from pathlib import Path


@dataclass(frozen=True, slots=True)
class _Common:
    """A value of one recording on both sides.

    Attributes
    ----------
    column : str
        In the script's table.
    signal, channel, feature, band : str
        In bandcairn's; an empty band for none.
    allowed : float
        Largest relative difference.
    why : str
        Where a difference comes from.
    """

    column: str
    signal: str
    channel: str
    feature: str
    band: str
    allowed: float
    why: str


# Squared gain of the script's anti-alias filter (the default of its library): up to 1.0017 at 8 Hz, 1.0006 at 10 Hz.
_GAIN = "ripple of the anti-alias filter of the script"
_COMMON = (
    *(
        _Common(f"{name}_alpha_abs", "eeg", f"EEG {name}", "band_power", "alpha", 0.002, _GAIN)
        for name in ("Fz", "Cz", "Pz", "Oz")
    ),
    _Common("n_beats", "heart", "ECG", "beats", "", 0.005, "other detector; a beat at an end may be missed"),
    _Common("hr_mean", "heart", "ECG", "heart_rate", "", 0.005, "mean of epochs against whole recording"),
    _Common("mnf_mean", "muscle", "EMG", "mean_frequency", "", 0.002, "another anti-alias filter"),
    _Common("mdf_mean", "muscle", "EMG", "median_frequency", "", 0.005, "script takes a whole bin of 1 Hz"),
    _Common("rms_mean", "muscle", "EMG", "rms", "", 0.002, "root of the mean square against mean of roots"),
)
_LEAST_SHARE_OF_SAME_EPOCHS = 0.9
# The script gives the RMS of EMG in millivolt.
_SCALE = {"rms_mean": 1000.0}


@dataclass(frozen=True, slots=True)
class Agreement:
    """How far one value differs between the sides.

    Attributes
    ----------
    value : str
        Its name.
    largest : float
        Largest relative difference over the recordings.
    allowed : float
        What it may be.
    why : str
        Where it comes from.
    """

    value: str
    largest: float
    allowed: float
    why: str

    @property
    def holds(self) -> bool:
        """Whether the difference is within what is allowed."""
        return self.largest <= self.allowed


def agreements(study: Path, script: Path) -> list[Agreement]:
    """Compare the values of all recordings.

    Parameters
    ----------
    study : Path
        Study folder with bandcairn's results.
    script : Path
        Output folder of the script.
    """
    ours = pd.read_parquet(study / "results" / "features.parquet")
    theirs = pd.read_parquet(script / "features.parquet").set_index("recording")
    return [_compared(common, ours, theirs) for common in _COMMON]


def _comparable(common: _Common, here: pd.DataFrame, theirs: pd.DataFrame) -> pd.Series[bool]:
    """Tell which recordings have their values from the same epochs.

    An epoch whose range falls on the limit of rejection is kept by one side alone: at the ends of a recording two
    filters one after the other are not one cascade. That happens to a few recordings in a hundred; more are an error.
    """
    every = pd.Series(data=True, index=here.index)
    if common.signal != "eeg":
        return every
    same = here["epochs_used"] == theirs["n_epochs"].reindex(here.index)
    return same if same.mean() >= _LEAST_SHARE_OF_SAME_EPOCHS else every


def _compared(common: _Common, ours: pd.DataFrame, theirs: pd.DataFrame) -> Agreement:
    here = ours[
        (ours["signal"] == common.signal)
        & (ours["channel"] == common.channel)
        & (ours["feature"] == common.feature)
        & (ours["band"].fillna("") == common.band)
    ].set_index("recording")
    there = (theirs[common.column] * _SCALE.get(common.column, 1.0)).reindex(here.index)
    difference = (here["value"] - there).abs() / there.abs()
    # A value that one side lacks is no agreement.
    largest = (
        float("inf")
        if difference.isna().any()
        else float(difference[_comparable(common, here, theirs)].max())
    )
    return Agreement(
        f"{common.feature} {common.band} {common.channel}".replace("  ", " "),
        largest,
        common.allowed,
        common.why,
    )
