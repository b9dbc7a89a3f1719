"""The answers of a study as lines for a terminal: a question, then a line a channel."""

from __future__ import annotations

from itertools import groupby
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator, Mapping, Sequence

_HEADINGS = ("channel", "estimate", "confidence interval", "n", "p", "p adjusted")


def answer_lines(rows: Iterable[Mapping[str, Any]]) -> Iterator[str]:
    """Yield the lines of a table of answers.

    Parameters
    ----------
    rows : iterable of mapping
        Rows of ``results/statistics``, those of one question together.
    """
    told = [(row, _cells(row)) for row in rows]
    widths = [max(len(cells[column]) for cells in (_HEADINGS, *(c for _, c in told))) for column in range(6)]
    yield f"  {_aligned(_HEADINGS, widths)}"
    for question, answers in groupby(told, key=lambda pair: pair[0]["question"]):
        alike = list(answers)
        unit = alike[0][0]["estimate_unit"]
        yield f"{question}, in {unit}" if unit else question
        for _, cells in alike:
            yield f"  {_aligned(cells, widths)}"


def _aligned(cells: Sequence[str], widths: Sequence[int]) -> str:
    first, *others = zip(cells, widths, strict=True)
    return "   ".join([first[0].ljust(first[1]), *(cell.rjust(width) for cell, width in others)]).rstrip()


def _cells(row: Mapping[str, Any]) -> tuple[str, ...]:
    interval = "" if row["ci_low"] is None else f"[{_short(row['ci_low'])}, {_short(row['ci_high'])}]"
    return (
        row["channel"],
        row["status"] if row["status"] != "ok" else _short(row["estimate"]),
        interval,
        str(row["n_participants"]),
        p_value(row["p"]),
        p_value(row["p_adjusted"]),
    )


def _short(value: float) -> str:
    """Return a number to three significant digits."""
    return f"{value:.3g}"


def p_value(p: float | None) -> str:
    """Return a p value as papers print it: three digits, and never 0."""
    if p is None:
        return ""
    return "< .001" if p < 0.001 else f"{p:.3f}".removeprefix("0")
