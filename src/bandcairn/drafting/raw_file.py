"""One raw file of a BIDS dataset with everything that describes it."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

from bandcairn.drafting.files import found_channel
from bandcairn.drafting.findings import KINDS
from bandcairn.drafting.inheritance import BidsName
from bandcairn.drafting.naming import guess_kind
from bandcairn.drafting.stretches import Stretches, stretches_of

if TYPE_CHECKING:
    from collections.abc import Mapping
    from pathlib import Path

    from bandcairn.drafting.findings import FoundChannel
    from bandcairn.drafting.inheritance import Sidecars
    from bandcairn.signal import ChannelFacts, FileFacts


@dataclass(frozen=True, slots=True)
class RawFile:
    """A raw file with what describes it.

    Attributes
    ----------
    file : str
        Relative to the study folder.
    path : Path
        The file.
    name : BidsName
        Its name taken apart.
    facts : FileFacts
        What it says of itself.
    sidecar : Mapping
        The JSON that applies to it, merged.
    table : Mapping
        Rows of the channels table that applies to it, by name of the channel.
    channels : tuple of FoundChannel
        In the order of the file.
    stretches : Stretches
        Of the events table that applies to it.
    """

    file: str
    path: Path
    name: BidsName
    facts: FileFacts
    sidecar: Mapping[str, Any]
    table: Mapping[str, Mapping[str, str]]
    channels: tuple[FoundChannel, ...]
    stretches: Stretches

    @property
    def participant(self) -> str:
        """The participant as participants.tsv writes it."""
        return f"sub-{self.name.entities.get('sub', '')}"


def read_raw(path: Path, file: str, facts: FileFacts, sidecars: Sidecars) -> RawFile:
    """Gather what describes a raw file.

    Parameters
    ----------
    path : Path
        The file.
    file : str
        Its path relative to the study folder.
    facts : FileFacts
        What it says of itself.
    sidecars : Sidecars
        The describing files of the dataset.

    Returns
    -------
    RawFile
    """
    name = BidsName.of(path.name)
    rows = sidecars.nearest(path, "channels")
    stated = {row.get("name", ""): row for row in rows or ()}
    channels = tuple(_channel(each, stated.get(each.label)) for each in facts.channels)
    length_s = max(
        (float(each.n_samples / each.rate_hz) for each in facts.channels if each.rate_hz), default=None
    )
    stretches = stretches_of(sidecars.nearest(path, "events") or [], length_s)
    return RawFile(file, path, name, facts, sidecars.merged(path, name.suffix), stated, channels, stretches)


def _channel(facts: ChannelFacts, stated: Mapping[str, str] | None) -> FoundChannel:
    """Return a channel with what the channels table says of it; its name speaks only where the table is silent."""
    stated_type = (stated or {}).get("type", "").upper()
    if not stated or not stated_type:
        guess = guess_kind(facts.label)
        why = f"{guess.why}; not in *_channels.tsv" if stated is None else guess.why
        return found_channel(facts, guess.kind, why, guessed=True)
    kind = stated_type.lower() if stated_type.lower() in KINDS else ""
    why = "type in *_channels.tsv" if kind else stated_type
    bad = (
        stated.get("status_description") or "no reason given"
        if stated.get("status", "").lower() == "bad"
        else None
    )
    return replace(
        found_channel(facts, kind, why, guessed=False),
        bad=bad,
        muscle=stated.get("target_muscle", "") if kind == "emg" else "",
        low_hz=number(stated.get("low_cutoff")),
        high_hz=number(stated.get("high_cutoff")),
    )


def number(text: object) -> float | None:
    """Return a positive finite number, or None where there is none."""
    try:
        value = float(str(text))
    except ValueError:
        return None
    return value if math.isfinite(value) and value > 0 else None
