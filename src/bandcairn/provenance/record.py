"""The record of one node: its recipe, and where and when it was carried out."""

from __future__ import annotations

import json
import platform
import resource
import sys
from datetime import UTC, datetime
from functools import cache
from importlib.metadata import PackageNotFoundError, version
from typing import TYPE_CHECKING, Any

from bandcairn.nodes.catalogue import VERSIONS

if TYPE_CHECKING:
    from bandcairn.nodes.node import Node

# The packages whose code may touch a number. Recorded, never keyed: bits differ between processors anyway.
_PACKAGES = ("bandcairn", "numpy", "scipy", "pyarrow", "pandas", "edfio", "mne", "snakemake")


def make_record(node: Node, started: datetime, seconds: float) -> dict[str, Any]:
    """Return the provenance record of a node that has just been computed.

    Parameters
    ----------
    node : Node
        The node.
    started : datetime
        When its step began, in UTC.
    seconds : float
        How long the step took.

    Returns
    -------
    dict
        JSON; the store adds the data digest.
    """
    return {
        "key": node.key,
        "step": node.step,
        "recording": node.recording,
        "signal": node.signal,
        "step_version": VERSIONS[node.step],
        "parameters": json.loads(node.parameters),
        "parents": dict(node.parents),
        "raw": list(node.raw),
        "software": software(),
        "started": started.isoformat(timespec="milliseconds"),
        "seconds": round(seconds, 6),
        "peak_memory_mb": peak_memory_mb(),
    }


def now() -> datetime:
    """Return the present moment in UTC."""
    return datetime.now(UTC)


@cache
def software() -> dict[str, str]:
    """Return the versions of everything whose code may touch a number."""
    versions = {"python": platform.python_version()}
    for package in _PACKAGES:
        try:
            versions[package] = version(package)
        except PackageNotFoundError:
            continue
    return versions


def peak_memory_mb() -> float:
    """Return the peak memory of this process so far, in megabytes (10^6 bytes)."""
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    bytes_per_unit = 1 if sys.platform == "darwin" else 1024
    return round(peak * bytes_per_unit / 1e6, 1)
