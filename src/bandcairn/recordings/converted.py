"""FIF and BrainVision files, through a general library that hands out volts.

Both formats hold one rate for all channels, so nothing is brought to another rate on reading; EDF and BDF, where
that library would bring slower channels to the highest rate, never come here.
"""

from __future__ import annotations

import configparser
import itertools
import struct
from contextlib import contextmanager
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING, Any

from bandcairn.errors import RecordingError, UnknownUnitError
from bandcairn.recordings.brainvision import read_brainvision
from bandcairn.recordings.raw import RawSignal, counted_from_zero, cut
from bandcairn.recordings.refusal import refusal, unreadable
from bandcairn.signal import Annotation, ChannelFacts, FileDetails, FileFacts, Gap, Run

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

    import numpy as np
    from numpy.typing import NDArray

CONVERTED_SUFFIXES = (".fif", ".vhdr")
_VOLT = 107  # FIFF_UNIT_V
_MICROVOLTS_PER_VOLT = 1e6
_SKIP = "BAD_ACQ_SKIP"  # filler where a FIF file holds no samples
# What the library's parts raise on files that are not what their suffix says.
_FAULTS: tuple[type[Exception], ...] = (
    ArithmeticError,
    AssertionError,
    AttributeError,
    EOFError,
    LookupError,
    RuntimeError,
    TypeError,
    ValueError,
    configparser.Error,
    struct.error,
    Warning,  # where warnings are errors
)
_JOINS = ("BAD boundary", "EDGE boundary")
_BLOCK_VALUES = 1 << 21  # 16 MiB of doubles at once


@dataclass(frozen=True, slots=True)
class Piece:
    """A gap-free stretch of the library's samples: half-open range and true start."""

    first: int
    stop: int
    start_s: Fraction


@dataclass(frozen=True, slots=True)
class Converted:
    """An opened file.

    Attributes
    ----------
    path : Path
        Named in refusals.
    raw : mne.io.BaseRaw
        The library's own object; no samples in memory.
    rate_hz : Fraction
        Exactly as stored.
    pieces : tuple of Piece
        In order.
    annotations : tuple of Annotation
        In true time.
    labels, left_out : tuple of str
        Channels, and trigger channels.
    details : FileDetails
        How the file was read.
    """

    path: Path
    raw: Any
    rate_hz: Fraction
    pieces: tuple[Piece, ...]
    annotations: tuple[Annotation, ...]
    labels: tuple[str, ...]
    details: FileDetails

    @property
    def runs(self) -> tuple[Run, ...]:
        """The pieces, with samples counted as if there were nothing between them."""
        stops = itertools.accumulate(piece.stop - piece.first for piece in self.pieces)
        pairs = zip(self.pieces, stops, strict=True)
        return tuple(Run(stop - (piece.stop - piece.first), stop, piece.start_s) for piece, stop in pairs)

    def unit(self, label: str) -> str:
        """Return ``"V"``, or the library's number of a unit that is no voltage."""
        unit = int(self.raw.info["chs"][self.raw.ch_names.index(label)]["unit"])
        return "V" if unit == _VOLT else f"unit {unit} of FIF"

    def each_block(self, labels: tuple[str, ...]) -> Iterator[NDArray[np.float64]]:
        """Yield the samples of channels in volt, shape (n_channels, n_samples of the block), gaps left out."""
        picks = [self.raw.ch_names.index(label) for label in labels]
        step = max(1, _BLOCK_VALUES // max(1, len(self.raw.ch_names)))
        for piece in self.pieces:
            for first in range(piece.first, piece.stop, step):
                with _faults_told(self.path):
                    block = self.raw[picks, first : min(first + step, piece.stop)][0]
                yield block


def open_converted(path: Path) -> Converted:
    """Open a FIF or BrainVision file; its samples stay on disk.

    Raises
    ------
    RecordingError
        If the library cannot read it, or if the length of a gap cannot be told.
    """
    with _faults_told(path):
        return _understood(path, _opened(path))


def _understood(path: Path, raw: Any) -> Converted:  # noqa: ANN401
    header = read_brainvision(path) if path.suffix.lower() == ".vhdr" else None
    if len(raw.filenames) > 1:
        remedy = "Join the parts into one file."
        raise refusal(path, f"a file in {len(raw.filenames)} parts", "a single file", remedy)
    rate_hz = header.rate_hz if header else Fraction(float(raw.info["sfreq"]))
    pieces = _segments(path, raw, header.starts, rate_hz) if header else _kept(path, raw, rate_hz)
    kinds = raw.get_channel_types()
    markers = tuple(name for name, kind in zip(raw.ch_names, kinds, strict=True) if kind == "stim")
    date = raw.info["meas_date"]
    details = FileDetails(
        format="BrainVision" if header else "FIF",
        encoding=header.encoding if header else "",
        start=header.start if header else "" if date is None else date.isoformat(),
        left_out=markers,
    )
    labels = tuple(name for name in raw.ch_names if name not in markers)
    return Converted(path, raw, rate_hz, pieces, _annotations(raw, pieces, rate_hz), labels, details)


def inspect_converted(path: Path) -> FileFacts:
    """Return what a file says of itself; samples are not read."""
    file = open_converted(path)
    ends_s = [run.start_s + run.n_samples / file.rate_hz for run in file.runs]
    n_samples = file.runs[-1].stop
    return FileFacts(
        channels=tuple(
            ChannelFacts(label, file.rate_hz, file.unit(label), n_samples) for label in file.labels
        ),
        annotations=file.annotations,
        duration_s=ends_s[-1],
        gaps=tuple(Gap(end_s, run.start_s) for end_s, run in zip(ends_s, file.runs[1:], strict=False)),
        details=file.details,
    )


def read_converted(
    path: Path, labels: tuple[str, ...], start_s: float | None, stop_s: float | None
) -> RawSignal:
    """Read channels in volt, with the factor to microvolt beside them."""
    import numpy as np

    file = open_converted(path)
    for label in labels:
        _check_channel(file, label)
    runs = cut(path, file.runs, file.rate_hz, start_s, stop_s)
    whole = np.empty((len(labels), file.runs[-1].stop))
    done = 0
    for block in file.each_block(labels):
        whole[:, done : done + block.shape[1]] = block
        done += block.shape[1]
    samples = whole[:, runs[0].first : runs[-1].stop]
    if not np.isfinite(samples).all():
        raise refusal(path, "a sample that is not finite", "finite numbers", "Restore the original file.")
    return RawSignal(
        labels=labels,
        rate_hz=file.rate_hz,
        samples=tuple(np.ascontiguousarray(row) for row in samples),
        gain_uv=(_MICROVOLTS_PER_VOLT,) * len(labels),
        offset_uv=(0.0,) * len(labels),
        runs=counted_from_zero(runs),
    )


def _check_channel(file: Converted, label: str) -> None:
    if label in file.details.left_out:
        found = f"{label}, which holds triggers"
        raise refusal(file.path, found, "a channel of voltages", "Correct `channels` in study.yaml.")
    if label not in file.labels:
        names = ", ".join(file.labels)
        raise refusal(
            file.path, f"no channel {label}", f"one of {names}", "Correct `channels` in study.yaml."
        )
    if file.unit(label) != "V":
        remedy = "Export it with its unit: a wrong scale is worse than no data."
        found = f"channel {label} in {file.unit(label)}"
        raise UnknownUnitError(str(refusal(file.path, found, "a voltage", remedy)))


def _opened(path: Path) -> Any:  # noqa: ANN401 - the library has no types
    import mne

    reader = mne.io.read_raw_brainvision if path.suffix.lower() == ".vhdr" else mne.io.read_raw_fif
    return reader(path, preload=False, verbose="error")


@contextmanager
def _faults_told(path: Path) -> Iterator[None]:
    """Turn what the library raises on a damaged file into a refusal."""
    try:
        yield
    except RecordingError:
        raise
    except OSError as error:
        raise unreadable(path, error) from error
    except Exception as error:
        # On data of an unknown kind the library raises the bare class.
        if type(error) is Exception or isinstance(error, _FAULTS):
            told = str(error).splitlines()[0][:200] if str(error) else type(error).__name__
            remedy = "Restore the original file, or export it as EDF."
            raise refusal(
                path, f"a file that cannot be read ({told})", "a whole recording", remedy
            ) from error
        raise


def _kept(path: Path, raw: Any, rate_hz: Fraction) -> tuple[Piece, ...]:  # noqa: ANN401
    """Return what the fillers of a FIF file leave; refused where two recordings were joined."""
    joins = [text for text in raw.annotations.description if text in _JOINS]
    if joins:
        remedy = (
            "Use the recordings as they were before they were joined: how long the gap is cannot be told."
        )
        raise refusal(path, f"a join ({joins[0]})", "one recording a file", remedy)
    first, pieces = 0, []
    for note in sorted(raw.annotations, key=lambda note: float(note["onset"])):
        if note["description"] == _SKIP:
            start = round((note["onset"] - raw.first_time) * float(rate_hz))
            pieces.append((first, start))
            first = start + round(note["duration"] * float(rate_hz))
    pieces.append((first, int(raw.n_times)))
    return tuple(Piece(first, stop, first / rate_hz) for first, stop in pieces if stop > first)


def _segments(
    path: Path,
    raw: Any,  # noqa: ANN401
    starts: tuple[tuple[int, Fraction], ...],
    rate_hz: Fraction,
) -> tuple[Piece, ...]:
    """Return the segments of a BrainVision file at the times of their dates."""
    n_samples = int(raw.n_times)
    stops = [*(first for first, _ in starts[1:]), n_samples]
    pieces: list[Piece] = []
    for (first, start_s), stop in zip(starts, stops, strict=True):
        if not first < stop <= n_samples:
            at = stop if stop > n_samples else first
            found = f"a new segment at sample {at + 1} of {n_samples}"
            raise refusal(path, found, "segments in order", "Restore the original file of markers.")
        if pieces:
            end_s = pieces[-1].start_s + (pieces[-1].stop - pieces[-1].first) / rate_hz
            if start_s < end_s - 1 / (2 * rate_hz):
                found = f"a segment that starts at {float(start_s):.6f} s"
                allowed = f"{float(end_s):.6f} s, where the one before ends, or later"
                raise refusal(path, found, allowed, "Restore the original file of markers.")
            start_s = max(start_s, end_s)  # noqa: PLW2901 - dates are rounded to less than half a sample
        pieces.append(Piece(first, stop, start_s))
    return tuple(pieces)


def _annotations(raw: Any, pieces: tuple[Piece, ...], rate_hz: Fraction) -> tuple[Annotation, ...]:  # noqa: ANN401
    """Return the annotations in true time; what only tells of gaps is left out."""
    notes = []
    for note in raw.annotations:
        text = str(note["description"])
        if text and text != _SKIP and not text.startswith("New Segment/"):
            at_s = float(note["onset"]) - float(raw.first_time)
            notes.append(Annotation(_true_time_s(at_s, pieces, rate_hz), float(note["duration"]), text))
    return tuple(sorted(notes, key=lambda item: (item.onset_s, item.duration_s, item.text)))


def _true_time_s(at_s: float, pieces: tuple[Piece, ...], rate_hz: Fraction) -> float:
    """Return when something lies that the library places `at_s` seconds of samples behind the first."""
    sample = at_s * float(rate_hz)
    piece = next((piece for piece in reversed(pieces) if piece.first <= sample + 1e-6), pieces[0])
    return round(float(piece.start_s) + (sample - piece.first) / float(rate_hz), 9)
