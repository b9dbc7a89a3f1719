"""Say beside a feature how much of its range a filter has taken away."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Iterable, Mapping

    from bandcairn.steps.features import FeatureValue

    Range = tuple[float, float]


def note_stop_bands(
    values: tuple[FeatureValue, ...],
    bands_hz: Mapping[str, Range],
    total_hz: Range,
    stop_bands_hz: tuple[Range, ...],
) -> tuple[FeatureValue, ...]:
    """Add a note to every value whose range lies partly in a stop band.

    A feature of a band is judged by its band, any other by the total range: what a notch takes from the total is
    told at the total, not at each share of it.

    Parameters
    ----------
    values : tuple of FeatureValue
        Features of a spectrum.
    bands_hz : mapping of str to (float, float)
        Named bands.
    total_hz : (float, float)
        Range of the features that have no band.
    stop_bands_hz : tuple of (float, float)
        Between the applied -3.01 dB points of band-stops and notches.

    Returns
    -------
    tuple of FeatureValue
        In the same order; a channel without a value keeps its own reason alone.
    """
    return tuple(
        _with_note(value, _told(bands_hz.get(value.band, total_hz), value.band, stop_bands_hz))
        for value in values
    )


def stopped_share(range_hz: Range, stop_bands_hz: Iterable[Range]) -> float:
    """Return the share of a range that lies in the union of stop bands, 0 to 1."""
    low_hz, high_hz = range_hz
    covered_hz, reached_hz = 0.0, low_hz
    for start_hz, stop_hz in sorted(stop_bands_hz):
        start_hz, stop_hz = max(start_hz, reached_hz), min(stop_hz, high_hz)  # noqa: PLW2901 - cut to what is new
        covered_hz += max(0.0, stop_hz - start_hz)
        reached_hz = max(reached_hz, stop_hz)
    return covered_hz / (high_hz - low_hz)


def _told(range_hz: Range, band: str, stop_bands_hz: tuple[Range, ...]) -> str:
    """Return the sentence of a range; empty if no stop band touches it."""
    touching = [stop for stop in stop_bands_hz if stop[0] < range_hz[1] and stop[1] > range_hz[0]]
    if not touching:
        return ""
    share = 100 * stopped_share(range_hz, touching)
    edges = ", ".join(f"{low_hz:.4g}-{high_hz:.4g}" for low_hz, high_hz in touching)
    what = "band" if band else "total range"
    return f"{share:.2g} % of the {what} lies in the stop band{'s' if len(touching) > 1 else ''} {edges} Hz"


def _with_note(value: FeatureValue, told: str) -> FeatureValue:
    if not told:
        return value
    notes = tuple(
        note if missing else "; ".join(filter(None, (note, told)))
        for note, missing in zip(value.note, np.isnan(value.values), strict=True)
    )
    return replace(value, note=notes)
