"""What passes between the reading of files and the steps: a signal, and what a file says of itself."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterator

    import numpy as np
    from numpy.typing import NDArray


@dataclass(frozen=True, slots=True)
class Run:
    """A stretch of samples without a gap.

    Attributes
    ----------
    first, stop : int
        Half-open range of sample indices.
    start_s : Fraction
        Time of sample `first` in seconds from the start of the file.
    """

    first: int
    stop: int
    start_s: Fraction

    @property
    def n_samples(self) -> int:
        """Number of samples in the run."""
        return self.stop - self.first


@dataclass(frozen=True, slots=True)
class Signal:
    """Channels of one kind, sampled alike.

    Attributes
    ----------
    samples : ndarray, shape (n_channels, n_samples), float64
        Microvolt; read-only and finite.
    rate_hz : Fraction
        Sampling rate, exact.
    channels : tuple of str
        Names, in the order of the rows.
    runs : tuple of Run
        Gap-free runs that tile the samples in order. Nothing is filtered or epoched across two of them.
    """

    samples: NDArray[np.float64]
    rate_hz: Fraction
    channels: tuple[str, ...]
    runs: tuple[Run, ...]

    def __post_init__(self) -> None:
        if self.samples.shape != (len(self.channels), self.runs[-1].stop):
            raise ValueError(f"samples {self.samples.shape} do not fit {self.channels} and {self.runs}")
        self.samples.flags.writeable = False

    def each_run(self) -> Iterator[tuple[Run, NDArray[np.float64]]]:
        """Yield every run with its samples, shape (n_channels, run.n_samples)."""
        for run in self.runs:
            yield run, self.samples[:, run.first : run.stop]


@dataclass(frozen=True, slots=True)
class ChannelFacts:
    """What a file says of one channel, before its samples are read.

    Attributes
    ----------
    label : str
        Name as written in the file, without blanks around it.
    rate_hz : Fraction or None
        Sampling rate; None where the file states none.
    unit : str or None
        Unit as written in the file; None where it states none.
    n_samples : int
        Number of samples.
    prefilter : str or None
        The recorder's filters as written in the file; None where it says nothing of them.
    """

    label: str
    rate_hz: Fraction | None
    unit: str | None
    n_samples: int
    prefilter: str | None = None


@dataclass(frozen=True, slots=True)
class Annotation:
    """A labelled moment or stretch of a file, in seconds from its start."""

    onset_s: float
    duration_s: float
    text: str


@dataclass(frozen=True, slots=True)
class Gap:
    """A time without samples, in seconds from the first sample of the file."""

    start_s: Fraction
    stop_s: Fraction


@dataclass(frozen=True, slots=True)
class Repair:
    """What was found where the size of a file does not fit its header.

    Attributes
    ----------
    n_records_header : int
        Data records that the header claims; -1 where it claims nothing.
    n_records_found : int
        Whole data records that are there; used up to the claim.
    bytes_dropped : int
        Bytes that are not used: a record cut short, or what trails behind the claim.
    """

    n_records_header: int
    n_records_found: int
    bytes_dropped: int

    @property
    def mismatch_share(self) -> Fraction:
        """Share of the claimed records that is missing, or found beyond the claim; 0 where nothing is claimed."""
        if self.n_records_header <= 0:
            return Fraction(0)
        return Fraction(abs(self.n_records_header - self.n_records_found), self.n_records_header)

    def __str__(self) -> str:
        claim = (
            "states no number of data records (-1)"
            if self.n_records_header < 0
            else f"says {self.n_records_header} data records"
        )
        return f"the header {claim}, {self.n_records_found} found, {self.bytes_dropped} bytes dropped"


@dataclass(frozen=True, slots=True)
class FileDetails:
    """How a file was read, for people: no part of any key.

    Attributes
    ----------
    format : str
        ``"EDF"``, ``"BDF"``, ``"delimited"``, ``"Parquet"``, ``"FIF"`` or ``"BrainVision"``; empty if unknown.
    encoding : str
        ``"ASCII"``, ``"UTF-8"`` or ``"Latin-1"``, whichever reads its texts; empty where it holds none.
    start : str
        Local date and time of the start as the file writes them; never interpreted.
    start_offset_s : Fraction
        How long after `start` the first sample lies, exactly as the file writes it.
    layout : str
        Separator and decimal mark of delimited text; empty for other formats.
    left_out : tuple of str
        Labels of annotation, status and trigger channels: never signals.
    """

    format: str = ""
    encoding: str = ""
    start: str = ""
    start_offset_s: Fraction | int = 0
    layout: str = ""
    left_out: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class FileFacts:
    """What a file says of itself.

    Attributes
    ----------
    channels : tuple of ChannelFacts
        Signal channels in the order of the file; annotation, status and trigger channels are left out.
    annotations : tuple of Annotation
        In the order of their onsets.
    duration_s : Fraction or None
        From the first sample to the end of the last, gaps included; None where no rate is stated.
    gaps : tuple of Gap
        Times without samples, in order.
    repair : Repair or None
        What was found where the size of the file does not fit its header; None for a sound file.
    details : FileDetails
        How it was read.
    """

    channels: tuple[ChannelFacts, ...]
    annotations: tuple[Annotation, ...]
    duration_s: Fraction | None = None
    gaps: tuple[Gap, ...] = ()
    repair: Repair | None = None
    details: FileDetails = FileDetails()

    def stretches(self, start_s: float, stop_s: float) -> tuple[tuple[float, float], ...]:
        """Return what the gaps leave of the time from `start_s` to `stop_s`, as starts and stops in seconds."""
        found = []
        for gap in self.gaps:
            if start_s < gap.stop_s and gap.start_s < stop_s:
                if start_s < gap.start_s:
                    found.append((start_s, float(gap.start_s)))
                start_s = float(gap.stop_s)
        return (*found, (start_s, stop_s)) if start_s < stop_s else tuple(found)
