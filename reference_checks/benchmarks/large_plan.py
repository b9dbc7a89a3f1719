"""A large study of which everything stands, to time how long it takes to say so.

The recordings are real files, twelve seconds each, and are read and digested by the real code. The nodes are not
computed, which would take minutes: empty files stand in their places, for presence is all that a plan asks of the
store. The results are bytes of the size that the measured study's results have for as many recordings, with their
digests in run.json, since these are verified at each start.
"""

from __future__ import annotations

import hashlib
import json
from typing import TYPE_CHECKING

from bandcairn.execution.project import open_project
from bandcairn.store.layout import make_private_folder, node_path
from bench_study import BenchStudy, HeartSettings, make_bench_study

if TYPE_CHECKING:
    from pathlib import Path

# The shortest that the settings of the EEG and the bands below allow; what they are does not matter to a plan.
_MINUTES = 12 / 60
_HEART = HeartSettings(epoch_s=12, segment_s=6, bands_hz={"lf": (0.1, 0.3), "hf": (0.3, 0.6)})


def stand_everything(folder: Path, recordings: int, measured: BenchStudy) -> tuple[Path, int]:
    """Make a study of which every node and result stands.

    Parameters
    ----------
    folder : Path
        Made if missing.
    recordings : int
        With three signals each.
    measured : BenchStudy
        A finished study: the model for the size of the results.

    Returns
    -------
    tuple of Path and int
        The study folder and its number of nodes.
    """
    study = make_bench_study(folder, recordings, _MINUTES, _HEART)
    study.clear()
    project = open_project(study.folder)
    nodes = project.plan.nodes.values()
    for node in nodes:
        path = node_path(project.store_folder, node.step, node.key)
        make_private_folder(path.parent)
        path.touch()
    _fake_results(study.folder / "results", measured, recordings, project.plan.id)
    return study.folder, len(nodes)


def _fake_results(results: Path, measured: BenchStudy, recordings: int, plan: str) -> None:
    make_private_folder(results)
    digests = {}
    for model in (measured.folder / "results").glob("*.[cp]*"):
        content = bytes(model.stat().st_size * recordings // measured.recordings)
        (results / model.name).write_bytes(content)
        digests[model.name] = hashlib.sha256(content).hexdigest()
    run = {"plan": plan, "files": digests, "failures": []}
    (results / "run.json").write_text(json.dumps(run), "utf-8")
