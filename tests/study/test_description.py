"""Loading a study: what is sound loads, and every mistake is told in one pass."""

from __future__ import annotations

from typing import TYPE_CHECKING, NamedTuple

import pytest

from bandcairn.errors import Problem, StudyError
from bandcairn.study.description import load_study

if TYPE_CHECKING:
    from pathlib import Path


class Mistake(NamedTuple):
    """One seeded mistake and the words that must come back.

    `old` is replaced by `new` in `file`; the one problem stands at `where`, about `field`, with `found`,
    `allowed` and `remedy` among its words.
    """

    file: str
    old: str
    new: str
    where: str
    field: str
    found: str
    allowed: str
    remedy: str


MISTAKES = {
    "misspelt key": Mistake(
        "study.yaml",
        "overlap: 0.5",
        "overlpa: 0.5",
        "line 12",
        "signals.eeg.epoch.overlpa",
        "unknown key overlpa",
        "length_s, overlap, around, start_s, stop_s, keep_edges, least, reject",
        "Did you mean overlap?",
    ),
    "mains frequency absent": Mistake(
        "study.yaml",
        "mains_hz: 50\n",
        "",
        "line 1",
        "mains_hz",
        "nothing",
        "50 or 60",
        "Add the key mains_hz",
    ),
    "mains frequency of no country": Mistake(
        "study.yaml", "mains_hz: 50", "mains_hz: 55", "line 2", "mains_hz", "55", "50 or 60", "Correct"
    ),
    "unknown kind": Mistake(
        "study.yaml",
        "kind: emg",
        "kind: eng",
        "line 26",
        "signals.biceps.kind",
        "'eng'",
        "emg",
        "Did you mean",
    ),
    "cut-offs exchanged": Mistake(
        "study.yaml",
        "[0.5, 45]",
        "[45, 0.5]",
        "line 9",
        "signals.eeg.filter[0].cutoff_hz",
        "[45, 0.5]",
        "two increasing values",
        "lower value first",
    ),
    "cut-off in quotes with its unit": Mistake(
        "study.yaml",
        "[0.5, 45]",
        "[0.5, '45 Hz']",
        "line 9",
        "signals.eeg.filter[0].cutoff_hz[1]",
        "45 Hz",
        "above 0",
        "no quotes, no unit",
    ),
    "cut-off beyond half the rate": Mistake(
        "study.yaml",
        "rate_hz: 128",
        "rate_hz: 80",
        "line 9",
        "signals.eeg.filter[0].cutoff_hz",
        "45 Hz",
        "below 39.2 Hz, 0.98 of half the rate",
        "Lower the cut-off",
    ),
    "design misspelled": Mistake(
        "study.yaml",
        "design: butterworth",
        "design: eliptic",
        "line 9",
        "signals.eeg.filter[0].design",
        "'eliptic'",
        "butterworth, chebyshev1",
        "Did you mean elliptic",
    ),
    "order beyond the range": Mistake(
        "study.yaml",
        "order: 4",
        "order: 40",
        "line 9",
        "signals.eeg.filter[0].order",
        "40",
        "1 to 12",
        "Correct",
    ),
    "band exchanged": Mistake(
        "study.yaml",
        "theta: [4, 8]",
        "theta: [8, 4]",
        "line 18",
        "signals.eeg.features.bands_hz.theta",
        "[8, 4]",
        "two increasing values",
        "lower value first",
    ),
    "band beyond the filter": Mistake(
        "study.yaml",
        "theta: [4, 8]",
        "gamma: [30, 50]",
        "line 18",
        "signals.eeg.features.bands_hz.gamma",
        "30 to 50 Hz",
        "0.5 Hz to 45 Hz",
        "Narrow the band",
    ),
    "band narrower than a bin": Mistake(
        "study.yaml",
        "theta: [4, 8]",
        "theta: [4, 4.2]",
        "line 18",
        "signals.eeg.features.bands_hz.theta",
        "4 to 4.2 Hz",
        "0.5 Hz wide",
        "Widen the band",
    ),
    "spectrum segment longer than the epoch": Mistake(
        "study.yaml",
        "segment_s: 2\n",
        "segment_s: 8\n",
        "line 15",
        "signals.eeg.spectrum.segment_s",
        "8 s",
        "at most epoch.length_s, 4 s",
        "Shorten the segment",
    ),
    "key twice": Mistake(
        "study.yaml",
        "      overlap: 0.5\n",
        "      overlap: 0.5\n      overlap: 0.6\n",
        "line 13",
        "signals.eeg.epoch.overlap",
        "first in line 12",
        "each key once",
        "Delete one",
    ),
    "question about an unknown band": Mistake(
        "study.yaml",
        "band: alpha",
        "band: alfa",
        "line 34",
        "questions[0].band",
        "alfa",
        "theta, alpha",
        "alpha?",
    ),
    "question about an unknown column": Mistake(
        "study.yaml",
        "within: condition",
        "within: conditions",
        "line 36",
        "questions[0].within",
        "conditions",
        "condition, group",
        "Did you mean condition?",
    ),
    "question about an unknown level": Mistake(
        "study.yaml",
        "[night, day]",
        "[nihgt, day]",
        "line 37",
        "questions[0].contrast[0]",
        "nihgt",
        "day, night",
        "Did you mean night?",
    ),
    "test of independent groups within people": Mistake(
        "study.yaml",
        "test: paired_t",
        "test: welch_t",
        "line 38",
        "questions[0].test",
        "welch_t",
        "paired_t, wilcoxon or permutation with within",
        "Change test",
    ),
    "raw file absent": Mistake(
        "recordings.csv",
        "raw/p2n.edf",
        "raw/p2m.edf",
        "row 5, column file",
        "file",
        "raw/p2m.edf",
        "an existing file",
        "Correct the path",
    ),
    "group changes within a participant": Mistake(
        "recordings.csv",
        "night,crew\np2d",
        "night,office\np2d",
        "row 3, column group",
        "group",
        "crew in row 2",
        "one group a participant",
        "compare within",
    ),
}


def damage(folder: Path, file: str, old: str, new: str) -> None:
    """Replace the first `old` in a file of the study."""
    text = (folder / file).read_text(encoding="utf-8")
    assert old in text
    (folder / file).write_text(text.replace(old, new, 1), encoding="utf-8")


def problems_of(folder: Path) -> tuple[Problem, ...]:
    """Return what is wrong with a study."""
    with pytest.raises(StudyError, match=r"found .*; allowed: ") as caught:
        load_study(folder)
    return caught.value.problems


def test_a_sound_study_loads_with_its_rows_and_every_default(study_folder: Path) -> None:
    """What is not declared has its default, and each key knows its line."""
    study = load_study(study_folder)

    assert [row.recording for row in study.recordings][:2] == ["p1d", "p1n"]
    assert study.description.signals["heart"].features.model_dump(mode="json") == {
        "bands_hz": {"vlf": [0.003, 0.04], "lf": [0.04, 0.15], "hf": [0.15, 0.4]}
    }
    assert study.where("signals", "eeg", "filter", 0, "cutoff_hz") == "line 9"
    assert study.where("signals", "eeg", "epoch", "reject", "flat_uv") == "line 10"


@pytest.mark.parametrize("mistake", MISTAKES.values(), ids=MISTAKES)
def test_a_seeded_mistake_is_told_with_place_found_allowed_and_remedy(
    study_folder: Path, mistake: Mistake
) -> None:
    """One mistake yields one problem, which names all that is needed to mend it."""
    damage(study_folder, mistake.file, mistake.old, mistake.new)

    (problem,) = problems_of(study_folder)

    assert (problem.file, problem.where, problem.field) == (mistake.file, mistake.where, mistake.field)
    assert mistake.found in problem.found
    assert mistake.allowed in problem.allowed
    assert mistake.remedy in problem.remedy


def test_many_mistakes_at_once_all_come_in_one_pass(study_folder: Path) -> None:
    """No mistake hides another: in the same block, in another signal, in a question or in a table."""
    # Left out are those that change the same words as another, or mend it.
    left_out = {
        "mains frequency absent",
        "cut-offs exchanged",
        "cut-off in quotes with its unit",
        "cut-off beyond half the rate",
        "band exchanged",
        "band beyond the filter",
        "key twice",
        "spectrum segment longer than the epoch",
    }
    seeded = [mistake for name, mistake in MISTAKES.items() if name not in left_out]
    assert len(seeded) == 12
    for mistake in seeded:
        damage(study_folder, mistake.file, mistake.old, mistake.new)

    fields = {problem.field for problem in problems_of(study_folder)}

    # The levels of a column that does not exist cannot be looked up.
    assert {mistake.field for mistake in seeded} - fields == {"questions[0].contrast[0]"}


def test_nothing_is_written(study_folder: Path) -> None:
    """Loading reads only."""
    before = {path: path.stat().st_mtime_ns for path in study_folder.rglob("*")}

    load_study(study_folder)
    after = {path: path.stat().st_mtime_ns for path in study_folder.rglob("*")}

    assert after == before


def test_levels_that_look_like_booleans_stay_levels(study_folder: Path) -> None:
    """A contrast [no, yes] compares no with yes."""
    damage(study_folder, "study.yaml", "[night, day]", "[yes, no]")
    table = (study_folder / "recordings.csv").read_text(encoding="utf-8")
    table = table.replace(",night,", ",yes,").replace(",day,", ",no,")
    (study_folder / "recordings.csv").write_text(table, encoding="utf-8")

    assert load_study(study_folder).description.questions[0].contrast == ("yes", "no")


def test_a_level_that_looks_like_a_number_must_be_quoted(study_folder: Path) -> None:
    """01 and 1 are different levels of a table, but one number."""
    damage(study_folder, "study.yaml", "[night, day]", "[1, day]")

    (problem,) = problems_of(study_folder)

    assert problem.field == "questions[0].contrast[0]"
    assert problem.remedy == "Write it in quotes: '1'."


def test_participants_without_both_conditions_are_listed(study_folder: Path) -> None:
    """A comparison within people needs two of them who have both levels."""
    table = (study_folder / "recordings.csv").read_text(encoding="utf-8")
    kept = [line for line in table.splitlines() if line.split(",")[0] not in {"p1n", "p2d", "p3n"}]
    (study_folder / "recordings.csv").write_text("\n".join(kept), encoding="utf-8")

    (problem,) = problems_of(study_folder)

    assert problem.field == "questions[0].within"
    assert problem.found == "1 with both; without night: p1, p3; without day: p2"


def test_a_group_of_one_person_is_refused(study_folder: Path) -> None:
    """A variance needs two people."""
    table = (study_folder / "recordings.csv").read_text(encoding="utf-8")
    kept = [line for line in table.splitlines() if not line.startswith("p4")]
    (study_folder / "recordings.csv").write_text("\n".join(kept), encoding="utf-8")

    (problem,) = problems_of(study_folder)

    assert problem.field == "questions[1].contrast[1]"
    assert problem.found == "1 in group office: p3"


QUESTION_FAULTS = {
    "a signal that is not declared": ("signal: eeg", "signal: egg", "questions[0].signal"),
    "a feature of another kind": ("feature: band_power", "feature: rmssd", "questions[0].feature"),
    "a band for a feature without bands": ("band_power", "total_power", "questions[0].band"),
    "no band for a feature per band": ("    band: alpha\n", "", "questions[0].band"),
    "a channel that the signal does not use": (
        "band: alpha",
        "band: alpha\n    channels: [Fz, Oz]",
        "questions[0].channels[1]",
    ),
    "logit of a power": ("scale: log10", "scale: logit", "questions[0].scale"),
    "a segment where none is declared": (
        "band: alpha",
        "band: alpha\n    segment: rest",
        "questions[0].segment",
    ),
    "both kinds of comparison": (
        "within: condition",
        "within: condition\n    between: group",
        "questions[0]",
    ),
    "one level twice": ("[night, day]", "[night, night]", "questions[0].contrast"),
    "two adjustments in a family": (
        "test: paired_t\n",
        """test: paired_t
    family: x
    adjustment: none
  - {name: b, signal: heart, feature: sdnn, within: condition, contrast: [night, day], test: paired_t, family: x}
""",
        "questions[1].adjustment",
    ),
    "bounds that leave out zero": (
        "test: paired_t",
        "test: paired_t\n    equivalence: [0.1, 0.2]",
        "questions[0].equivalence",
    ),
    "equivalence by ranks": (
        "test: paired_t",
        "test: wilcoxon\n    equivalence: [-0.1, 0.1]",
        "questions[0].equivalence",
    ),
    "a seed without chance": ("test: paired_t", "test: paired_t\n    seed: 3", "questions[0].seed"),
    "a negative seed": ("test: paired_t", "test: permutation\n    seed: -3", "questions[0].seed"),
    "a test not available yet": ("test: paired_t", "test: rm_anova", "questions[0].test"),
    "the name of another question": ("heart rate by crew", "alpha by shift", "questions[1].name"),
    "a confidence of 95": (
        "test: paired_t",
        "test: paired_t\n    confidence: 95",
        "questions[0].confidence",
    ),
}


@pytest.mark.parametrize(("old", "new", "field"), QUESTION_FAULTS.values(), ids=QUESTION_FAULTS)
def test_a_question_that_does_not_fit_is_refused(study_folder: Path, old: str, new: str, field: str) -> None:
    """A question names what exists, once, and in a way that can be computed."""
    damage(study_folder, "study.yaml", old, new)

    (problem,) = problems_of(study_folder)

    assert problem.field == field


def test_a_logarithm_of_a_slope_is_refused(study_folder: Path) -> None:
    """A slope may be negative."""
    damage(study_folder, "study.yaml", "signal: eeg", "signal: biceps")
    damage(study_folder, "study.yaml", "band_power\n    band: alpha", "median_frequency_slope")

    (problem,) = problems_of(study_folder)

    assert problem.field == "questions[0].scale"


def test_a_ratio_of_bands_that_are_not_declared_is_refused(study_folder: Path) -> None:
    """lf_hf_ratio needs bands of these names."""
    damage(study_folder, "study.yaml", "feature: heart_rate", "feature: lf_hf_ratio")
    damage(
        study_folder,
        "study.yaml",
        "segment_s: 120}",
        "segment_s: 120}\n    features: {bands_hz: {low: [0.04, 0.15], hf: [0.15, 0.4]}}",
    )

    (problem,) = problems_of(study_folder)

    assert problem.found == "lf_hf_ratio without lf"


SIGNAL_FAULTS = {
    "a filter that lets nothing pass": (
        "order: 4}",
        "order: 4}\n      - {type: highpass, cutoff_hz: 50, design: butterworth, order: 2}",
        "signals.eeg.filter",
    ),
    "two cut-offs of a lowpass": ("bandpass", "lowpass", "signals.eeg.filter[0].cutoff_hz"),
    "total power beyond the filter": (
        "    features:\n",
        "    features:\n      total_hz: [0.1, 40]\n",
        "signals.eeg.features.total_hz",
    ),
    "a band outside the total": (
        "    features:\n",
        "    features:\n      total_hz: [1, 12]\n",
        "signals.eeg.features.bands_hz.alpha",
    ),
    "a periodogram with segments": (
        "method: periodogram",
        "method: periodogram, segment_s: 0.5",
        "signals.biceps.spectrum.segment_s",
    ),
    "a periodogram with overlap": (
        "method: periodogram",
        "method: periodogram, overlap: 0.5",
        "signals.biceps.spectrum.overlap",
    ),
    "welch without segments": ("      segment_s: 2\n", "", "signals.eeg.spectrum.segment_s"),
    "beat intervals interpolated too slowly": (
        "segment_s: 120",
        "segment_s: 120, interpolation_hz: 0.5",
        "signals.heart.features.bands_hz.hf",
    ),
    "no limit of rejection": (
        "epoch: {length_s: 1}",
        "epoch: {length_s: 1, reject: {}}",
        "signals.biceps.epoch.reject",
    ),
    "limits that reject every epoch": (
        "epoch: {length_s: 1}",
        "epoch: {length_s: 1, reject: {flat_uv: 9, peak_to_peak_uv: 8}}",
        "signals.biceps.epoch.reject.flat_uv",
    ),
    "a channel twice": ("[Fz, Cz]", "[Fz, Fz]", "signals.eeg.channels"),
    "a segment that nothing declares": (
        "kind: emg",
        "kind: emg\n    segments: [lift]",
        "signals.biceps.segments[0]",
    ),
    "an unknown unit": ("kind: emg", "kind: emg\n    load: {unit: dB}", "signals.biceps.load.unit"),
    "a name that is no part of a path": ("  biceps:", "  bi/ceps:", "signals.bi/ceps"),
    "a number for a block": ("epoch: {length_s: 1}", "epoch: 1", "signals.biceps.epoch"),
    "a boolean for a number": (
        "epoch: {length_s: 1}",
        "epoch: {length_s: true}",
        "signals.biceps.epoch.length_s",
    ),
}


@pytest.mark.parametrize(("old", "new", "field"), SIGNAL_FAULTS.values(), ids=SIGNAL_FAULTS)
def test_a_signal_that_does_not_fit_together_is_refused(
    study_folder: Path, old: str, new: str, field: str
) -> None:
    """Each contradiction within a signal is one problem."""
    damage(study_folder, "study.yaml", old, new)

    (problem,) = problems_of(study_folder)

    assert problem.field == field


def with_segments(folder: Path, rows: str) -> None:
    """Give a study a table of segments."""
    (folder / "segments.csv").write_text(f"recording,segment,start_s,stop_s\n{rows}", encoding="utf-8")


TWO_SEGMENTS = "".join(
    f"p{person}{shift},{segment},{start},{start + 60}\n"
    for person in (1, 2, 3, 4)
    for shift in "dn"
    for segment, start in (("closed", 0), ("open", 60))
)


def test_a_question_must_say_which_of_several_segments_it_means(study_folder: Path) -> None:
    """Values of different segments are not mixed silently."""
    with_segments(study_folder, TWO_SEGMENTS)

    assert [problem.field for problem in problems_of(study_folder)] == [
        "questions[0].segment",
        "questions[1].segment",
    ]


def test_two_segments_of_one_recording_can_be_compared(study_folder: Path) -> None:
    """`within: segment` takes the names of segments as levels."""
    with_segments(study_folder, TWO_SEGMENTS)
    damage(study_folder, "study.yaml", "within: condition", "within: segment")
    damage(study_folder, "study.yaml", "[night, day]", "[closed, open]")
    damage(study_folder, "study.yaml", "kind: ecg", "kind: ecg\n    segments: [open]")

    study = load_study(study_folder)

    assert study.segments_file == "segments.csv"
    assert len(study.segments) == 16


def test_segments_that_one_person_alone_has_cannot_be_compared(study_folder: Path) -> None:
    """A comparison of segments needs two participants with both."""
    with_segments(study_folder, "p1d,closed,0,60\np1d,open,60,120\np2d,closed,0,60\n")
    damage(study_folder, "study.yaml", "within: condition", "within: segment")
    damage(study_folder, "study.yaml", "[night, day]", "[closed, open]")
    damage(study_folder, "study.yaml", "kind: ecg", "kind: ecg\n    segments: [open]")

    (problem,) = problems_of(study_folder)

    assert problem.found == "1 with both; without open: p2"


def test_a_segment_of_an_unknown_recording_is_refused(study_folder: Path) -> None:
    """A misspelt recording would lose its segment."""
    with_segments(study_folder, "p1x,closed,0,60\n")

    (problem,) = problems_of(study_folder)

    assert (problem.file, problem.where) == ("segments.csv", "row 2, column recording")


def test_segments_may_come_from_annotations(study_folder: Path) -> None:
    """The texts of annotations are names of segments."""
    damage(study_folder, "study.yaml", "mains_hz: 50", "mains_hz: 50\nsegments: {annotations: [closed]}")
    damage(study_folder, "study.yaml", "band: alpha", "band: alpha\n    segment: closed")

    assert load_study(study_folder).description.questions[0].segment == "closed"


@pytest.mark.parametrize(
    ("text", "found"),
    [("", "no keys"), ("- a\n", "no keys"), ("a: [\n", "did not find"), ("\t\n", "cannot start any token")],
)
def test_a_file_that_holds_no_keys_is_refused(study_folder: Path, text: str, found: str) -> None:
    """Empty files, lists and torn YAML are told as such."""
    (study_folder / "study.yaml").write_text(text, encoding="utf-8")

    (problem,) = problems_of(study_folder)

    assert found in problem.found


def test_a_folder_without_a_study_is_refused(tmp_path: Path) -> None:
    """The remedy says how to start."""
    (problem,) = problems_of(tmp_path)

    assert problem.file == "study.yaml"
    assert "bandcairn new" in problem.remedy


@pytest.mark.parametrize(
    "content", ["signals: {}", "signals: 3", "signals: {a: }", "questions: 4", "signals: {a: {kind: []}}"]
)
def test_wrong_shapes_are_problems_and_no_crash(study_folder: Path, content: str) -> None:
    """Whatever stands where a block should is told as a problem."""
    (study_folder / "study.yaml").write_text(f"study: x\nmains_hz: 50\n{content}\n", encoding="utf-8")

    fields = {problem.field.split(".")[0] for problem in problems_of(study_folder)}

    assert fields <= {"signals", "questions"}


def test_a_table_outside_the_study_is_refused(study_folder: Path) -> None:
    """A study is one folder, so that it can be handed on."""
    damage(study_folder, "study.yaml", "mains_hz: 50", "mains_hz: 50\nrecordings: ../recordings.csv")

    assert [problem.field for problem in problems_of(study_folder)] == ["recordings"]
