"""What passes between the reading of files and the steps: a signal, and what a file says of itself."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterator
    from fractions import Fraction

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
    """

    label: str
    rate_hz: Fraction | None
    unit: str | None
    n_samples: int


@dataclass(frozen=True, slots=True)
class Annotation:
    """A labelled moment or stretch of a file, in seconds from its start."""

    onset_s: float
    duration_s: float
    text: str


@dataclass(frozen=True, slots=True)
class FileFacts:
    """What a file says of itself.

    Attributes
    ----------
    channels : tuple of ChannelFacts
        Signal channels in the order of the file; annotation and status channels are left out.
    annotations : tuple of Annotation
        In the order of their onsets.
    """

    channels: tuple[ChannelFacts, ...]
    annotations: tuple[Annotation, ...]
