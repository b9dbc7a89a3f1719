"""What was found in a folder, before anything is proposed."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Mapping
    from fractions import Fraction

KINDS = ("eeg", "ecg", "emg")


@dataclass(frozen=True, slots=True)
class Choice:
    """A value and the reason for it.

    Attributes
    ----------
    value : str or None
        None where only a person can know it.
    why : str
        Where it comes from, or why it is blank.
    guessed : bool
        Whether nothing states it.
    """

    value: str | None
    why: str
    guessed: bool = False


@dataclass(frozen=True, slots=True)
class FoundChannel:
    """One channel of one file.

    Attributes
    ----------
    label : str
        As the file writes it.
    kind : str
        One of `KINDS`, or empty where the channel is of no use here.
    why : str
        What the kind rests on, or why the channel is of no use.
    guessed : bool
        Whether the kind is taken from the name alone.
    rate_hz : Fraction or None
        None where the file states none.
    unit : str or None
        None where the file states none.
    n_samples : int
        Number of samples.
    bad : str or None
        Why the dataset calls the channel bad; None where it does not.
    muscle : str
        The muscle that the dataset names; empty where it names none.
    low_hz, high_hz : float or None
        Pass-band of the recorder where the dataset states it.
    """

    label: str
    kind: str
    why: str
    guessed: bool
    rate_hz: Fraction | None
    unit: str | None
    n_samples: int
    bad: str | None = None
    muscle: str = ""
    low_hz: float | None = None
    high_hz: float | None = None

    @property
    def length_s(self) -> float | None:
        """Length, or None where the rate is not known."""
        return None if self.rate_hz is None else float(self.n_samples / self.rate_hz)


@dataclass(frozen=True, slots=True)
class FoundSegment:
    """A named stretch of a recording."""

    name: str
    start_s: float
    stop_s: float


@dataclass(frozen=True, slots=True)
class FoundRecording:
    """One raw file.

    Attributes
    ----------
    name : str
        Unique.
    participant : str
        Empty where it cannot be told.
    file : str
        Relative to the study folder, with forward slashes.
    design : Mapping of str to str
        Values by design column.
    channels : tuple of FoundChannel
        In the order of the file.
    segments : tuple of FoundSegment
        Stretches for the segments table.
    """

    name: str
    participant: str
    file: str
    design: Mapping[str, str]
    channels: tuple[FoundChannel, ...]
    segments: tuple[FoundSegment, ...] = ()

    def channel(self, label: str) -> FoundChannel | None:
        """Return the usable channel of a name, or None."""
        return next((each for each in self.channels if each.kind and each.label == label), None)

    @property
    def length_s(self) -> float | None:
        """Length of the longest channel, or None where no rate is known."""
        return max((each.length_s for each in self.channels if each.length_s is not None), default=None)


@dataclass(frozen=True, slots=True)
class LeftOut:
    """A file that becomes no recording, and why; `damaged` where it should have been one."""

    file: str
    reason: str
    damaged: bool = False


@dataclass(frozen=True, slots=True)
class Findings:
    """Everything that was found.

    Attributes
    ----------
    source : str
        ``"a BIDS dataset"`` or ``"a folder of files"``.
    title : Choice
        Of the study.
    recordings : tuple of FoundRecording
        In the order of their files.
    participants : Choice
        What the column participant rests on; value None where a person must fill it in.
    columns : Mapping of str to Choice
        What each design column rests on.
    mains : Choice
        ``"50"``, ``"60"`` or None.
    unit, rate : Choice or None
        Of delimited files; None where no file needs the declaration.
    annotations : tuple of str
        Texts of the files' own annotations that mark stretches.
    remarks : tuple of str
        What a person should know.
    left_out : tuple of LeftOut
        Files that become no recording.
    """

    source: str
    title: Choice
    recordings: tuple[FoundRecording, ...]
    participants: Choice
    columns: Mapping[str, Choice]
    mains: Choice
    unit: Choice | None = None
    rate: Choice | None = None
    annotations: tuple[str, ...] = ()
    remarks: tuple[str, ...] = ()
    left_out: tuple[LeftOut, ...] = ()
