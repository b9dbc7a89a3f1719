"""The workflow as the engine sees it."""

from __future__ import annotations

import re
import subprocess
import sys
from pathlib import Path

import pytest

from bandcairn.nodes.catalogue import RECORDING_STEPS

WORKFLOW = Path(__file__).parent.parent.parent / "workflow"
BIN = Path(sys.executable).parent


def test_workflow_passes_the_engines_own_lint(finished_study: Path) -> None:
    """`snakemake --lint` finds nothing to say."""
    command = [str(BIN / "snakemake"), "--snakefile", str(WORKFLOW / "Snakefile")]
    command += ["--directory", str(finished_study), "--lint"]
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stdout + done.stderr
    assert "your workflow is in a good condition" in done.stdout + done.stderr


def test_workflow_is_formatted() -> None:
    """`snakefmt --check` would change nothing."""
    pytest.importorskip("snakefmt", reason="belongs to the extra dev")
    done = subprocess.run(
        [str(BIN / "snakefmt"), "--check", str(WORKFLOW)], capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stdout + done.stderr


def test_every_step_of_the_chain_has_one_short_rule() -> None:
    """One file a step, each with one rule of its name that says in a line what it does; all are included."""
    included = re.findall(
        r'^include: "rules/(\w+)\.smk"$', (WORKFLOW / "Snakefile").read_text("utf-8"), re.MULTILINE
    )
    files = {path.stem: path.read_text("utf-8") for path in (WORKFLOW / "rules").glob("*.smk")}
    assert sorted(included) == sorted(files)
    assert set(RECORDING_STEPS) | {"verdict", "table", "statistics", "results"} == set(files)
    for name, text in files.items():
        assert re.findall(r"^rule (\w+):", text, re.MULTILINE) == [name]
        assert text.startswith("# ")
        assert len(text.splitlines()) <= 12
