"""Which channels make a signal: those of one kind that every recording holds, at rates that go together."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from bandcairn.drafting.findings import KINDS, LeftOut

if TYPE_CHECKING:
    from collections.abc import Sequence
    from fractions import Fraction

    from bandcairn.drafting.findings import FoundChannel, FoundRecording

_NAME_OF_KIND = {"eeg": "eeg", "ecg": "heart", "emg": "muscle"}


@dataclass(frozen=True, slots=True)
class Group:
    """Channels that make one signal.

    Attributes
    ----------
    name : str
        Of the signal.
    kind : str
        One of `KINDS`.
    labels : tuple of str
        In the order of the first file.
    members : tuple of tuple of FoundChannel
        For each label, its channel in every recording that holds it.
    holders : tuple of str
        Names of those recordings, in the same order.
    lacking : tuple of str
        Recordings that do not hold them: with any, the signal cannot be used as it stands.
    """

    name: str
    kind: str
    labels: tuple[str, ...]
    members: tuple[tuple[FoundChannel, ...], ...]
    holders: tuple[str, ...]
    lacking: tuple[str, ...] = ()

    @property
    def channels(self) -> tuple[FoundChannel, ...]:
        """Every channel of every recording."""
        return tuple(channel for members in self.members for channel in members)

    @property
    def rates_hz(self) -> tuple[Fraction, ...]:
        """The different rates, lowest first; those that no file states are left out."""
        return tuple(sorted({channel.rate_hz for channel in self.channels if channel.rate_hz is not None}))


@dataclass(frozen=True, slots=True)
class Grouping:
    """The signals, the recordings that hold them, and what is told of the rest.

    Attributes
    ----------
    recordings : tuple of FoundRecording
        All, or those that have a channel in common.
    groups : tuple of Group
        Those that every recording holds come first.
    left_out : tuple of LeftOut
        Recordings without a channel in common with the others.
    remarks : tuple of str
        Channels that some recordings lack.
    """

    recordings: tuple[FoundRecording, ...]
    groups: tuple[Group, ...]
    left_out: tuple[LeftOut, ...]
    remarks: tuple[str, ...]


def group_channels(recordings: Sequence[FoundRecording]) -> Grouping:
    """Group the channels of recordings.

    Parameters
    ----------
    recordings : sequence of FoundRecording
        At least one.

    Returns
    -------
    Grouping
    """
    kept, left_out = _in_common(recordings)
    kinds = {each.label: each.kind for one in kept for each in reversed(one.channels) if each.kind}
    holders = {label: {one.name for one in kept if _holds(one, label, kind)} for label, kind in kinds.items()}
    ordered = sorted(kinds, key=lambda label: _place(kept, label))
    whole = [label for label in ordered if len(holders[label]) == len(kept)]
    partly = [label for label in ordered if len(kept) > len(holders[label]) >= len(kept) / 2]
    groups = _groups(whole, kinds, kept, ())
    remarks = []
    for kind in KINDS:
        labels = [label for label in partly if kinds[label] == kind]
        if labels and kind not in {group.kind for group in groups}:
            lacking = tuple(
                one.name for one in kept if any(one.name not in holders[label] for label in labels)
            )
            having = [one for one in kept if one.name not in lacking]
            groups += _groups(labels, kinds, having, lacking) if having else []
        else:
            remarks += [_partly(label, kept, holders[label]) for label in labels]
    rare = [label for label in ordered if len(holders[label]) < len(kept) / 2]
    if rare:
        remarks.append(f"In less than half of the recordings, and left out: {', '.join(rare)}.")
    return Grouping(tuple(kept), tuple(groups), tuple(left_out), tuple(remarks))


def _holds(recording: FoundRecording, label: str, kind: str) -> bool:
    channel = recording.channel(label)
    return channel is not None and channel.kind == kind


def _in_common(recordings: Sequence[FoundRecording]) -> tuple[list[FoundRecording], list[LeftOut]]:
    """Return the recordings that share the most widespread channel, and the others."""
    counts: dict[str, int] = {}
    for recording in recordings:
        for label in {each.label for each in recording.channels if each.kind}:
            counts[label] = counts.get(label, 0) + 1
    if not counts:
        return [], [
            LeftOut(one.file, "no EEG, ECG or EMG channel in a unit of voltage") for one in recordings
        ]
    most = max(counts.values())
    shared = min(
        (label for label, count in counts.items() if count == most), key=lambda one: _place(recordings, one)
    )
    kept = [one for one in recordings if one.channel(shared) is not None]
    reason = f"no channel {shared}: a study's signals must be in every recording; draft these as a study of their own"
    return kept, [LeftOut(one.file, reason) for one in recordings if one.channel(shared) is None]


def _place(recordings: Sequence[FoundRecording], label: str) -> tuple[int, int]:
    """Return where a label first stands: number of the recording, number of the channel."""
    for number, recording in enumerate(recordings):
        for place, channel in enumerate(recording.channels):
            if channel.label == label and channel.kind:
                return number, place
    return len(recordings), 0


def _groups(
    labels: Sequence[str],
    kinds: dict[str, str],
    recordings: Sequence[FoundRecording],
    lacking: tuple[str, ...],
) -> list[Group]:
    """Return one group for each kind and, within it, for each way the rates run through the recordings."""
    found: dict[tuple[str, tuple[Fraction | None, ...]], list[tuple[str, tuple[FoundChannel, ...]]]] = {}
    for label in labels:
        members = tuple(channel for one in recordings if (channel := one.channel(label)) is not None)
        key = (kinds[label], tuple(channel.rate_hz for channel in members))
        found.setdefault(key, []).append((label, members))
    numbers = dict.fromkeys(KINDS, 0)
    groups = []
    for (kind, _), entries in sorted(found.items(), key=lambda item: KINDS.index(item[0][0])):
        numbers[kind] += 1
        name = _NAME_OF_KIND[kind] + (f"_{numbers[kind]}" if numbers[kind] > 1 else "")
        names = tuple(label for label, _ in entries)
        channels = tuple(of_label for _, of_label in entries)
        holders = tuple(one.name for one in recordings)
        groups.append(Group(name, kind, names, channels, holders, lacking))
    return groups


def _partly(label: str, kept: Sequence[FoundRecording], holders: set[str]) -> str:
    lacking = [one.name for one in kept if one.name not in holders]
    some = ", ".join(lacking[:3]) + (" ..." if len(lacking) > 3 else "")
    return f"{label} is left out: {len(lacking)} of {len(kept)} recordings lack it ({some})."
