"""The benchmark runs: a trial of its smallest size. No time is judged, for a test must not depend on the machine."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

SIDE_BY_SIDE = Path(__file__).parent.parent / "reference_checks" / "benchmarks" / "side_by_side.py"
ARMS = (
    "script, one core",
    "script, all cores",
    "bandcairn, one core",
    "bandcairn, all cores",
    "filter edit, all cores",
    "nothing to do",
)
TARGETS = (
    "cold, all cores / script, one core",
    "cold, all cores / script, all cores",
    "filter edit, all cores / script, one core",
    "bytes of nodes / bytes of raw files",
    "peak memory of a cold run, GB",
    "overhead a recording, bandcairn, one core",
    "overhead a recording, bandcairn, all cores",
    "scaling from 1 to",
    "nothing to do, 10 recordings x 3 signals, 227 nodes, wall s",
)


@pytest.fixture(scope="module")
def printed(tmp_path_factory: pytest.TempPathFactory) -> list[str]:
    """Lines that one round on four recordings of one minute prints."""
    for package in ("joblib", "statsmodels", "mne"):
        pytest.importorskip(package, reason="the script it is compared with needs it")
    size = ["--recordings", "4", "--minutes", "1", "--rounds", "1", "--plan-recordings", "10"]
    folder = tmp_path_factory.mktemp("benchmark")
    command = [sys.executable, str(SIDE_BY_SIDE), *size, "--folder", str(folder)]
    return subprocess.run(command, check=True, capture_output=True, text=True).stdout.splitlines()


@pytest.mark.parametrize("row", [*ARMS, *TARGETS])
def test_every_row_is_printed_with_a_number(printed: list[str], row: str) -> None:
    """A reader finds each arm, each target of the design and the overhead."""
    told = [line.removeprefix(row) for line in printed if line.startswith(row)]
    assert told, f"no row {row!r} in {printed}"
    assert any(character.isdigit() for character in told[0])


def test_both_sides_agree_where_they_define_a_value_alike(printed: list[str]) -> None:
    """Times are compared of equal work only."""
    agreed = [line for line in printed if " holds: " in line]
    assert len(agreed) == 9, printed
    assert not [line for line in printed if "DIFFERS" in line]
