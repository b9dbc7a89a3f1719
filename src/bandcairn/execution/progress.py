"""Progress from the jobs to whoever watches: a line of JSON a node, through a pipe the watcher has opened.

Plain Snakemake opens no pipe; then nothing is told.
"""

from __future__ import annotations

import json
import os
from contextlib import suppress
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Callable

    from bandcairn.nodes.node import Node

PIPE_VARIABLE = "BANDCAIRN_PROGRESS_PIPE"


def reporter() -> Callable[[Node, float], None]:
    """Return the function to call after each node."""
    pipe = os.environ.get(PIPE_VARIABLE)
    if pipe is None:
        return lambda *_: None
    descriptor = int(pipe)

    def report(node: Node, seconds: float) -> None:
        # One write below the pipe's atomic size: lines of two threads never mix.
        line = json.dumps({"step": node.step, "recording": node.recording[:80], "seconds": seconds})
        with suppress(BrokenPipeError):  # the watcher is gone; the work goes on
            os.write(descriptor, f"{line}\n".encode())

    return report
