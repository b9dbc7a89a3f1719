"""Look at many files at once: most of the time goes into reading and hashing, outside Python's lock."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor, as_completed
from typing import TYPE_CHECKING

from bandcairn.errors import RecordingError
from bandcairn.recordings.index import Surveyed

if TYPE_CHECKING:
    from collections.abc import Callable, Iterable
    from pathlib import Path

    from bandcairn.recordings.index import RawIndex


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
        Called after each file that was read, with the number done and the number of all, from the calling
        thread.

    Returns
    -------
    dict
        By path, in the order given. A failure of one file leaves the others alone.
    """
    results: dict[Path, Surveyed | RecordingError | None] = {path: index.recall(path, root) for path in paths}
    unknown = [path for path, result in results.items() if result is None]
    n_known = len(results) - len(unknown)
    with ThreadPoolExecutor(max_workers=max(1, workers)) as pool:
        tasks = {pool.submit(_look, path, root, index): path for path in unknown}
        try:
            for n_read, task in enumerate(as_completed(tasks), start=1):
                results[tasks[task]] = task.result()
                if progress:
                    progress(n_known + n_read, len(results))
        finally:
            pool.shutdown(wait=True, cancel_futures=True)
    return {path: result for path, result in results.items() if result is not None}


def _look(path: Path, root: Path, index: RawIndex) -> Surveyed | RecordingError:
    try:
        return Surveyed(facts=index.facts(path, root), content=index.content(path, root))
    except RecordingError as error:
        return error
