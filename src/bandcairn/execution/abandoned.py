"""What runs that were killed have left half-written."""

from __future__ import annotations

import os
import re
import time
from pathlib import Path
from typing import TYPE_CHECKING

from bandcairn.execution.wiring import RECEIPTS
from bandcairn.nodes.survey import INDEX_NAME
from bandcairn.provenance.hygiene import Leftover

if TYPE_CHECKING:
    from collections.abc import Iterator

    from bandcairn.execution.project import Project

# Process numbers as they stand in the names of temporary files and of folders of receipts.
_OF_FILE = re.compile(r"\.(\d+)(-\d+)?\.tmp$")
_OF_RECEIPT = re.compile(r"^[0-9a-f]+-(\d+)$")
# A file without a process number in its name is written in far less than this.
_WRITTEN_WITHIN_S = 60


def abandoned_files(project: Project) -> tuple[Leftover, ...]:
    """Return the temporary files of a study whose process is gone, outside the folders of the steps."""
    return tuple(Leftover(path, path.stat().st_size) for path in _candidates(project) if not in_use(path))


def in_use(path: Path) -> bool:
    """Tell whether a temporary file belongs to a process that lives, as far as this machine can know."""
    numbers = [_OF_FILE.search(path.name), *(_OF_RECEIPT.search(part) for part in path.parts)]
    found = next((number for number in numbers if number), None)
    if found is not None:
        return _lives(int(found[1]))
    is_node = path.name.endswith(".parquet") and not path.name.startswith(".")
    return not is_node and time.time() - path.stat().st_mtime < _WRITTEN_WITHIN_S


def _candidates(project: Project) -> Iterator[Path]:
    yield from sorted(project.results_folder.glob(".*.tmp"))
    yield from sorted(project.store_folder.glob(f".{INDEX_NAME}.*"))
    yield from (path for path in sorted((project.folder / RECEIPTS).rglob("*")) if path.is_file())


def _lives(process: int) -> bool:
    try:
        os.kill(process, 0)
    except ProcessLookupError:
        return False
    except PermissionError:
        return True
    return not _is_zombie(process)


def _is_zombie(process: int) -> bool:
    """Tell whether a process has ended and only waits to be noticed; never, where the system does not say."""
    try:
        status = Path(f"/proc/{process}/stat").read_text("ascii", "replace")
    except OSError:
        return False
    # The state follows the name of the program, which stands in brackets and may hold anything.
    return status.rpartition(")")[2].split()[0] in ("Z", "X")
