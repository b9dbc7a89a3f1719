"""Look at many files at once: most of the time goes into reading and hashing, outside Python's lock."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor, as_completed
from dataclasses import dataclass
from typing import TYPE_CHECKING

from bandcairn.errors import RecordingError

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable
    from pathlib import Path

    from bandcairn.recordings.content import FileContent
    from bandcairn.recordings.index import RawIndex
    from bandcairn.signal import FileFacts


@dataclass(frozen=True, slots=True)
class Surveyed:
    """What a file says of itself, and the digests of its content."""

    facts: FileFacts
    content: FileContent


def survey(
    paths: Iterable[Path],
    root: Path,
    index: RawIndex,
    workers: int = 2,
    progress: Callable[[int, int], None] | None = None,
) -> dict[Path, Surveyed | RecordingError]:
    """Return facts and digests of every file, or why it has none.

    Parameters
    ----------
    paths : iterable of Path
        Files; one that is named twice is looked at once.
    root : Path
        The study folder.
    index : RawIndex
        Asked first and taught; saving it is the caller's.
    workers : int
        Threads that read and hash.
    progress : callable, optional
        Called after each file with the number done and the number of all, from the calling thread.

    Returns
    -------
    dict
        By path, in the order given. A failure of one file leaves the others alone.
    """
    results: dict[Path, Surveyed | RecordingError | None] = dict.fromkeys(paths)
    known = [path for path in results if index.remembers(path, root)]
    for path in known:
        results[path] = _look(path, root, index)
    done = len(known)
    if progress and done:
        progress(done, len(results))
    unknown = [path for path, result in results.items() if result is None]
    with ThreadPoolExecutor(max_workers=max(1, workers)) as pool:
        tasks = {pool.submit(_look, path, root, index): path for path in unknown}
        try:
            for done, task in enumerate(as_completed(tasks), start=done + 1):
                results[tasks[task]] = task.result()
                if progress:
                    progress(done, len(results))
        finally:
            pool.shutdown(wait=True, cancel_futures=True)
    return {path: result for path, result in results.items() if result is not None}


def _look(path: Path, root: Path, index: RawIndex) -> Surveyed | RecordingError:
    try:
        return Surveyed(facts=index.facts(path, root), content=index.content(path, root))
    except RecordingError as error:
        return error
