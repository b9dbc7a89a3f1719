"""Nodes of the study: verdict, table, statistics."""

from __future__ import annotations

from dataclasses import asdict
from typing import TYPE_CHECKING, Any, Literal

import numpy as np

from bandcairn.execution.signal_nodes import QUALITY_UNITS
from bandcairn.store.frame import Frame

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Mapping, Sequence

    from bandcairn.statistics import Result
    from bandcairn.store.frame import Column

VERDICT_COLUMNS = {
    "recording": "text",
    "signal": "text",
    "channel": "text",
    "measure": "text",
    "value": "number",
    "unit": "text",
    "limit": "number",
    "passed": "text",
    "node": "text",
}
# The features of the contract, and the counts of rejected epochs from which the exclusions are told.
TABLE_COLUMNS = {
    "recording": "text",
    "participant": "text",
    "channel": "text",
    "segment": "text",
    "feature": "text",
    "band": "text",
    "value": "number",
    "unit": "text",
    "epochs_used": "count",
    "epochs_total": "count",
    "too_large": "count",
    "too_flat": "count",
    "note": "text",
    "node": "text",
}
# Before the name of a design column, lest it meet a column of the table.
DESIGN = "design/"
STATISTICS_COLUMNS = {
    "question": "text",
    "signal": "text",
    "channel": "text",
    "feature": "text",
    "band": "text",
    "test": "text",
    "term": "text",
    "estimate": "number",
    "estimate_unit": "text",
    "ci_low": "number",
    "ci_high": "number",
    "statistic": "number",
    "df": "number",
    "df2": "number",
    "p": "number",
    "p_adjusted": "number",
    "adjustment": "text",
    "family": "text",
    "family_size": "count",
    "effect_size": "number",
    "effect_size_name": "text",
    "effect_ci_low": "number",
    "effect_ci_high": "number",
    "n_participants": "count",
    "n_observations": "count",
    "status": "text",
    "note": "text",
}


def verdict_node(
    parameters: Mapping[str, Any], parents: Mapping[str, Frame], keys: Mapping[str, str]
) -> Frame:
    """Hold every measured quality against the study's limits: one row a recording, channel and measure."""
    limits = parameters["limits"]
    rows: list[dict[str, Any]] = []
    for role, frame in parents.items():
        for index, channel in enumerate(frame.text("channel")):
            for measure, unit in QUALITY_UNITS.items():
                value, limit = float(frame.numbers(measure)[index]), limits.get(measure)
                rows.append(
                    {
                        "recording": role.removeprefix("quality/"),
                        "signal": parameters["signal"],
                        "channel": channel,
                        "measure": measure,
                        "value": value,
                        "unit": unit,
                        "limit": limit,
                        "passed": None if limit is None else "yes" if value <= limit else "no",
                        "node": keys[role],
                    }
                )
    return _frame(rows, VERDICT_COLUMNS)


def table_node(parameters: Mapping[str, Any], parents: Mapping[str, Frame], keys: Mapping[str, str]) -> Frame:
    """Gather the features of all recordings; a channel beyond a quality limit keeps its row, not its value."""
    failed = _failed_channels(parents["verdict"])
    exclude = parameters["on_failure"] == "exclude"
    rows: list[dict[str, Any]] = []
    for who in parameters["rows"]:
        role = f"features/{who['recording']}"
        told_of = {"recording": who["recording"], "participant": who["participant"], "node": keys[role]}
        told_of |= {f"{DESIGN}{factor}": level for factor, level in who["design"].items()}
        for row in frame_rows(parents[role]):
            told = failed.get((who["recording"], row["channel"]))
            rows.append({**row, **_judged(row, told, exclude=exclude), **told_of})
    design = {f"{DESIGN}{factor}": "text" for factor in parameters["design"]}
    return _frame(rows, TABLE_COLUMNS | design)


def _failed_channels(verdict: Frame) -> dict[tuple[str, str], str]:
    """Return what a channel has failed in, by recording and channel."""
    failed: dict[tuple[str, str], list[str]] = {}
    for row in frame_rows(verdict):
        if row["passed"] == "no":
            told = f"{row['measure']} {row['value']:.3g} is above {row['limit']:g}"
            failed.setdefault((row["recording"], row["channel"]), []).append(told)
    return {place: ", ".join(told) for place, told in failed.items()}


def _judged(row: Mapping[str, Any], told: str | None, *, exclude: bool) -> dict[str, Any]:
    """Return what a failed quality changes in a row of features."""
    if told is None:
        return {}
    if exclude:
        return {"value": None, "epochs_used": 0, "note": f"left out: {told}"}
    return {"note": "; ".join(filter(None, (row["note"], f"kept although {told}")))}


def statistics_node(parameters: Mapping[str, Any], parents: Mapping[str, Frame]) -> Frame:
    """Answer the questions of one family and adjust their p values together."""
    from bandcairn.statistics import adjust

    rows = [
        row
        for question in parameters["questions"]
        for row in _answers(question, frame_rows(parents[f"table/{question['signal']}"]))
    ]
    adjusted = adjust([row["p"] for row in rows], parameters["adjustment"])
    size = sum(row["p"] is not None for row in rows)
    for row, p_adjusted in zip(rows, adjusted, strict=True):
        row |= {"p_adjusted": p_adjusted, "adjustment": parameters["adjustment"]}
        row |= {"family": parameters["family"], "family_size": size}
    return _frame(rows, STATISTICS_COLUMNS)


def _answers(question: Mapping[str, Any], rows: Sequence[Mapping[str, Any]]) -> Iterator[dict[str, Any]]:
    """Yield one answer a channel, or one for the mean of the channels."""
    rows = [
        row
        for row in rows
        if row["feature"] == question["feature"]
        and row["band"] == question.get("band")
        and question.get("segment", row["segment"]) == row["segment"]
    ]
    channels = question["channel_names"]
    groups = [channels] if question["channels"] == "mean" else [[channel] for channel in channels]
    for group in groups:
        result = _compared(question, [row for row in rows if row["channel"] in group], len(group))
        yield {
            **asdict(result),
            "question": question["name"],
            "signal": question["signal"],
            "channel": "mean" if question["channels"] == "mean" else group[0],
            "feature": question["feature"],
            "band": question.get("band"),
        }


def _compared(question: Mapping[str, Any], rows: Sequence[Mapping[str, Any]], n_channels: int) -> Result:
    from bandcairn.statistics import Comparison, compare

    design: Literal["within", "between"] = "within" if "within" in question else "between"
    factor: str = question[design]
    observations = list(_observations(rows, n_channels, factor))
    first, second = question["contrast"]
    comparison = Comparison(
        design=design,
        factor=factor,
        first=first,
        second=second,
        test=question["test"],
        scale=question["scale"],
        confidence=question["confidence"],
        unit=rows[0]["unit"] if rows else "",
    )
    return compare(
        [value for value, _, _ in observations],
        [participant for _, participant, _ in observations],
        [level for _, _, level in observations],
        comparison,
    )


def _observations(
    rows: Sequence[Mapping[str, Any]], n_channels: int, factor: str
) -> Iterator[tuple[float | None, str, str]]:
    """Yield value, participant and level of every recording and segment.

    Several channels are averaged as measured, before any logarithm; one that is missing leaves the mean missing,
    for a mean over other channels is another quantity.
    """
    stretches: dict[tuple[str, str | None], list[Mapping[str, Any]]] = {}
    for row in rows:
        stretches.setdefault((row["recording"], row["segment"]), []).append(row)
    for (_, segment), alike in stretches.items():
        known = [row["value"] for row in alike if row["value"] is not None]
        mean = sum(known) / n_channels if len(known) == n_channels else None
        level = segment if factor == "segment" else alike[0][f"{DESIGN}{factor}"]
        yield mean, alike[0]["participant"], level or ""


def frame_rows(frame: Frame) -> list[dict[str, Any]]:
    """Return the rows of a frame as plain Python values, None for null."""
    columns = {name: _plain(column) for name, column in frame.columns.items()}
    return [dict(zip(columns, values, strict=True)) for values in zip(*columns.values(), strict=True)]


def _plain(column: Any) -> Sequence[Any]:  # noqa: ANN401 - a column of either kind
    if isinstance(column, tuple):
        return column
    values: list[Any] = column.tolist()
    if column.dtype.kind == "f":
        return [None if value != value else value for value in values]  # noqa: PLR0124 - NaN alone differs from itself
    return values


def _frame(rows: Sequence[Mapping[str, Any]], schema: Mapping[str, str]) -> Frame:
    return Frame({name: _COLUMNS[kind]([row[name] for row in rows]) for name, kind in schema.items()})


def _numbers(values: Sequence[float | None]) -> np.ndarray[Any, Any]:
    return np.array([np.nan if value is None else value for value in values], dtype=np.float64)


def _counts(values: Sequence[int]) -> np.ndarray[Any, Any]:
    return np.array(values, dtype=np.int64)


_COLUMNS: dict[str, Callable[[Sequence[Any]], Column]] = {"text": tuple, "number": _numbers, "count": _counts}
