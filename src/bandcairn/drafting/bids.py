"""A BIDS dataset: what it states of people, tasks, channels, events and mains is taken over.

References
----------
Pernet C.R. et al. (2019). EEG-BIDS, an extension to the brain imaging data structure for
electroencephalography. Scientific Data 6, 103; specification 1.11 for the eeg and emg datatypes.
"""

from __future__ import annotations

from collections import Counter
from typing import TYPE_CHECKING, Any

from bandcairn.drafting.bids_remarks import remarks_on
from bandcairn.drafting.files import look_inside, unique_names
from bandcairn.drafting.findings import Choice, Findings, FoundRecording, LeftOut
from bandcairn.drafting.inheritance import BidsName, Sidecars
from bandcairn.drafting.raw_file import number, read_raw
from bandcairn.drafting.samples import guess_mains, guess_unit
from bandcairn.recordings import SUFFIXES
from bandcairn.study.tables import RESULTS_COLUMNS

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping, Sequence
    from pathlib import Path

    from bandcairn.drafting.raw_file import RawFile

DESCRIPTION = "dataset_description.json"
DATATYPES = ("eeg", "emg")

_COLUMN_OF_ENTITY = {
    "ses": "session",
    "task": "task",
    "acq": "acquisition",
    "run": "run",
    "recording": "device",  # the table has a column recording of its own
}
_TAKEN = frozenset({*RESULTS_COLUMNS, "recording", "participant", "file", "start_s", "stop_s"})
# What stands beside a recording without being one.
_BESIDE = (".json", ".tsv", ".tsv.gz", ".fdt", ".vmrk", ".eeg")


def dataset_root(folder: Path) -> Path | None:
    """Return the folder of a BIDS dataset: the one given, or the only one directly below it that is one.

    Parameters
    ----------
    folder : Path
        The study folder.

    Returns
    -------
    Path or None
    """
    if (folder / DESCRIPTION).is_file():
        return folder
    below = [path.parent for path in sorted(folder.glob(f"*/{DESCRIPTION}"))]
    return below[0] if len(below) == 1 else None


def find_in_dataset(
    folder: Path, root: Path, datatype: str | None = None, progress: Callable[[int, int], None] | None = None
) -> Findings:
    """Read a dataset.

    Parameters
    ----------
    folder : Path
        The study folder; files are named relative to it.
    root : Path
        The dataset: `folder`, or a folder below it.
    datatype : str or None
        ``"eeg"`` or ``"emg"``; None for the one with more recordings.
    progress : callable, optional
        Called after each file with the number done and the number of all.

    Returns
    -------
    Findings
        Without recordings where none was found.
    """
    sidecars = Sidecars(root)
    paths, left_out, remarks = _raw_files(folder, root, datatype)
    looked = look_inside(folder, [path.relative_to(folder).as_posix() for path in paths], progress)
    left_out += [found for found in looked.values() if isinstance(found, LeftOut)]
    raws = [
        read_raw(folder / file, file, found, sidecars)
        for file, found in looked.items()
        if not isinstance(found, LeftOut)
    ]
    people = _participants(root, sidecars)
    columns = _entity_columns(raws)
    added = _participant_columns(people, tuple(columns.values()))
    recordings = _recordings(raws, columns, added, people)
    description = sidecars.json(root / DESCRIPTION)
    remarks += [*remarks_on(raws, people), *sidecars.problems]
    return Findings(
        source="a BIDS dataset",
        title=_title(folder, description),
        recordings=recordings,
        participants=Choice("participant", "the sub entity of the file names"),
        columns=_column_choices(columns, added),
        mains=_mains(folder, raws, recordings),
        unit=_unit(folder, recordings),
        rate=_rate(raws),
        remarks=tuple(remarks),
        left_out=tuple(left_out),
    )


def _title(folder: Path, description: Mapping[str, Any]) -> Choice:
    name = description.get("Name")
    if isinstance(name, str) and name.strip():
        return Choice(" ".join(name.split()), f"Name in {DESCRIPTION}")
    return Choice(folder.resolve().name or "Study", "name of the folder", guessed=True)


def _raw_files(folder: Path, root: Path, datatype: str | None) -> tuple[list[Path], list[LeftOut], list[str]]:
    """Return the raw files of one datatype, and what is told of the others."""
    by_type = {each: _files_of(root, each) for each in DATATYPES}
    wanted = datatype or max(DATATYPES, key=lambda each: len(by_type[each]))
    other = next(each for each in DATATYPES if each != wanted)
    remarks = []
    if by_type[other]:
        remarks.append(
            f"{len(by_type[other])} files of the datatype {other} are left out: they are recordings of their own, "
            f"and a study's signals must be in every recording. For a study of them, make a folder, put this "
            f"dataset or a link to it inside, and draft that folder with --datatype {other}."
        )
    left_out = []
    paths = []
    for path in by_type[wanted]:
        file, name = path.relative_to(folder).as_posix(), BidsName.of(path.name)
        if name.extension not in SUFFIXES:
            reason = f"the format {name.extension} is not read yet: {', '.join(SUFFIXES)}"
            left_out.append(LeftOut(file, reason, damaged=True))
        elif "split" in name.entities:
            reason = "a part of a recording that is split over several files, which are not joined"
            left_out.append(LeftOut(file, reason, damaged=True))
        else:
            paths.append(path)
    return paths, left_out, remarks


def _files_of(root: Path, datatype: str) -> list[Path]:
    """Return the recordings of a datatype, of any format, in the order of their names."""
    found = [*root.glob(f"sub-*/{datatype}/*"), *root.glob(f"sub-*/ses-*/{datatype}/*")]
    names = [(path, BidsName.of(path.name)) for path in sorted(found) if not path.name.startswith(".")]
    return [path for path, name in names if name.suffix == datatype and name.extension not in _BESIDE]


def _participants(root: Path, sidecars: Sidecars) -> dict[str, dict[str, str]]:
    """Return the rows of participants.tsv by participant."""
    path = root / "participants.tsv"
    rows = sidecars.table(path) if path.is_file() else []
    return {row.get("participant_id", ""): row for row in rows}


def _entity_columns(raws: Sequence[RawFile]) -> dict[str, str]:
    """Return the design columns of the entities that vary, by entity."""
    return {
        entity: column
        for entity, column in _COLUMN_OF_ENTITY.items()
        if len({raw.name.entities.get(entity, "") for raw in raws}) > 1
    }


def _participant_columns(people: Mapping[str, Mapping[str, str]], used: tuple[str, ...]) -> dict[str, str]:
    """Return the design columns of participants.tsv, by their names there."""
    names = next(iter(people.values()), {})
    return {
        name: f"participant_{name}" if name in _TAKEN or name in used else name
        for name in names
        if name and name != "participant_id"
    }


def _recordings(
    raws: Sequence[RawFile],
    columns: Mapping[str, str],
    added: Mapping[str, str],
    people: Mapping[str, Mapping[str, str]],
) -> tuple[FoundRecording, ...]:
    names = unique_names({raw.file: raw.path.name.partition(".")[0].rpartition("_")[0] for raw in raws})
    recordings = []
    for raw in raws:
        person = people.get(raw.participant, {})
        design = {column: raw.name.entities.get(entity, "") for entity, column in columns.items()}
        design |= {column: person.get(name, "") for name, column in added.items()}
        segments = raw.stretches.segments
        recordings.append(
            FoundRecording(names[raw.file], raw.participant, raw.file, design, raw.channels, segments)
        )
    return tuple(recordings)


def _column_choices(columns: Mapping[str, str], added: Mapping[str, str]) -> dict[str, Choice]:
    choices = {column: Choice(column, f"the {entity} entity") for entity, column in columns.items()}
    for name, column in added.items():
        choices[column] = Choice(
            column, "participants.tsv" if name == column else f"{name} in participants.tsv"
        )
    return choices


def _mains(folder: Path, raws: Sequence[RawFile], recordings: Sequence[FoundRecording]) -> Choice:
    """Return what the dataset states; where it states nothing, what the samples suggest."""
    stated = Counter(number(raw.sidecar.get("PowerLineFrequency")) for raw in raws)
    silent = stated.pop(None, 0)
    if not stated:
        return guess_mains(folder, recordings)
    told = ", ".join(f"{value:g} Hz in {count}" for value, count in stated.items())
    value = next(iter(stated))
    if len(stated) > 1:
        why = f"50 or 60; the dataset states {told} recordings, and a study has one: make a study of each"
        return Choice(None, why)
    if value not in (50, 60):
        return Choice(None, f"50 or 60; the dataset states {value:g} Hz")
    some = f", for {stated[value]} of {len(raws)} recordings" if silent else ""
    return Choice(f"{value:g}", f"PowerLineFrequency in the JSON files{some}")


def _unit(folder: Path, recordings: Sequence[FoundRecording]) -> Choice | None:
    lacking = [one for one in recordings if any(each.kind and each.unit is None for each in one.channels)]
    return guess_unit(folder, lacking) if lacking else None


def _rate(raws: Sequence[RawFile]) -> Choice | None:
    lacking = [raw for raw in raws if any(each.kind and each.rate_hz is None for each in raw.channels)]
    if not lacking:
        return None
    stated = {number(raw.sidecar.get("SamplingFrequency")) for raw in lacking}
    rate_hz = next(iter(stated))
    if len(stated) > 1 or rate_hz is None:
        return Choice(None, "samples a second; the dataset states none, or several")
    return Choice(f"{rate_hz:g}", "SamplingFrequency in the JSON files")
