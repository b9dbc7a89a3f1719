"""Group statistics: measured values with their people and levels in, one frozen result out.

Pure numerics, usable alone. People are n: several values of one participant at one level are averaged before
any test.
"""

from __future__ import annotations

from bandcairn.statistics.adjustment import adjust, available_adjustments
from bandcairn.statistics.comparing import compare, compare_table
from bandcairn.statistics.comparison import Comparison
from bandcairn.statistics.descriptives import Description, describe
from bandcairn.statistics.equivalence import equivalence
from bandcairn.statistics.registry import available_tests
from bandcairn.statistics.result import Interval, Result

__all__ = [
    "Comparison",
    "Description",
    "Interval",
    "Result",
    "adjust",
    "available_adjustments",
    "available_tests",
    "compare",
    "compare_table",
    "describe",
    "equivalence",
]
