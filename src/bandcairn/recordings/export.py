"""Write recordings, for the demo study and the tests; the bytes depend on the arguments alone."""

from __future__ import annotations

import datetime as dt
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Sequence
    from fractions import Fraction
    from pathlib import Path

    from numpy.typing import NDArray

    from bandcairn.signal import Annotation

_START_DATE = dt.date(2001, 1, 1)


@dataclass(frozen=True, slots=True, eq=False)
class ExportChannel:
    """A channel to write.

    Attributes
    ----------
    label : str
        At most 16 ASCII characters.
    unit : str
        Written as it stands.
    rate_hz : float or Fraction
        Sampling rate.
    samples : ndarray, shape (n_samples,)
        In `unit`.
    physical_range : tuple of float
        Lowest and highest value in `unit`, mapped to the whole digital range. Each must fit into eight
        characters.
    """

    label: str
    unit: str
    rate_hz: float | Fraction
    samples: NDArray[np.float64]
    physical_range: tuple[float, float]


@dataclass(frozen=True, slots=True)
class Person:
    """Identity fields of a header; none of them is part of a content digest."""

    code: str = "X"
    name: str = "X"


def write_edf(
    path: Path,
    channels: Sequence[ExportChannel],
    annotations: Sequence[Annotation] | None = (),
    person: Person = Person(),
    record_s: float | None = None,
) -> None:
    """Write an EDF+ file; plain EDF if `annotations` is None.

    Parameters
    ----------
    path : Path
        Overwritten if it exists.
    channels : sequence of ExportChannel
        Each at its own rate, all equally long in seconds.
    annotations : sequence of Annotation or None
        Onsets from the first sample.
    person : Person
        Identity fields.
    record_s : float or None
        Duration of a data record; None for the shortest whole second that holds whole samples.
    """
    import edfio

    _write(path, edfio.Edf, edfio.EdfSignal, channels, annotations, person, record_s)


def write_bdf(
    path: Path,
    channels: Sequence[ExportChannel],
    annotations: Sequence[Annotation] | None = (),
    person: Person = Person(),
    record_s: float | None = None,
) -> None:
    """Write a BDF+ file; plain BDF if `annotations` is None. Parameters as in `write_edf`."""
    import edfio

    _write(path, edfio.Bdf, edfio.BdfSignal, channels, annotations, person, record_s)


def write_delimited(
    path: Path, names: Sequence[str], columns: Sequence[NDArray[np.float64]], decimals: int = 6
) -> None:
    """Write a header line and one row a sample; tab for ``.tsv``, else comma.

    Parameters
    ----------
    path : Path
        Overwritten if it exists.
    names : sequence of str
        One a column; ``time_s`` for the clock.
    columns : sequence of ndarray, shape (n_samples,)
        In the order of `names`.
    decimals : int
        Digits behind the point.
    """
    separator = "\t" if path.suffix.lower() == ".tsv" else ","
    with path.open("w", encoding="utf-8", newline="") as file:
        file.write(separator.join(names) + "\n")
        np.savetxt(file, np.column_stack(columns), fmt=f"%.{decimals}f", delimiter=separator)


def _write(  # noqa: PLR0917  # what its two callers were given, in the same order
    path: Path,
    container: type,
    signal: type,
    channels: Sequence[ExportChannel],
    annotations: Sequence[Annotation] | None,
    person: Person,
    record_s: float | None,
) -> None:
    import edfio

    notes = None
    if annotations is not None:
        notes = [edfio.EdfAnnotation(one.onset_s, one.duration_s or None, one.text) for one in annotations]
    container(
        [
            signal(
                np.asarray(channel.samples, dtype=np.float64),
                float(channel.rate_hz),
                label=channel.label,
                physical_dimension=channel.unit,
                physical_range=channel.physical_range,
            )
            for channel in channels
        ],
        annotations=notes,
        patient=edfio.Patient(code=person.code, name=person.name),
        recording=edfio.Recording(startdate=_START_DATE),
        starttime=dt.time(0, 0, 0),
        data_record_duration=record_s,
    ).write(path)
