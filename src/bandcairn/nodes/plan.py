"""From a study and the content of its raw files to the nodes of the plan.

Pure Python and light: a study of a thousand recordings is planned in a fraction of a second, without loading
any numerical library.
"""

from __future__ import annotations

from dataclasses import asdict, dataclass
from fractions import Fraction
from functools import cache
from typing import TYPE_CHECKING, Any

from bandcairn.nodes.key import canonical_json
from bandcairn.nodes.marks import (
    decisions_by_recording,
    events_by_recording,
    onsets,
    recipe_of_decisions,
)
from bandcairn.nodes.node import Node, make_node
from bandcairn.study.facts_check import declared_unit
from bandcairn.study.reference_blocks import BipolarPairs
from bandcairn.study.requested_ranges import requested_ranges

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Mapping

    from pydantic import BaseModel

    from bandcairn.nodes.survey import RawContent
    from bandcairn.signal import Repair
    from bandcairn.study.description import LoadedStudy
    from bandcairn.study.filter_blocks import FilterStage
    from bandcairn.study.models import EcgSignal, EegSignal, EmgSignal, Question
    from bandcairn.study.reference_blocks import Reference
    from bandcairn.study.tables import RecordingRow

    SignalDescription = EegSignal | EcgSignal | EmgSignal


@dataclass(frozen=True, slots=True)
class Plan:
    """Every node of a study.

    Attributes
    ----------
    recording_nodes : dict of str to Node
        Nodes of single recordings by key; parents come before their children.
    study_nodes : dict of str to Node
        Tables and statistics by key, likewise.
    slots : dict of (recording, signal, step) to str
        The key that stands at each place of the chain. Two signals may share a node.
    """

    recording_nodes: dict[str, Node]
    study_nodes: dict[str, Node]
    slots: dict[tuple[str, str, str], str]

    @property
    def nodes(self) -> dict[str, Node]:
        """All nodes by key, parents before children."""
        return {**self.recording_nodes, **self.study_nodes}

    @property
    def id(self) -> str:
        """A short name of the plan, the same whenever its final nodes are."""
        from bandcairn.nodes.key import key_of

        return key_of(canonical_json(sorted(self.study_nodes)))[:16]


def build_plan(study: LoadedStudy, contents: Mapping[str, RawContent]) -> Plan:
    """Plan a study.

    Parameters
    ----------
    study : LoadedStudy
        The checked description and tables.
    contents : mapping of str to RawContent
        What the raw file of each recording holds; a recording whose file cannot be read is absent and is left out.

    Returns
    -------
    Plan
    """
    nodes: dict[str, Node] = {}
    slots: dict[tuple[str, str, str], str] = {}
    chains = [_SignalChain(name, signal, study) for name, signal in study.description.signals.items()]
    for row in study.recordings:
        content = contents.get(row.recording)
        if content is None:
            continue
        for chain in chains:
            for node in chain.nodes(row, content):
                nodes.setdefault(node.key, node)
                slots[row.recording, chain.name, node.step] = node.key
    return Plan(nodes, plan_study_nodes(study, slots), slots)


def plan_study_nodes(
    study: LoadedStudy,
    slots: Mapping[tuple[str, str, str], str],
    available: Callable[[str], bool] = lambda _: True,
) -> dict[str, Node]:
    """Plan the tables and statistics over the recordings whose features are available.

    Parameters
    ----------
    study : LoadedStudy
        The checked description and tables.
    slots : mapping of (recording, signal, step) to str
        Keys of the recordings' nodes.
    available : callable
        Whether the node of a key exists or will; recordings without are left out of the tables.

    Returns
    -------
    dict of str to Node
        By key, parents before children.
    """
    pairs = {
        name: _signal_nodes(name, signal, study, slots, available)
        for name, signal in study.description.signals.items()
    }
    tables = {name: table for name, (_, table) in pairs.items()}
    statistics = [
        _statistics_node(family, questions, study, tables) for family, questions in families(study).items()
    ]
    return {node.key: node for node in (*(node for pair in pairs.values() for node in pair), *statistics)}


def families(study: LoadedStudy) -> dict[str, tuple[Question, ...]]:
    """Return the questions by family, in the order of the study; one without a family is its own."""
    grouped: dict[str, tuple[Question, ...]] = {}
    for question in study.description.questions:
        family = question.family or question.name
        grouped[family] = (*grouped.get(family, ()), question)
    return grouped


def _recipe(block: BaseModel, exclude: set[str] | None = None) -> dict[str, Any]:
    """Return a block of the description as it enters a recipe.

    What is absent stays out: an option that a later version adds, absent by default, leaves every key as it was.
    """
    return block.model_dump(mode="json", exclude_none=True, exclude=exclude)


def _stage_recipe(stage: FilterStage, mains_hz: float) -> dict[str, Any]:
    """Return a filter stage; a notch alone depends on the frequency of the mains."""
    return {**_recipe(stage), "mains_hz": mains_hz} if stage.type == "notch" else _recipe(stage)


def _reference_recipe(reference: Reference) -> dict[str, Any]:
    """Return a reference; pairs as a list, which keeps their order."""
    if isinstance(reference, BipolarPairs):
        return {"pairs": [(name, *members) for name, members in reference.pairs.items()]}
    return {"reference": reference}


def design_columns(study: LoadedStudy) -> tuple[str, ...]:
    """Return the design columns of the recordings table, in their order."""
    return tuple(study.recordings[0].design)


class _SignalChain:
    """The nodes of one signal; what all recordings share is put into canonical JSON once."""

    def __init__(self, name: str, signal: SignalDescription, study: LoadedStudy) -> None:
        self.name = name
        self.signal = signal
        self.channels = signal.channels
        self.declared = signal.load or study.description.load
        mains_hz = study.description.mains_hz
        self.filter = canonical_json({"stages": [_stage_recipe(stage, mains_hz) for stage in signal.filter]})
        self.reference = canonical_json(_reference_recipe(signal.reference)) if signal.reference else None
        self.spectrum = canonical_json({"kind": signal.kind, **_recipe(signal.spectrum)})
        self.features = canonical_json({"kind": signal.kind, **_recipe(signal.features), **_least(signal)})
        resample = signal.resample
        self.resample = canonical_json({} if resample is None else {"rate_hz": resample.rate_hz})
        self.mains_hz = study.description.mains_hz
        self.load_parameters = cache(self._load_parameters)
        self.quality_parameters = cache(self._quality_parameters)
        self.epoch_parameters = cache(self._epoch_parameters)
        self.segments = _segments_by_recording(study)
        self.events = events_by_recording(study)
        self.decisions = decisions_by_recording(study)

    def nodes(self, row: RecordingRow, content: RawContent) -> Iterator[Node]:
        """Yield the nodes of one recording, parents first."""

        def make(step: str, parameters: str, *, raw: tuple[str, ...] = (), **parents: str) -> Node:
            return make_node(
                step,
                parameters=parameters,
                parents=tuple(parents.items()),
                raw=raw,
                recording=row.recording,
                signal=self.name,
            )

        rate_hz, unit = self._declared_for(content)
        load = make(
            "load",
            self.load_parameters(rate_hz, unit, row.start_s, row.stop_s, self._found_in(content)),
            raw=tuple(content.digest_of(channel) for channel in self.channels),
        )
        yield load
        prefilters = tuple(content.facts_of(channel).prefilter or "" for channel in self.channels)
        yield make("quality", self.quality_parameters(prefilters), signal=load.key)
        key = load.key
        resample = self.signal.resample
        if resample is not None and _exact(resample.rate_hz) != _exact(
            content.rate_hz(self.channels[0], rate_hz)
        ):
            node = make("resample", self.resample, signal=key)
            key = node.key
            yield node
        if self.reference is not None:
            node = make("reference", self.reference, signal=key)
            key = node.key
            yield node
        if self.signal.filter:
            node = make("filter", self.filter, signal=key)
            key = node.key
            yield node
        yield from self._from_samples_to_features(make, key, row, content)

    def _from_samples_to_features(
        self, make: Callable[..., Node], samples: str, row: RecordingRow, content: RawContent
    ) -> Iterator[Node]:
        epoch = make("epoch", self._epoch_recipe(row, content), signal=samples)
        if self.signal.kind == "ecg":
            beats = make("beats", "{}", signal=samples)
            yield beats
            sources = {"beats": beats.key}
        else:
            sources = {"signal": samples}
        yield epoch
        spectrum = make("spectrum", self.spectrum, epochs=epoch.key, **sources)
        yield spectrum
        if self.signal.kind == "eeg":
            sources = {}
        yield make("features", self.features, epochs=epoch.key, spectrum=spectrum.key, **sources)

    def _declared_for(self, content: RawContent) -> tuple[float | None, str | None]:
        """Return the declared rate and unit where the file states none: else they are no part of the recipe."""
        channels = [content.facts_of(channel) for channel in self.channels]
        rate_hz = self.declared.rate_hz if channels[0].rate_hz is None else None
        units = (declared_unit(channel, content.facts, self.declared) for channel in channels)
        return rate_hz, next(filter(None, units), None)

    def _found_in(self, content: RawContent) -> _Found:
        """Return what sets the file of a recording apart from a plain one."""
        labels = tuple(content.label_of(channel) for channel in self.channels)
        table = content.facts.details.format in ("delimited", "Parquet")
        return _Found(
            labels=labels if labels != self.channels else None,
            missing=self.declared.missing if table and self.declared.missing == "gap" else None,
            repair=content.facts.repair,
            own_unit=not table and content.facts.details.format != "",
        )

    def _segments(self, row: RecordingRow, content: RawContent) -> tuple[tuple[str, float, float], ...]:
        declared = self.segments.get(row.recording, ()) or content.annotated_segments
        wanted = self.signal.segments
        return tuple(segment for segment in declared if wanted is None or segment[0] in wanted)

    def _load_parameters(
        self,
        rate_hz: float | None,
        unit: str | None,
        start_s: float | None,
        stop_s: float | None,
        found: _Found,
    ) -> str:
        stated: dict[str, Any] = {
            "rate_hz": rate_hz,
            "unit": unit,
            "start_s": start_s,
            "stop_s": stop_s,
            "labels": found.labels,
            "missing": found.missing,
            "unit_reason": self.declared.unit_reason if unit is not None and found.own_unit else None,
        }
        if found.repair is not None:
            stated |= {"repair": asdict(found.repair), "max_missing_share": self.declared.max_missing_share}
        known = {name: value for name, value in stated.items() if value is not None}
        return canonical_json({"channels": self.channels, **known})

    def _quality_parameters(self, prefilters: tuple[str, ...]) -> str:
        """Return what quality is measured by: no limit is among it, so that one may change without measuring anew."""
        stated: dict[str, Any] = {"mains_hz": self.mains_hz}
        if any(prefilters):
            stated["prefilter"] = prefilters
        if self.signal.recorder is not None:
            stated |= _recipe(self.signal.recorder)
        if self.signal.quality.accept_other_mains is not None:
            stated["accept_other_mains"] = self.signal.quality.accept_other_mains
        return canonical_json(stated)

    def _epoch_recipe(self, row: RecordingRow, content: RawContent) -> str:
        """Return the recipe of a recording's epochs; of events and decisions only those that touch it."""
        segments = self._segments(row, content)
        marks: dict[str, Any] = {}
        if self.signal.epoch.events:
            listed = None if self.events is None else self.events.get(row.recording, ())
            marks["events"] = onsets(self.signal.epoch.events, listed, content)
        decided = recipe_of_decisions(self.decisions.get(row.recording, ()), self.name, self.signal)
        if decided:
            marks["decisions"] = decided
        return self._epoch_parameters(segments, marks) if marks else self.epoch_parameters(segments)

    def _epoch_parameters(
        self, segments: tuple[tuple[str, float, float], ...], marks: Mapping[str, Any] | None = None
    ) -> str:
        recipe = _recipe(self.signal.epoch, exclude={"least"})
        return canonical_json({**recipe, "segments": segments, **(marks or {})})


@dataclass(frozen=True, slots=True)
class _Found:
    """What enters the recipe of a load only where a file is not plain: none of it moves the key of one that is.

    Attributes
    ----------
    labels : tuple of str or None
        Labels in the file, where the study calls a channel otherwise.
    missing : str or None
        ``"gap"`` where the study declares so of a table.
    repair : Repair or None
        What was found where the size of the file does not fit its header.
    own_unit : bool
        Whether the format states units, so that another one needs a reason.
    """

    labels: tuple[str, ...] | None
    missing: str | None
    repair: Repair | None
    own_unit: bool


def _least(signal: SignalDescription) -> dict[str, int]:
    """Return the least number of epochs as the features know it: another one lays no epoch anew."""
    return {} if signal.epoch.least is None else {"least": signal.epoch.least}


@cache
def _exact(rate_hz: Fraction | float | None) -> Fraction:
    """Return a rate as the fraction its shortest text means: 102.4 and 512/5 are one rate."""
    return Fraction(str(rate_hz))


def _segments_by_recording(study: LoadedStudy) -> dict[str, tuple[tuple[str, float, float], ...]]:
    """Return name, start and stop of each recording's segments, in the order of time."""
    segments: dict[str, tuple[tuple[str, float, float], ...]] = {}
    for row in sorted(study.segments, key=lambda row: (row.start_s, row.stop_s, row.segment)):
        present = segments.get(row.recording, ())
        segments[row.recording] = (*present, (row.segment, row.start_s, row.stop_s))
    return segments


def _signal_nodes(
    name: str,
    signal: SignalDescription,
    study: LoadedStudy,
    slots: Mapping[tuple[str, str, str], str],
    available: Callable[[str], bool],
) -> tuple[Node, Node]:
    """Return the verdict and the table of one signal, over the recordings that have both features and quality."""
    rows: list[dict[str, Any]] = []
    keys: dict[str, list[tuple[str, str]]] = {"features": [], "quality": []}
    for row in sorted(study.recordings, key=lambda row: row.recording):
        found = {step: slots.get((row.recording, name, step), "") for step in keys}
        if all(key and available(key) for key in found.values()):
            rows.append({"recording": row.recording, "participant": row.participant, "design": row.design})
            for step, key in found.items():
                keys[step].append((f"{step}/{row.recording}", key))
    verdict = make_node(
        "verdict",
        parameters=canonical_json(_judged_by(name, signal)),
        parents=tuple(keys["quality"]),
        signal=name,
    )
    parameters: dict[str, Any] = {
        "design": design_columns(study),
        "on_failure": signal.quality.on_failure,
        "on_band_failure": signal.quality.on_band_failure,
        "rows": rows,
    }
    if signal.reference is not None:
        parameters["reference"] = _reference_recipe(signal.reference)
    table = make_node(
        "table",
        parameters=canonical_json(parameters),
        parents=(*keys["features"], ("verdict", verdict.key)),
        signal=name,
    )
    return verdict, table


def _judged_by(name: str, signal: SignalDescription) -> dict[str, Any]:
    """Return what a signal's quality is held against."""
    told = {"on_failure", "on_band_failure", "accept_other_mains"}
    judged_by = {
        "signal": name,
        "kind": signal.kind,
        "limits": _recipe(signal.quality, exclude=told),
        "bands_hz": requested_ranges(signal),
    }
    return judged_by if signal.resample is None else {**judged_by, "resample_hz": signal.resample.rate_hz}


def _statistics_node(
    family: str, questions: tuple[Question, ...], study: LoadedStudy, tables: Mapping[str, Node]
) -> Node:
    signals = study.description.signals
    parameters = {
        "family": family,
        "adjustment": questions[0].adjustment or "holm",
        "questions": [
            _question(question, signals[question.signal].measured_channels) for question in questions
        ],
    }
    asked = sorted({question.signal for question in questions})
    return make_node(
        "statistics",
        parameters=canonical_json(parameters),
        parents=tuple((f"table/{signal}", tables[signal].key) for signal in asked),
    )


def _question(question: Question, channels: tuple[str, ...]) -> dict[str, Any]:
    """Return a question with the names of its channels written out."""
    named = channels if isinstance(question.channels, str) else question.channels
    return {**_recipe(question, exclude={"family", "adjustment", "role"}), "channel_names": named}
