"""What the features of all three kinds share: a named value for every channel, or the reason for none."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray


@dataclass(frozen=True, slots=True)
class FeatureValue:
    """One feature of every channel.

    Attributes
    ----------
    feature : str
        Its name: ``"band_power"``.
    band : str
        Name of the band; empty where the feature has none.
    unit : str
        Unit of the values: ``"uV^2"``.
    values : ndarray, shape (n_channels,), float64
        NaN where no value can be given.
    note : tuple of str
        One for each channel: why there is no value, or what must be said beside it; empty otherwise.
    """

    feature: str
    band: str
    unit: str
    values: NDArray[np.float64]
    note: tuple[str, ...]

    def __post_init__(self) -> None:
        if self.values.shape != (len(self.note),):
            raise ValueError(f"{self.feature}: {self.values.shape} values, {len(self.note)} notes")


def notes_where_null(values: NDArray[np.float64], reason: str) -> tuple[str, ...]:
    """Return `reason` for every channel without a value, an empty note for the others."""
    return tuple(reason if missing else "" for missing in np.isnan(values))


def stack_channels(channels: Sequence[tuple[FeatureValue, ...]]) -> tuple[FeatureValue, ...]:
    """Join features that were computed channel by channel.

    Parameters
    ----------
    channels : sequence of tuple of FeatureValue
        The same features in the same order for each, at least one channel.

    Returns
    -------
    tuple of FeatureValue
        The channels in the order given.
    """
    return tuple(
        replace(
            alike[0],
            values=np.concatenate([part.values for part in alike]),
            note=tuple(note for part in alike for note in part.note),
        )
        for alike in zip(*channels, strict=True)
    )
