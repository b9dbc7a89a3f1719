"""Planning stays light: what is not needed to plan is not loaded, whichever way the command comes in."""

from __future__ import annotations

import json
import shutil
import subprocess
import sys
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

HEAVY = ("scipy", "mne", "pandas", "snakemake", "plotly", "matplotlib")
TABLES = ("numpy", "pyarrow")  # needed to read the ledger, when something is missing


def loaded_by(*arguments: str) -> set[str]:
    """Run a command in a fresh interpreter and return which large packages it has loaded."""
    script = (
        "import json, sys\n"
        "from bandcairn.cli.app import exit_code_of\n"
        f"code = exit_code_of({list(arguments)!r})\n"
        "print(json.dumps({'code': code, 'loaded': sorted({name.split('.')[0] for name in sys.modules})}))"
    )
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    told: dict[str, Any] = json.loads(done.stdout.splitlines()[-1])
    assert told["code"] == 0, done.stderr
    return set(told["loaded"]).intersection(HEAVY + TABLES)


def test_planning_a_finished_study_loads_no_numerical_library(finished_study: Path) -> None:
    """To say that nothing is to be done takes neither arrays nor tables."""
    assert loaded_by("plan", str(finished_study)) == set()


def test_running_a_finished_study_loads_no_numerical_library(finished_study: Path) -> None:
    """The second run of a study is over before the engine would have been imported."""
    assert loaded_by("run", str(finished_study)) == set()


def test_explaining_a_change_loads_tables_alone(
    finished_study: Path, tmp_path: Path, edit_study: Callable[[Path, str, str], None]
) -> None:
    """Why nodes would run is read from the ledger; nothing is computed."""
    changed = tmp_path / "study"
    shutil.copytree(finished_study, changed)
    edit_study(changed, "cutoff_hz: 400", "cutoff_hz: 350")
    assert loaded_by("plan", str(changed)) <= set(TABLES)
