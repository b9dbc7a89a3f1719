"""What a person should know of a BIDS dataset before computing from it."""

from __future__ import annotations

import math
from collections import Counter
from typing import TYPE_CHECKING

from bandcairn.drafting.raw_file import number
from bandcairn.drafting.stretches import counted
from bandcairn.errors import UnknownUnitError
from bandcairn.units import microvolts_per

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping, Sequence

    from bandcairn.drafting.raw_file import RawFile

# Keys of the JSON files, the values that need no word, and what is said of the others.
_TOLD = (
    ("RecordingType", ("", "continuous"), "stretches may have been cut out before"),
    ("SoftwareFilters", ("", "n/a", "{}"), "the data were filtered before they were stored"),
    ("EEGReference", ("", "n/a"), "channels are used as recorded"),
    ("EMGReference", ("", "n/a"), "channels are used as recorded"),
)


def remarks_on(raws: Sequence[RawFile], people: Mapping[str, Mapping[str, str]]) -> tuple[str, ...]:
    """Return sentences, those that hold for several recordings once.

    Parameters
    ----------
    raws : sequence of RawFile
        The recordings.
    people : Mapping
        Rows of participants.tsv by participant.

    Returns
    -------
    tuple of str
    """
    each = (told for raw in raws for told in (*_of_sidecar(raw), *_of_rates(raw), *_of_channels(raw)))
    events = (told for raw in raws for told in raw.stretches.remarks)
    return (*counted((*each, *events), len(raws), "recordings"), *_of_people(raws, people))


def _of_sidecar(raw: RawFile) -> Iterator[str]:
    for key, silent, consequence in _TOLD:
        value = raw.sidecar.get(key, "")
        text = value if isinstance(value, str) else str(value).replace("'", "")
        if text.lower() not in silent:
            yield f"{key} is {text}: {consequence}"


def _of_rates(raw: RawFile) -> Iterator[str]:
    stated_hz = number(raw.sidecar.get("SamplingFrequency"))
    rates_hz = Counter(float(each.rate_hz) for each in raw.facts.channels if each.rate_hz)
    if stated_hz and rates_hz and not any(_same(stated_hz, rate_hz) for rate_hz in rates_hz):
        found = ", ".join(f"{rate_hz:g} Hz" for rate_hz in sorted(rates_hz))
        yield f"SamplingFrequency is {stated_hz:g} Hz, but the file holds {found}: the file counts"


def _of_channels(raw: RawFile) -> Iterator[str]:
    """Yield where the channels table and the file differ, or the table overrides the dataset's rate."""
    main_hz = number(raw.sidecar.get("SamplingFrequency"))
    for channel in raw.facts.channels:
        row = raw.table.get(channel.label, {})
        rate_hz, own_hz = number(row.get("sampling_frequency")), channel.rate_hz
        if rate_hz and own_hz and not _same(rate_hz, float(own_hz)):
            yield (
                f"sampling_frequency of {channel.label} is {rate_hz:g} Hz in *_channels.tsv, "
                f"but {float(own_hz):g} Hz in the file: the file counts"
            )
        elif rate_hz and main_hz and not _same(rate_hz, main_hz):
            yield f"{channel.label} has a rate of its own, {rate_hz:g} Hz (SamplingFrequency is {main_hz:g} Hz)"
        if row.get("units") and channel.unit and not _same_unit(row["units"], channel.unit):
            yield (
                f"units of {channel.label} are {row['units']} in *_channels.tsv, "
                f"but {channel.unit} in the file: the file counts"
            )
    labels = {channel.label for channel in raw.facts.channels}
    voltages = ("EEG", "ECG", "EMG")
    absent = [
        name
        for name, row in raw.table.items()
        if row.get("type", "").upper() in voltages and name not in labels
    ]
    if absent:
        yield f"*_channels.tsv names {', '.join(absent)}, which the file does not hold"


def _same(one_hz: float, other_hz: float) -> bool:
    return math.isclose(one_hz, other_hz, rel_tol=1e-4)  # both are decimals of limited length


def _same_unit(one: str, other: str) -> bool:
    try:
        return microvolts_per(one) == microvolts_per(other)
    except UnknownUnitError:
        return one == other


def _of_people(raws: Sequence[RawFile], people: Mapping[str, Mapping[str, str]]) -> Iterator[str]:
    seen = dict.fromkeys(raw.participant for raw in raws)
    unknown = [name for name in seen if name not in people]
    if not people:
        yield "No participants.tsv: groups and ages are yours to add, as columns of recordings.csv."
    elif unknown:
        yield f"Not in participants.tsv, so that their cells are blank: {', '.join(unknown)}."
    absent = [name for name in people if name not in seen]
    if absent:
        yield f"In participants.tsv, but without a recording here: {', '.join(absent)}."
