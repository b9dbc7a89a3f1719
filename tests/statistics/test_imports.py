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
        "people = {'within': list('abab'), 'between': list('abcd')};"
        "tests = {'within': ['paired_t', 'wilcoxon', 'permutation'],"
        " 'between': ['welch_t', 'mann_whitney', 'permutation']};"
        "[compare([1, 2, 4, 9], people[d], list('xxyy'), Comparison(d, 'f', 'x', 'y', t))"
        " for d in tests for t in tests[d]];"
        "print([m for m in ('scipy.stats', 'scipy.optimize') if m in sys.modules])"
    )

    found = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)

    assert found.stdout.strip() == "[]"
