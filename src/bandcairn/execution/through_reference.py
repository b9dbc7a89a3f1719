"""Which failures in quality stand behind a channel that re-referencing has made of others."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    Failures = Mapping[tuple[str, str], Sequence[Mapping[str, Any]]]

# What a failure is about that another channel brings in by the reference: told, and never a reason to leave out.
OF_REFERENCE = "reference"


def failures_behind(
    failures: Failures, recording: str, channel: str, reference: Mapping[str, Any] | None
) -> list[Mapping[str, Any]]:
    """Return the failures that concern a channel after re-referencing.

    Quality is measured as recorded. A pair fails with either of its channels. A channel that fails and stands in
    the reference of others fails by itself, and is told at the others: what it holds is spread over all of them.

    Parameters
    ----------
    failures : mapping of (recording, channel) to sequence
        Failures of channels as recorded, each with ``about`` and ``told``.
    recording, channel : str
        Where; the channel by its name after re-referencing.
    reference : mapping or None
        The recipe of the reference: ``{"pairs": [[name, first, second], ...]}`` or ``{"reference": "average"}``
        or ``{"reference": [names]}``; None where there is none.

    Returns
    -------
    list of mapping
        Own failures first.
    """
    if reference is None:
        return list(failures.get((recording, channel), ()))
    if "pairs" in reference:
        members = next(pair[1:] for pair in reference["pairs"] if pair[0] == channel)
        return [
            {**failure, "told": f"{member}: {failure['told']}"}
            for member in members
            for failure in failures.get((recording, member), ())
        ]
    return [
        *failures.get((recording, channel), ()),
        *(
            {**failure, "about": OF_REFERENCE, "told": f"its reference holds {other}: {failure['told']}"}
            for other in _others(failures, recording, channel, reference["reference"])
            for failure in failures[recording, other]
            if failure["about"] == "channel"
        ),
    ]


def _others(failures: Failures, recording: str, channel: str, reference: str | Sequence[str]) -> list[str]:
    """Return the other channels of a recording that have failed and stand in its reference."""
    return [
        other
        for where, other in failures
        if where == recording and other != channel and (reference == "average" or other in reference)
    ]
