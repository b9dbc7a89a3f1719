"""One thread for products of matrices, whoever has loaded the libraries before."""

from __future__ import annotations

import os
import subprocess
import sys
from types import SimpleNamespace

import pytest

from bandcairn.execution.threads import ONE_THREAD, hold_to_one_thread
from bandcairn.execution.wiring import start_jobs_freely


def test_libraries_that_are_loaded_already_are_held_to_one_thread() -> None:
    """Plain Snakemake loads numpy before the Snakefile is read: variables alone come too late."""
    program = (
        "import numpy as np\n"
        "from threadpoolctl import threadpool_info\n"
        "from bandcairn.execution.threads import hold_to_one_thread\n"
        "hold_to_one_thread()\n"
        "pools = [pool['num_threads'] for pool in threadpool_info() if pool['user_api'] == 'blas']\n"
        "assert pools and set(pools) == {1}, pools\n"
    )
    environment = {name: value for name, value in os.environ.items() if name not in ONE_THREAD}
    environment["OPENBLAS_NUM_THREADS"] = "2"

    assert subprocess.run([sys.executable, "-c", program], env=environment, check=False).returncode == 0


def test_libraries_that_are_loaded_later_are_held_by_variables(monkeypatch: pytest.MonkeyPatch) -> None:
    """A user's own setting gives way: digests must not depend on it."""
    for name in ONE_THREAD:
        monkeypatch.setenv(name, "8")

    hold_to_one_thread()

    assert {name: os.environ[name] for name in ONE_THREAD} == ONE_THREAD


def test_the_limit_of_job_starts_is_taken_away() -> None:
    """Left in place it would set a timer for every look at the jobs."""
    workflow = SimpleNamespace(scheduler=SimpleNamespace(job_rate_limiter=object()))

    start_jobs_freely(workflow)

    assert workflow.scheduler.job_rate_limiter is None


@pytest.mark.parametrize("workflow", [SimpleNamespace(), SimpleNamespace(scheduler=None)])
def test_an_engine_without_that_limit_is_left_alone(workflow: SimpleNamespace) -> None:
    """Its inner parts may change with any version."""
    start_jobs_freely(workflow)
