"""Process one study by a script and by bandcairn, side by side, and print what each takes.

    python reference_checks/benchmarks/side_by_side.py --recordings 100 --rounds 3 --folder FOLDER

The arms of a round run one after another, in reversed order every other round, so that a machine that slows down or
speeds up meanwhile treats both sides alike. README.md beside this file tells how to read the rows.
"""

from __future__ import annotations

import argparse
import os
import statistics
import sys
import tempfile
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from agreement import agreements
from bandcairn.nodes.catalogue import RECORDING_STEPS
from bandcairn.provenance.ledger import read_ledger
from bench_study import EDITED_LOW_EDGE_HZ, YARDSTICK, BenchStudy, HeartSettings, make_bench_study
from large_plan import stand_everything
from process_tree import Cost, measure

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

SCRIPT_ONE, SCRIPT_ALL = "script, one core", "script, all cores"
RUN_ONE, RUN_ALL = "bandcairn, one core", "bandcairn, all cores"
EDIT, NOTHING = "filter edit, all cores", "nothing to do"


@dataclass(frozen=True, slots=True)
class Round:
    """One round of all arms.

    Attributes
    ----------
    costs : dict of str to Cost
        By arm.
    step_s : dict of str to float
        Sum of the seconds that the ledger gives the recordings' nodes, by arm of a cold run.
    node_bytes : int
        Size of the store after a cold run.
    """

    costs: dict[str, Cost]
    step_s: dict[str, float]
    node_bytes: int


def main() -> None:
    """Measure and print."""
    options = _options()
    with tempfile.TemporaryDirectory(prefix="side-by-side-") as temporary:
        folder = Path(options.folder or temporary).resolve()
        heart = HeartSettings.for_minutes(options.minutes)
        study = make_bench_study(folder, options.recordings, options.minutes, heart)
        cores = len(os.sched_getaffinity(0))
        _say(
            f"{study.recordings} recordings of {study.minutes:g} min, {cores} cores, {options.rounds} rounds"
        )
        bench = Bench(study, folder / "script", cores)
        rounds = [bench.round(index) for index in range(options.rounds)]
        _print_costs(rounds)
        _print_targets(rounds, study)
        _print_overhead(rounds, study, cores)
        _print_agreement(study, folder / "script")
        _print_large_plan(folder, options.plan_recordings, study, options.rounds)


def _options() -> argparse.Namespace:
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("--recordings", type=int, default=100, help="an even number, 4 or more [100]")
    parser.add_argument("--minutes", type=float, default=10, help="length of each [10]")
    parser.add_argument("--rounds", type=int, default=3, help="[3]")
    parser.add_argument("--plan-recordings", type=int, default=1000, help="of the large plan, even [1000]")
    parser.add_argument("--folder", help="kept, and its recordings used again [a temporary one]")
    return parser.parse_args()


class Bench:
    """The arms, as commands on one study.

    Parameters
    ----------
    study : BenchStudy
        The recordings.
    script_output : Path
        Where the script writes.
    cores : int
        All of them.
    """

    def __init__(self, study: BenchStudy, script_output: Path, cores: int) -> None:
        self.study = study
        self.script_output = script_output
        self.cores = cores

    def round(self, index: int) -> Round:
        """Run every arm once, in reversed order in every other round."""
        done = Round({}, {}, 0)
        arms: list[Callable[[Round], int]] = [
            self._script_one,
            self._script_all,
            self._run_one,
            self._run_all,
        ]
        sizes = [arm(done) for arm in (reversed(arms) if index % 2 else arms)]
        return Round(done.costs, done.step_s, max(sizes))

    def _script_one(self, done: Round) -> int:
        done.costs[SCRIPT_ONE] = self._script("--jobs", "1")
        return 0

    def _script_all(self, done: Round) -> int:
        done.costs[SCRIPT_ALL] = self._script("--jobs", str(self.cores))
        return 0

    def _run_one(self, done: Round) -> int:
        return self._cold_run(done, RUN_ONE, 1)

    def _run_all(self, done: Round) -> int:
        """Run cold, then again with nothing to do, then with one parameter edited, then back to the first."""
        size = self._cold_run(done, RUN_ALL, self.cores)
        done.costs[NOTHING] = self._run(self.cores)
        self.study.describe(EDITED_LOW_EDGE_HZ)
        done.costs[EDIT] = self._run(self.cores)
        self.study.describe()
        self._run(self.cores)
        return size

    def _cold_run(self, done: Round, arm: str, cores: int) -> int:
        self.study.clear()
        done.costs[arm] = self._run(cores)
        rows = read_ledger(self.study.folder / "results")
        done.step_s[arm] = sum(row["seconds"] for row in rows if row["step"] in RECORDING_STEPS)
        return self.study.node_bytes

    def _script(self, *options: str) -> Cost:
        script = YARDSTICK / "handwritten.py"
        return measure([sys.executable, script, self.study.folder, self.script_output, "--vec", *options])

    def _run(self, cores: int) -> Cost:
        return measure([*_bandcairn(), "run", self.study.folder, "--cores", str(cores)])


def _bandcairn() -> list[str]:
    """Return the installed command as it is called, without its start-up script."""
    return [sys.executable, "-c", "from bandcairn.cli import main; main()"]


def _print_costs(rounds: Sequence[Round]) -> None:
    _say(f"\n{'arm':<26}{'wall s':<26}{'CPU s':<26}peak memory MB")
    for arm in (SCRIPT_ONE, SCRIPT_ALL, RUN_ONE, RUN_ALL, EDIT, NOTHING):
        costs = [done.costs[arm] for done in rounds]
        wall, cpu = _spread([c.wall_s for c in costs]), _spread([c.cpu_s for c in costs])
        _say(f"{arm:<26}{wall:<26}{cpu:<26}{max(c.peak_bytes for c in costs) / 1e6:.0f}")


def _print_targets(rounds: Sequence[Round], study: BenchStudy) -> None:
    _say(f"\n{'target':<50}{'allowed':<10}measured")
    ratios = (
        ("cold, all cores / script, one core", RUN_ALL, SCRIPT_ONE, 0.55),
        ("cold, all cores / script, all cores", RUN_ALL, SCRIPT_ALL, 0.75),
        ("filter edit, all cores / script, one core", EDIT, SCRIPT_ONE, 0.40),
    )
    for name, ours, theirs, allowed in ratios:
        _judge(name, allowed, [r.costs[ours].wall_s / r.costs[theirs].wall_s for r in rounds])
    _judge("bytes of nodes / bytes of raw files", 5.0, [r.node_bytes / study.raw_bytes for r in rounds])
    cold = [max(r.costs[arm].peak_bytes for arm in (RUN_ONE, RUN_ALL)) / 1e9 for r in rounds]
    _judge("peak memory of a cold run, GB", 1.0, cold)


def _judge(name: str, allowed: float, measured: Sequence[float]) -> None:
    verdict = "met" if statistics.median(measured) <= allowed else "NOT MET"
    _say(f"{name + ' ':<50}<= {allowed:<7g}{_spread(measured):<26}{verdict}")


def _print_overhead(rounds: Sequence[Round], study: BenchStudy, cores: int) -> None:
    _say("")
    for arm, used in ((RUN_ONE, 1), (RUN_ALL, cores)):
        overhead_ms = [
            1000 * (done.costs[arm].wall_s - done.step_s[arm] / used) / study.recordings for done in rounds
        ]
        _say(f"overhead a recording, {arm + ', ms':<28}{_spread(overhead_ms)}")
    scaling = [done.costs[RUN_ONE].wall_s / done.costs[RUN_ALL].wall_s for done in rounds]
    _say(f"{f'scaling from 1 to {cores} cores':<50}{_spread(scaling)}")


def _print_agreement(study: BenchStudy, script: Path) -> None:
    _say(f"\n{'agreement of the two sides':<34}{'allowed':<12}{'largest':<12}")
    for found in agreements(study.folder, script):
        verdict = "holds" if found.holds else "DIFFERS"
        _say(f"{found.value:<34}<= {found.allowed:<9g}{found.largest:<12.2g}{verdict}: {found.why}")


def _print_large_plan(folder: Path, recordings: int, measured: BenchStudy, rounds: int) -> None:
    study, nodes = stand_everything(folder, recordings, measured)
    costs = [measure([*_bandcairn(), "run", study]) for _ in range(rounds)]
    _say("\nfiles that stand in for nodes and results, by name:")
    name = f"nothing to do, {recordings} recordings x 3 signals, {nodes} nodes, wall s"
    _judge(name, 1.0, [cost.wall_s for cost in costs])


def _spread(values: Sequence[float]) -> str:
    return f"{statistics.median(values):.3g} [{min(values):.3g}-{max(values):.3g}]"


def _say(text: str) -> None:
    print(text, flush=True)


if __name__ == "__main__":
    main()
