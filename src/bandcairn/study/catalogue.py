"""The features of each kind of signal: name, unit, and what a question may do with them."""

from __future__ import annotations

from dataclasses import dataclass
from types import MappingProxyType
from typing import TYPE_CHECKING, Literal

if TYPE_CHECKING:
    from collections.abc import Mapping


@dataclass(frozen=True, slots=True)
class Feature:
    """One number that a signal yields.

    Attributes
    ----------
    name : str
        As in the results and in a question.
    unit : str
        As in the results; ``"1"`` for a pure number.
    needs_band : bool
        Whether there is one value a band.
    values : {"share", "positive", "any"}
        Which values can occur: 0 to 1, not below 0, or any. It decides which scales a question may use.
    """

    name: str
    unit: str
    needs_band: bool = False
    values: Literal["share", "positive", "any"] = "positive"


FEATURES: Mapping[str, tuple[Feature, ...]] = MappingProxyType(
    {
        "eeg": (
            Feature("band_power", "uV^2", needs_band=True),
            Feature("relative_band_power", "1", needs_band=True, values="share"),
            Feature("total_power", "uV^2"),
            Feature("spectral_edge_95", "Hz"),
        ),
        "ecg": (
            Feature("heart_rate", "1/min"),
            Feature("mean_nn", "ms"),
            Feature("sdnn", "ms"),
            Feature("rmssd", "ms"),
            Feature("pnn50", "%"),
            Feature("beats", "1"),
            Feature("band_power", "ms^2", needs_band=True),
            Feature("total_power", "ms^2"),
            Feature("lf_nu", "%"),
            Feature("hf_nu", "%"),
            Feature("lf_hf_ratio", "1"),
        ),
        "emg": (
            Feature("rms", "uV"),
            Feature("median_frequency", "Hz"),
            Feature("mean_frequency", "Hz"),
            Feature("mean_frequency_slope", "Hz/s", values="any"),
            Feature("median_frequency_slope", "Hz/s", values="any"),
            Feature("median_frequency_slope_percent", "%/s", values="any"),
            Feature("median_frequency_start", "Hz"),
            Feature("median_frequency_end", "Hz"),
            Feature("rms_slope", "uV/s", values="any"),
        ),
    }
)

# Ratios of the low- and high-frequency power of beat intervals: both bands must be declared.
NEEDS_LF_AND_HF = frozenset({"lf_nu", "hf_nu", "lf_hf_ratio"})


def features_of(kind: str) -> tuple[Feature, ...]:
    """Return the features of a kind of signal, in the order of the results.

    Parameters
    ----------
    kind : str
        ``"eeg"``, ``"ecg"`` or ``"emg"``.

    Returns
    -------
    tuple of Feature

    Raises
    ------
    KeyError
        For any other kind.
    """
    return FEATURES[kind]


def find_feature(kind: str, name: str) -> Feature | None:
    """Return the feature `name` of `kind`, or None where that kind has no such feature."""
    return next((feature for feature in FEATURES[kind] if feature.name == name), None)
