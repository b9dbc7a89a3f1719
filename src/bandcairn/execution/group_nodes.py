"""Nodes of the study: table, statistics."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from typing import TYPE_CHECKING, Any, Literal

import numpy as np

from bandcairn.execution.epoch_nodes import EPOCH_COUNTS
from bandcairn.execution.through_reference import OF_REFERENCE, failures_behind
from bandcairn.store.frame import Frame

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Mapping, Sequence

    from bandcairn.statistics import Comparison, Result
    from bandcairn.store.frame import Column

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
    **dict.fromkeys(EPOCH_COUNTS, "count"),
    "note": "text",
    "node": "text",
}
# Measures of a range of frequencies rather than of a channel.
OF_BANDS = ("quantisation_margin_db", "beyond_recorder_share", "recorder_loss_db")
# Features that a rounded time of a beat leaves alone.
_BLIND_TO_TIMING = ("heart_rate", "mean_nn", "beats", "beats_corrected")
# Beyond this ratio of epochs two levels are called uneven: common practice, without a source.
_UNEVEN = 2
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


def table_node(parameters: Mapping[str, Any], parents: Mapping[str, Frame], keys: Mapping[str, str]) -> Frame:
    """Gather the features of all recordings; what lies beyond a quality limit keeps its row, not its value."""
    failures = _failures(parents["verdict"])
    exclude = {
        "channel": parameters["on_failure"] == "exclude",
        "band": parameters["on_band_failure"] == "exclude",
    }
    rows: list[dict[str, Any]] = []
    for who in parameters["rows"]:
        role = f"features/{who['recording']}"
        told_of = {"recording": who["recording"], "participant": who["participant"], "node": keys[role]}
        told_of |= {f"{DESIGN}{factor}": level for factor, level in who["design"].items()}
        for row in frame_rows(parents[role]):
            failed = failures_behind(failures, who["recording"], row["channel"], parameters.get("reference"))
            mine = [failure for failure in failed if concerns(failure, row)]
            rows.append({**row, **_judged(row, mine, exclude), **told_of})
    design = {f"{DESIGN}{factor}": "text" for factor in parameters["design"]}
    return rows_to_frame(rows, TABLE_COLUMNS | design)


def _failures(verdict: Frame) -> dict[tuple[str, str], list[dict[str, Any]]]:
    """Return the rows of the verdict that have failed, by recording and channel."""
    failed: dict[tuple[str, str], list[dict[str, Any]]] = {}
    for row in frame_rows(verdict):
        if row["passed"] == "no":
            failed.setdefault((row["recording"], row["channel"]), []).append(row)
    return failed


def concerns(failure: Mapping[str, Any], feature: Mapping[str, Any]) -> bool:
    """Tell whether a failure in quality concerns a row of features of the same channel."""
    if failure["about"] == "band":
        return bool(feature["band"] == failure["band"])
    if failure["about"] == "whole range":
        return feature["band"] is None or feature["feature"] == "relative_band_power"
    if failure["about"] == "intervals":
        return feature["feature"] not in _BLIND_TO_TIMING
    return True


def _judged(
    row: Mapping[str, Any], failures: Sequence[Mapping[str, Any]], exclude: Mapping[str, bool]
) -> dict[str, Any]:
    """Return what failures in quality change in a row of features."""
    fatal = [failure["told"] for failure in failures if exclude.get(consequence(failure), False)]
    if fatal:
        return {"value": None, "epochs_used": 0, "note": f"left out: {', '.join(fatal)}"}
    if failures:
        told = ", ".join(failure["told"] for failure in failures)
        return {"note": "; ".join(filter(None, (row["note"], f"kept although {told}")))}
    return {}


def consequence(failure: Mapping[str, Any]) -> str:
    """Return what decides about a failure: ``channel`` and ``band`` as the study says, ``advice`` never excludes."""
    if failure["about"] in ("intervals", OF_REFERENCE):
        return "advice"
    return "band" if failure["measure"].split("/")[0] in OF_BANDS else "channel"


def statistics_node(parameters: Mapping[str, Any], parents: Mapping[str, Frame]) -> Frame:
    """Answer the questions of one family and adjust their p values together."""
    from bandcairn.statistics import adjust

    rows = [
        row
        for question in parameters["questions"]
        for row in _answers(question, frame_rows(parents[f"table/{question['signal']}"]))
    ]
    # That a difference is there and that it is negligible are two claims, each with a family of its own.
    for alike in (
        [row for row in rows if row["test"] != "tost"],
        [row for row in rows if row["test"] == "tost"],
    ):
        adjusted = adjust([row["p"] for row in alike], parameters["adjustment"])
        size = sum(row["p"] is not None for row in alike)
        for row, p_adjusted in zip(alike, adjusted, strict=True):
            row |= {"p_adjusted": p_adjusted, "adjustment": parameters["adjustment"]}
            row |= {"family": parameters["family"], "family_size": size}
    return rows_to_frame(rows, STATISTICS_COLUMNS)


@dataclass(frozen=True, slots=True)
class Asked:
    """A question as it is asked of one channel, or of the mean of several.

    Attributes
    ----------
    channel : str
        The channel, or ``"mean"``.
    rows : tuple of mapping
        Rows of features that bear on it.
    comparison : Comparison
        What is asked.
    values, participants, levels : list
        One item a recording and segment.
    """

    channel: str
    rows: tuple[Mapping[str, Any], ...]
    comparison: Comparison
    values: list[float | None]
    participants: list[str]
    levels: list[str]


def asked_of(question: Mapping[str, Any], rows: Sequence[Mapping[str, Any]]) -> Iterator[Asked]:
    """Yield a question for each channel, or once for the mean of the channels.

    Parameters
    ----------
    question : mapping
        The question as it stands in the recipe of its node.
    rows : sequence of mapping
        The table of its signal.
    """
    fitting = [
        row
        for row in rows
        if row["feature"] == question["feature"]
        and row["band"] == question.get("band")
        and question.get("segment", row["segment"]) == row["segment"]
    ]
    channels = question["channel_names"]
    of_mean = question["channels"] == "mean"
    for group in [channels] if of_mean else [[channel] for channel in channels]:
        mine = tuple(row for row in fitting if row["channel"] in group)
        factor: str = question.get("within") or question["between"]
        observations = list(_observations(mine, len(group), factor))
        yield Asked(
            channel="mean" if of_mean else group[0],
            rows=mine,
            comparison=_comparison(question, mine),
            values=[value for value, _, _ in observations],
            participants=[participant for _, participant, _ in observations],
            levels=[level for _, _, level in observations],
        )


def _comparison(question: Mapping[str, Any], rows: Sequence[Mapping[str, Any]]) -> Comparison:
    from bandcairn.statistics import Comparison

    design: Literal["within", "between"] = "within" if "within" in question else "between"
    first, second = question["contrast"]
    return Comparison(
        design=design,
        factor=question[design],
        first=first,
        second=second,
        test=question["test"],
        scale=question["scale"],
        confidence=question["confidence"],
        unit=rows[0]["unit"] if rows else "",
        seed=question.get("seed", 0),
    )


def _answers(question: Mapping[str, Any], rows: Sequence[Mapping[str, Any]]) -> Iterator[dict[str, Any]]:
    """Yield one answer a channel, or one for the mean of the channels, and one of equivalence where it is asked."""
    for asked in asked_of(question, rows):
        uneven = uneven_epochs(question, asked.rows)
        for result in _results(question, asked):
            yield {
                **asdict(result),
                "note": "; ".join(filter(None, (result.note, uneven))) or None,
                **named(question, asked),
            }


def _results(question: Mapping[str, Any], asked: Asked) -> Iterator[Result]:
    from bandcairn.statistics import Interval, compare, equivalence

    people = asked.values, asked.participants, asked.levels
    yield compare(*people, asked.comparison)
    if "equivalence" in question:
        yield equivalence(*people, asked.comparison, Interval(*question["equivalence"]))


def named(question: Mapping[str, Any], asked: Asked) -> dict[str, Any]:
    """Return what tells a row of results apart from those of other questions and channels."""
    return {
        "question": question["name"],
        "signal": question["signal"],
        "channel": asked.channel,
        "feature": question["feature"],
        "band": question.get("band"),
    }


def uneven_epochs(question: Mapping[str, Any], rows: Sequence[Mapping[str, Any]]) -> str | None:
    """Tell if one level of a question rests on more than twice the epochs of the other.

    The logarithm of a mean over few epochs lies lower than that over many, and a maximum too.

    Parameters
    ----------
    question : mapping
        The question: its factor and contrast.
    rows : sequence of mapping
        Rows of features; those without a value say nothing.

    Returns
    -------
    str or None
        Within people, in how many of them; between people, by the means of the groups.
    """
    factor: str = question.get("within") or question["between"]
    first, second = question["contrast"]
    kept: dict[tuple[str, str], list[int]] = {}
    for row in rows:
        level = row["segment"] if factor == "segment" else row[f"{DESIGN}{factor}"]
        if row["value"] is not None and level in (first, second):
            who = row["participant"] if "within" in question else ""
            kept.setdefault((who, level), []).append(row["epochs_used"])
    means = {place: sum(counts) / len(counts) for place, counts in kept.items()}
    people = [who for who, level in means if level == first and (who, second) in means]
    uneven = [who for who in people if not _alike(means[who, first], means[who, second])]
    if not uneven:
        return None
    told = f"epochs kept in {first} and in {second} differ by more than a factor of {_UNEVEN:g}"
    if "within" in question:
        return f"{told} in {len(uneven)} of {len(people)} participants"
    return f"{told}: {means['', first]:.1f} and {means['', second]:.1f} on average"


def _alike(count: float, other: float) -> bool:
    return max(count, other) <= _UNEVEN * min(count, other)


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


def rows_to_frame(rows: Sequence[Mapping[str, Any]], schema: Mapping[str, str]) -> Frame:
    """Return rows as a frame with the columns of `schema`: name and kind, which is text, number or count."""
    return Frame({name: _COLUMNS[kind]([row[name] for row in rows]) for name, kind in schema.items()})


def _numbers(values: Sequence[float | None]) -> np.ndarray[Any, Any]:
    return np.array([np.nan if value is None else value for value in values], dtype=np.float64)


def _counts(values: Sequence[int]) -> np.ndarray[Any, Any]:
    return np.array(values, dtype=np.int64)


_COLUMNS: dict[str, Callable[[Sequence[Any]], Column]] = {"text": tuple, "number": _numbers, "count": _counts}
