"""Importing the statistics must stay light."""

from __future__ import annotations

import subprocess
import sys


def test_importing_the_statistics_loads_no_scipy_and_no_pandas() -> None:
    """Tests are named while a study is planned, when nothing is computed."""
    code = "import sys, bandcairn.statistics; print([m for m in ('scipy', 'pandas') if m in sys.modules])"

    found = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)

    assert found.stdout.strip() == "[]"


def test_a_comparison_never_loads_the_slow_distributions() -> None:
    """`scipy.stats` costs a second: scipy.special has all that is needed."""
    code = (
        "import sys; from bandcairn.statistics import Comparison, compare;"
        "compare([1, 2, 4, 9], list('abab'), list('xxyy'), Comparison('within', 'f', 'x', 'y', 'paired_t'));"
        "compare([1, 2, 4, 9], list('abcd'), list('xxyy'), Comparison('between', 'f', 'x', 'y', 'welch_t'));"
        "print([m for m in ('scipy.stats', 'scipy.optimize') if m in sys.modules])"
    )

    found = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)

    assert found.stdout.strip() == "[]"
