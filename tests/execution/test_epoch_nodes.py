"""Epochs as nodes: edges of the filter, least numbers, decisions and retained data up to the results (F2-F5, F8)."""

from __future__ import annotations

import shutil
from collections import Counter
from fractions import Fraction
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import pandas as pd
import pytest

from bandcairn.execution.epoch_nodes import epoch_node
from bandcairn.execution.filter_nodes import filter_node
from bandcairn.execution.frames import frame_to_epochs, signal_to_frame
from bandcairn.execution.group_nodes import uneven_epochs
from bandcairn.execution.project import open_project
from bandcairn.execution.publish import publish, published
from bandcairn.execution.worker import Worker
from bandcairn.signal import Run, Signal
from bandcairn.steps.rejection import AT_EDGE

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping, Sequence

    from bandcairn.store.frame import Frame

RATE_HZ = 128
HEADER = "recording,signal,channel,start_s,stop_s,decision,who,when,why\n"
HIGH_PASS = {"type": "highpass", "cutoff_hz": 0.5, "design": "butterworth", "order": 2}
FIR = {"type": "lowpass", "cutoff_hz": 30, "design": "fir", "window": "hamming", "transition_hz": 1}
REASONS = ["by_decision", "at_edge", "too_large", "too_flat", "too_steep", "outlying"]


def filtered(stages: Sequence[Mapping[str, Any]], *lengths_s: int) -> Frame:
    """Return a filter node over noise in runs of the given lengths, 100 s apart."""
    n = sum(lengths_s) * RATE_HZ
    samples = np.random.default_rng(1).normal(0, 10, (2, n))
    runs, first = [], 0
    for index, length_s in enumerate(lengths_s):
        runs.append(Run(first, first + length_s * RATE_HZ, Fraction(100 * index)))
        first += length_s * RATE_HZ
    signal = Signal(samples, Fraction(RATE_HZ), ("a", "b"), tuple(runs))
    return filter_node({"stages": list(stages)}, {"signal": signal_to_frame(signal)})


def at_edge(signal: Frame, **parameters: object) -> list[bool]:
    """Return which epochs of 1 s are dropped for the filter's edges."""
    node = epoch_node({"length_s": 1, "overlap": 0, "segments": [], **parameters}, {"signal": signal})
    return [code == AT_EDGE for code in frame_to_epochs(node).reason[0].tolist()]


def first_and_last(flags: Sequence[bool]) -> tuple[int, int]:
    """Return how many are set at the beginning and at the end, and refuse any between."""
    start = next((index for index, flag in enumerate(flags) if not flag), len(flags))
    stop = next((index for index, flag in enumerate(reversed(flags)) if not flag), len(flags))
    assert not any(flags[start : len(flags) - stop])
    return start, stop


def test_f2_zones_at_gaps_are_as_long_as_the_filter_needs_to_settle() -> None:
    """A zero-phase high-pass at 0.5 Hz settles in 2.1 s: three epochs on either side of a gap."""
    signal = filtered([HIGH_PASS | {"phase": "zero"}], 20, 20)

    flags = at_edge(signal)

    settling_s = signal.facts["stages"][0]["settling_s"]
    assert 2 < settling_s < 3
    assert first_and_last(flags[:20]) == (0, 3)
    assert first_and_last(flags[20:]) == (3, 0)


def test_f2_both_ends_of_the_recording_are_zones_on_demand_and_none_at_all_on_another() -> None:
    """keep_edges false, and true."""
    signal = filtered([HIGH_PASS | {"phase": "zero"}], 20, 20)

    assert first_and_last(at_edge(signal, keep_edges=False)[:20]) == (3, 3)
    assert not any(at_edge(signal, keep_edges=True))


def test_f2_a_causal_filter_has_its_zone_at_the_beginning_of_a_run_alone() -> None:
    """It knows nothing of what comes."""
    flags = at_edge(filtered([HIGH_PASS | {"phase": "causal"}], 20, 20), keep_edges=False)

    assert first_and_last(flags[:20]) == (3, 0)
    assert first_and_last(flags[20:]) == (3, 0)


def test_f2_taps_reach_beyond_what_the_cascade_before_them_needs() -> None:
    """Two kernels one behind the other: 2.1 s and 1.65 s make 3.8 s."""
    stages = [HIGH_PASS | {"phase": "zero"}, FIR | {"phase": "zero"}]

    assert first_and_last(at_edge(filtered(stages, 20), keep_edges=False)) == (4, 4)


def test_f2_no_sample_of_a_kept_epoch_feels_a_change_beyond_the_gap() -> None:
    """Truth: a step of 1 mV on the first sample after a gap leaves less than 2 % in any kept epoch."""
    samples = np.zeros((1, 40 * RATE_HZ))
    runs = (Run(0, 20 * RATE_HZ, Fraction(0)), Run(20 * RATE_HZ, 40 * RATE_HZ, Fraction(100)))
    samples[0, 20 * RATE_HZ + 1 :] = 1000
    raw = signal_to_frame(Signal(samples, Fraction(RATE_HZ), ("a",), runs))
    signal = filter_node({"stages": [HIGH_PASS | {"phase": "causal"}]}, {"signal": raw})
    node = epoch_node({"length_s": 1, "overlap": 0, "segments": []}, {"signal": signal})
    epochs = frame_to_epochs(node)

    assert np.ptp(signal.numbers("a")) > 900
    assert epochs.peak_to_peak_uv[epochs.kept].max() < 20


def test_p18_an_end_of_the_recording_beyond_which_a_run_was_too_short_is_a_gap() -> None:
    """What the filter has left out is still missing."""
    signal = filtered([HIGH_PASS | {"phase": "zero"}], 1, 20)

    assert len(signal.facts["left_out"]) == 1
    assert first_and_last(at_edge(signal)) == (3, 0)


def test_p19_without_a_filter_there_is_no_zone() -> None:
    """Nothing has to settle."""
    signal = Signal(
        np.zeros((1, 4 * RATE_HZ)), Fraction(RATE_HZ), ("a",), (Run(0, 4 * RATE_HZ, Fraction(0)),)
    )

    assert at_edge(signal_to_frame(signal), keep_edges=False) == [False] * 4


def test_p16_the_largest_shift_of_an_event_stands_in_the_node() -> None:
    """1.2345 s at 128 Hz is moved by 0.125 ms."""
    signal = filtered([HIGH_PASS | {"phase": "zero"}], 20)
    around = {"around": "tone", "start_s": -0.2, "stop_s": 0.8, "overlap": 0, "events": [1.2345, 19.9]}

    node = epoch_node({"segments": [], **around}, {"signal": signal})

    assert node.facts["largest_shift_s"] == pytest.approx(0.0001250, abs=1e-7)
    assert node.facts["no_window"] == {"": 1}


def rows_of(counts: Mapping[tuple[str, str], int], value: float | None = 1.0) -> list[dict[str, Any]]:
    """Return rows of one feature by participant and level, with so many epochs."""
    return [
        {"participant": who, "design/shift": level, "segment": None, "value": value, "epochs_used": used}
        for (who, level), used in counts.items()
    ]


def test_p30_levels_that_rest_on_uneven_epochs_are_told_by_participant() -> None:
    """Five against eighty is told, a factor of 2 is not."""
    counts = {("p1", "day"): 5, ("p1", "night"): 80, ("p2", "day"): 20, ("p2", "night"): 40}
    question = {"within": "shift", "contrast": ["night", "day"]}

    assert uneven_epochs(question, rows_of(counts)) == (
        "epochs kept in night and in day differ by more than a factor of 2 in 1 of 2 participants"
    )
    assert uneven_epochs(question, rows_of(counts, value=None)) is None


def test_p30_groups_that_rest_on_uneven_epochs_are_told_by_their_means() -> None:
    """Between people, one mean a group."""
    counts = {("p1", "day"): 10, ("p2", "day"): 30, ("p3", "night"): 41}
    question = {"between": "shift", "contrast": ["night", "day"]}

    assert uneven_epochs(question, rows_of(counts)) == (
        "epochs kept in night and in day differ by more than a factor of 2: 41.0 and 20.0 on average"
    )


def computed(folder: Path) -> Counter[str]:
    """Bring a study up to date in this process; return how many nodes of each recording were computed."""
    project = open_project(folder)
    worker = Worker(project)
    missing = project.missing()
    done = worker.work(missing)
    assert done.failures == []
    records = {record["key"]: record for record in done.records}
    publish(project, worker.plan_study_nodes(), worker.store, records, done.failures)
    return Counter(node.recording for node in missing if node.recording)


def results(folder: Path, name: str, **where: str) -> pd.DataFrame:
    """Return the rows of a table of the results."""
    table = pd.read_parquet(folder / "results" / f"{name}.parquet")
    for column, value in where.items():
        table = table[table[column] == value]
    return table


@pytest.fixture
def study(finished_study: Path, tmp_path: Path) -> Path:
    """Return a finished study of one's own."""
    return Path(shutil.copytree(finished_study, tmp_path / "own"))


def test_f4_decisions_are_honoured_and_told_with_who_when_and_why(study: Path) -> None:
    """A bad channel has no value, a bad stretch takes its epochs; both stand in the exclusions."""
    before = results(study, "features")
    (study / "decisions.csv").write_text(
        f"{HEADER}p1_day,eeg,Fz,,,exclude,AB,2024-05-03,electrode loose\np2_day,,,20,22,exclude,CD,2024-05-04,cough\n"
    )

    assert set(computed(study)) == {"p1_day", "p2_day"}

    bad = results(study, "features", recording="p1_day", signal="eeg", channel="Fz")
    assert bad["value"].isna().all()
    assert set(bad["note"]) == {"left out by decision: electrode loose (AB, 2024-05-03)"}
    told = results(study, "exclusions", recording="p1_day")
    assert told[["channel", "what", "reason"]].to_numpy().tolist() == [
        ["Fz", "channel", "by decision: electrode loose (AB, 2024-05-03)"]
    ]
    stretch = results(study, "exclusions", recording="p2_day", signal="eeg")
    assert set(stretch["reason"]) == {"by decision: 20 to 22 s, cough (CD, 2024-05-04)"}
    assert stretch["count"].tolist() == [2, 2]  # 18-22 s and 20-24 s: 16-20 s holds no sample of it
    untouched = before["recording"].isin(["p1_night", "p2_night"])
    after = results(study, "features")
    pd.testing.assert_frame_equal(before[untouched], after[untouched])


def test_f4_one_decision_undone_computes_that_recording_alone(study: Path) -> None:
    """The other decision stands; who, when and why are reprinted without computing anything."""
    first = "p1_day,,,30,31,exclude,AB,2024-05-03,movement\n"
    second = "p2_day,eeg,,20,22,exclude,CD,2024-05-04,cough\n"
    (study / "decisions.csv").write_text(HEADER + first + second)
    computed(study)
    (study / "decisions.csv").write_text(HEADER + first.replace("movement", "swallowing"))
    undone = open_project(study)
    assert not published(undone)
    for step in (
        "epoch",
        "spectrum",
        "features",
    ):  # they lie ready from before the decision: compute them anew
        Worker(undone).store.remove(step, undone.plan.slots["p2_day", "eeg", step])

    assert computed(study) == {"p2_day": 3}

    told = results(study, "exclusions")
    assert set(told["recording"]) == {"p1_day"}
    assert set(told["reason"]) == {"by decision: 30 to 31 s, swallowing (AB, 2024-05-03)"}


def test_f5_a_channel_with_too_few_epochs_has_no_value_and_says_so(
    study: Path, edit_study: Callable[..., None]
) -> None:
    """Of 29 epochs 28 are too few if 29 are asked for."""
    edit_study(study, "reject: {peak_to_peak_uv: 300}}", "reject: {peak_to_peak_uv: 300}, least: 29}")
    (study / "decisions.csv").write_text(f"{HEADER}p1_day,eeg,Cz,1,2,exclude,AB,2024-05-03,blink\n")
    computed(study)

    few = results(study, "features", recording="p1_day", signal="eeg", channel="Cz")
    enough = results(study, "features", recording="p1_day", signal="eeg", channel="Fz")

    assert set(few["note"]) == {"28 epochs kept, fewer than the least of 29"}
    assert few["value"].isna().all()
    assert enough["value"].notna().all()


def test_f8_retained_data_add_up_and_equal_a_recount_from_the_nodes(study: Path) -> None:
    """Every row: total is kept plus all reasons, and the flags of the epoch nodes say the same."""
    (study / "decisions.csv").write_text(f"{HEADER}p1_day,eeg,Cz,10,20,exclude,AB,2024-05-03,chewing\n")
    computed(study)
    project = open_project(study)
    store = Worker(project).store

    for row in results(study, "epochs").to_dict("records"):
        assert row["total"] == row["kept"] + sum(row[reason] for reason in REASONS)
        key = project.plan.slots[row["recording"], row["signal"], "epoch"]
        reason = store.get("epoch", key).numbers(f"reason/{row['channel']}")
        assert (row["total"], row["kept"]) == (len(reason), np.count_nonzero(reason == 0))

    (row,) = results(study, "epochs", recording="p1_day", channel="Cz").to_dict("records")
    # Epochs of 4 s every 2 s: those that begin from 8 to 18 s hold a sample of 10-20 s.
    assert (row["total"], row["kept"], row["by_decision"], row["condition"]) == (29, 23, 6, "day")


def test_f1_epochs_about_events_run_through_to_the_results(
    study: Path, edit_study: Callable[..., None]
) -> None:
    """Features are means over events; an event too near the border is counted and told."""
    edit_study(
        study,
        "epoch: {length_s: 4, overlap: 0.5, reject: {peak_to_peak_uv: 300}}",
        "epoch: {around: tone, start_s: -1, stop_s: 3}",
    )
    events = [
        (name, at) for name in ("p1_day", "p1_night", "p2_day", "p2_night") for at in (0.5, 10.1234, 30)
    ]
    (study / "events.csv").write_text(
        "recording,onset_s,event\n" + "".join(f"{name},{at},tone\n" for name, at in events)
    )
    computed(study)

    features = results(study, "features", signal="eeg")
    assert set(features["epochs_used"]) == {2}
    assert features["value"].notna().all()
    assert set(results(study, "epochs", signal="eeg")["no_window"]) == {1}
    told = results(study, "exclusions", signal="eeg")
    assert set(zip(told["what"], told["count"], told["total"], strict=True)) == {("event", 1, 3)}
