"""One node's data from its parents' data: which function carries out which step."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING, Any

from bandcairn.execution.epoch_nodes import epoch_node
from bandcairn.execution.filter_nodes import filter_node, reference_node
from bandcairn.execution.group_nodes import statistics_node, table_node
from bandcairn.execution.quality_nodes import quality_node, verdict_node
from bandcairn.execution.signal_nodes import load_node, resample_node
from bandcairn.execution.spectrum_nodes import beats_node, features_node, spectrum_node

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    from bandcairn.execution.project import Project
    from bandcairn.nodes.node import Node
    from bandcairn.store.frame import Frame

_STEPS: dict[str, Callable[[Mapping[str, Any], Mapping[str, Frame]], Frame]] = {
    "quality": quality_node,
    "resample": resample_node,
    "reference": reference_node,
    "filter": filter_node,
    "beats": beats_node,
    "epoch": epoch_node,
    "spectrum": spectrum_node,
    "features": features_node,
}


def compute(node: Node, parents: Mapping[str, Frame], project: Project) -> Frame:
    """Carry out a node's step.

    Parameters
    ----------
    node : Node
        The node.
    parents : mapping of str to Frame
        Data of its parents by role.
    project : Project
        The study: where the raw files lie.

    Raises
    ------
    RecordingError
        If the step refuses its input.
    """
    parameters = json.loads(node.parameters)
    if node.step == "load":
        with project.survey.unchanged_file(node.recording) as path:
            return load_node(parameters, path)
    if node.step == "verdict":
        return verdict_node(parameters, parents, dict(node.parents))
    if node.step == "table":
        return table_node(parameters, parents, dict(node.parents))
    if node.step == "statistics":
        return statistics_node(parameters, parents)
    return _STEPS[node.step](parameters, parents)
