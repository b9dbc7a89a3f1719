"""What went wrong on watch: the faults that a careful chain finds by itself."""

from __future__ import annotations

from dataclasses import dataclass

CLIPPED, FLAT, MILLIVOLT = "clipped", "flat", "stored in mV"
CLIP_LIMIT_UV = 400.0


@dataclass(frozen=True, slots=True)
class Fault:
    """One planted fault.

    Attributes
    ----------
    recording, channel : str
        Where; the channel is ``"EEG"`` if all four are meant.
    kind : str
        `CLIPPED`, `FLAT` or `MILLIVOLT`.
    excludes : bool
        Whether the channel must drop out of the study.
    story : str
        What happened and what should come of it.
    """

    recording: str
    channel: str
    kind: str
    excludes: bool
    story: str


FAULTS = (
    Fault(
        recording="W05_night",
        channel="EMG",
        kind=CLIPPED,
        excludes=True,
        story="The gain was set too high: the amplifier saturates at 400 uV, the limit in the file's header. "
        "More than 1 % of the samples stand at it, so the channel is excluded.",
    ),
    Fault(
        recording="W09_day",
        channel="Cz",
        kind=FLAT,
        excludes=True,
        story="The electrode came off before the start: one value throughout, so the channel is excluded.",
    ),
    Fault(
        recording="W07_night",
        channel="EEG",
        kind=MILLIVOLT,
        excludes=False,
        story="Exported in mV, as the header says: the values in uV are those of any other recording.",
    ),
)

# Exported as text with one clock for all channels, as some recorders do.
DELIMITED = ("W03_day", "W08_night")


def has_fault(recording: str, channel: str, kind: str) -> bool:
    """Return whether a channel of a recording has a fault of a kind."""
    return any((fault.recording, fault.channel, fault.kind) == (recording, channel, kind) for fault in FAULTS)


def is_excluded(recording: str, channel: str) -> bool:
    """Return whether a channel of a recording must drop out of the study."""
    return any(
        fault.excludes and (fault.recording, fault.channel) == (recording, channel) for fault in FAULTS
    )
