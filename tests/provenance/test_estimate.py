"""How long the missing nodes will take."""

from __future__ import annotations

from typing import Any

import pytest

from bandcairn.nodes.node import Node, make_node
from bandcairn.provenance.estimate import estimated_seconds


def node(step: str, signal: str, number: int = 0) -> Node:
    """Return a node."""
    return make_node(step, parameters=f'{{"n":{number}}}', recording="p1", signal=signal)


def timed(step: str, signal: str | None, seconds: float) -> dict[str, Any]:
    """Return what a row of the ledger tells of the time."""
    return {"step": step, "signal": signal, "seconds": seconds}


LEDGER = [
    timed("filter", "eeg", 1.0),
    timed("filter", "eeg", 3.0),
    timed("filter", "arm", 8.0),
    timed("statistics", None, 0.5),
]


def test_each_node_takes_the_mean_of_its_step_and_signal() -> None:
    """EMG at 2000 Hz takes longer than EEG at 128 Hz."""
    assert estimated_seconds([node("filter", "eeg"), node("filter", "arm")], LEDGER, cores=1) == 2.0 + 8.0


def test_a_signal_that_was_never_timed_takes_the_mean_of_its_step() -> None:
    """A new signal is about like the others."""
    assert estimated_seconds([node("filter", "leg")], LEDGER, cores=1) == pytest.approx(4.0)


def test_a_node_of_the_study_takes_the_mean_of_its_step() -> None:
    """It has no signal."""
    assert estimated_seconds([node("statistics", "")], LEDGER, cores=1) == pytest.approx(0.5)


def test_several_cores_share_the_time() -> None:
    """As if they were all busy to the end."""
    missing = [node("filter", "eeg", number) for number in range(10)]
    assert estimated_seconds(missing, LEDGER, cores=4) == pytest.approx(10 * 2.0 / 4)


def test_a_step_that_was_never_timed_gives_no_estimate() -> None:
    """A number that leaves something out would be too short."""
    assert estimated_seconds([node("filter", "eeg"), node("spectrum", "eeg")], LEDGER, cores=1) is None


def test_nothing_missing_takes_no_time() -> None:
    """Whatever is known."""
    assert estimated_seconds([], [], cores=2) == 0
