"""A plain folder of files: what they hold is seen, what they mean is guessed from names and samples."""

from __future__ import annotations

import os
from collections import Counter
from pathlib import Path, PurePosixPath
from typing import TYPE_CHECKING

from bandcairn.drafting.filenames import guess_design
from bandcairn.drafting.files import guessed_channels, look_inside, unique_names
from bandcairn.drafting.findings import Choice, Findings, FoundRecording, LeftOut
from bandcairn.drafting.samples import guess_mains, guess_unit
from bandcairn.recordings import SUFFIXES

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Sequence

    from bandcairn.drafting.filenames import DesignGuess
    from bandcairn.drafting.findings import FoundChannel
    from bandcairn.signal import FileFacts

_BESIDE = frozenset(
    {".eeg", ".vmrk", ".fdt"}
)  # the samples and marks of a recording whose header is another file
_NOT_RAW = frozenset({"nodes", "results"})  # what a study computes
_OWN = frozenset({"recordings.csv", "recordings.tsv", "segments.csv", "segments.tsv"})


def find_in_folder(folder: Path, progress: Callable[[int, int], None] | None = None) -> Findings:
    """Look at every recording below a folder.

    Parameters
    ----------
    folder : Path
        The study folder.
    progress : callable, optional
        Called after each file with the number done and the number of all.

    Returns
    -------
    Findings
        Without recordings where none was found.
    """
    files = sorted(_files(folder))
    known = [file for file in files if PurePosixPath(file).suffix.lower() in SUFFIXES]
    looked = look_inside(folder, known, progress)
    left_out = [found for found in looked.values() if isinstance(found, LeftOut)]
    facts = {file: found for file, found in looked.items() if not isinstance(found, LeftOut)}
    channels = {file: guessed_channels(found) for file, found in facts.items()}
    left_out += [LeftOut(file, _nothing_known(own)) for file, own in channels.items() if not _usable(own)]
    channels = {file: own for file, own in channels.items() if _usable(own)}
    design = guess_design([PurePosixPath(file) for file in channels]) if channels else None
    recordings = _recordings(channels, design) if design else ()
    return Findings(
        source="a folder of files",
        title=Choice(folder.resolve().name or "Study", "name of the folder", guessed=True),
        recordings=recordings,
        participants=design.participants_choice if design else Choice(None, "no recording"),
        columns=design.columns if design else {},
        mains=guess_mains(folder, recordings),
        unit=_unit(folder, recordings),
        rate=_rate(recordings),
        annotations=_common_annotations([facts[file] for file in channels]),
        remarks=tuple(_remarks(files, known)),
        left_out=tuple(left_out),
    )


def _files(folder: Path) -> Iterator[str]:
    """Yield the files below a folder, relative to it; hidden ones and what a study computes are passed over."""
    for here, folders, names in os.walk(folder):
        inside = Path(here) == folder
        folders[:] = [
            name for name in folders if not name.startswith(".") and not (inside and name in _NOT_RAW)
        ]
        for name in names:
            if not name.startswith(".") and not (inside and name in _OWN):
                yield (Path(here) / name).relative_to(folder).as_posix()


def _usable(channels: tuple[FoundChannel, ...]) -> bool:
    return any(channel.kind for channel in channels)


def _nothing_known(channels: tuple[FoundChannel, ...]) -> str:
    names = ", ".join(channel.label for channel in channels[:8]) + (" ..." if len(channels) > 8 else "")
    return f"no name of an EEG, ECG or EMG channel among {names}"


def _recordings(
    channels: dict[str, tuple[FoundChannel, ...]], design: DesignGuess
) -> tuple[FoundRecording, ...]:
    names = unique_names({file: PurePosixPath(file).stem for file in channels})
    rows = zip(channels.items(), design.participants, design.values, strict=True)
    return tuple(
        FoundRecording(names[file], participant, file, values, own)
        for (file, own), participant, values in rows
    )


def _unit(folder: Path, recordings: Sequence[FoundRecording]) -> Choice | None:
    lacking = [one for one in recordings if any(each.kind and each.unit is None for each in one.channels)]
    return guess_unit(folder, lacking) if lacking else None


def _rate(recordings: Sequence[FoundRecording]) -> Choice | None:
    lacking = [one for one in recordings if any(each.kind and each.rate_hz is None for each in one.channels)]
    if not lacking:
        return None
    clock = next(
        (c.label for one in lacking for c in one.channels if c.label.lower() in ("time", "t", "seconds")), ""
    )
    hint = f"; {clock} is read as a clock if it is named time_s and counts seconds" if clock else ""
    return Choice(None, f"samples a second of {lacking[0].file} and {len(lacking) - 1} others{hint}")


def _common_annotations(files: Sequence[FileFacts]) -> tuple[str, ...]:
    """Return the texts that mark one stretch in each file."""
    marks = [Counter(note.text for note in facts.annotations if note.duration_s > 0) for facts in files]
    if not marks:
        return ()
    return tuple(text for text in marks[0] if all(counts[text] == 1 for counts in marks))


def _remarks(files: Sequence[str], known: Sequence[str]) -> Iterator[str]:
    suffixes = (PurePosixPath(file).suffix.lower() or "no suffix" for file in sorted({*files} - {*known}))
    others = Counter(suffix for suffix in suffixes if suffix not in _BESIDE)
    if others:
        counted = ", ".join(f"{count} {suffix}" for suffix, count in others.most_common(6))
        yield f"Files of other formats were not looked at: {counted}."
