"""The models of study.yaml: frozen, unknown keys refused, every default written out.

Each key carries its meaning, unit and range; ``config/README.md`` prints them and a test compares the two.
``model_dump(mode="json", exclude_none=True)`` of a block is the complete, default-expanded description of its step.
"""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import AfterValidator, Field, model_validator

from bandcairn.study.blocks import (
    Band,
    Block,
    Name,
    Names,
    Number,
    Overlap,
    Positive,
    Share,
    refusal,
    told,
)
from bandcairn.study.epoch_blocks import Epoch  # noqa: TC001 - pydantic reads it to build the model
from bandcairn.study.filter_blocks import FilterStage  # noqa: TC001 - pydantic reads it to build the model
from bandcairn.study.quality_blocks import EcgQuality, EegQuality, EmgQuality, QualityLimits, Recorder
from bandcairn.study.reference_blocks import Reference, referenced_channels
from bandcairn.units import KNOWN_UNITS

# Contract names that no step computes yet: they are refused by name rather than as a misspelling.
NOT_YET_AVAILABLE = {
    "method": ("multitaper", "lomb_scargle"),
    "test": ("rm_anova", "anova", "mixed_model", "regression"),
}
# Which tests compare people with themselves, and which compare different people.
TESTS_OF = {
    "within": ("paired_t", "wilcoxon", "permutation"),
    "between": ("welch_t", "mann_whitney", "permutation"),
}


def _known_unit(unit: str) -> str:
    if unit.strip() not in KNOWN_UNITS:
        allowed = f"one of {', '.join(KNOWN_UNITS)}"
        raise refusal("", repr(unit), allowed, "Write the unit of the file's numbers.")
    return unit.strip()


Window = Literal["hann", "hamming", "blackman", "boxcar"]

_WINDOWS = "hann, hamming, blackman or boxcar"
_BAND = "two increasing values, the lower one 0 or above"


class Load(Block):
    """What a file does not say of itself, and how much of it may be missing."""

    rate_hz: Positive | None = Field(
        default=None,
        description="Sampling rate of delimited and Parquet files that have no time_s column.",
        json_schema_extra=told("Hz", "above 0"),
    )
    unit: Annotated[str, AfterValidator(_known_unit)] | None = Field(
        default=None,
        description="Unit of the numbers in delimited and Parquet files; with a reason also of EDF and BDF "
        "channels whose unit is blank or unknown.",
        json_schema_extra=told("", f"one of {', '.join(KNOWN_UNITS)}"),
    )
    unit_reason: Name | None = Field(
        default=None,
        description="Why the unit is known although an EDF or BDF file does not tell it; recorded with every load.",
        json_schema_extra=told("", "text; only with unit"),
    )
    missing: Literal["refuse", "gap"] = Field(
        default="refuse",
        description="What blank cells and jumps of the clock of delimited and Parquet files are: a fault, or a gap.",
        json_schema_extra=told("", "refuse or gap"),
    )
    max_missing_share: Share = Field(
        default=0.01,
        description="Largest share of its data records by which an EDF or BDF file may differ from its header's "
        "number; the whole records are used, and what was found is recorded.",
        json_schema_extra=told("share", "0 to 1"),
    )

    @model_validator(mode="after")
    def _a_reason_is_for_a_unit(self) -> Load:
        if self.unit_reason is not None and self.unit is None:
            raise refusal(
                "unit", "nothing", f"one of {', '.join(KNOWN_UNITS)}", "A unit_reason needs a unit."
            )
        return self


class Resample(Block):
    """A lower common rate."""

    rate_hz: Positive = Field(
        description="New sampling rate; never above that of the file.",
        json_schema_extra=told("Hz", "above 0, at most the rate of the file"),
    )


class _Spectrum(Block):
    """Spectrum of an epoch of samples."""

    method: Literal["periodogram", "welch"] = Field(
        description="periodogram: the whole epoch at once; welch: mean over shorter segments of the epoch.",
        json_schema_extra=told("", "periodogram or welch"),
    )
    window: Window = Field(
        default="hann",
        description="Taper of the epoch or of each segment.",
        json_schema_extra=told("", _WINDOWS),
    )
    segment_s: Positive | None = Field(
        default=None,
        description="Length of a welch segment; its inverse is the frequency resolution.",
        json_schema_extra=told("s", "above 0, at most the epoch; welch only, which requires it"),
    )
    overlap: Overlap = Field(
        default=0.5,
        description="Share of a welch segment that it has in common with the next; 0 for a periodogram.",
        json_schema_extra=told("share", "0 or above, below 1; welch only"),
    )
    detrend: Literal["none", "constant"] = Field(
        default="constant",
        description="What is subtracted from each segment first: nothing, or its mean.",
        json_schema_extra=told("", "none or constant"),
    )

    @model_validator(mode="before")
    @classmethod
    def _periodogram_has_no_overlap(cls, data: Any) -> Any:  # noqa: ANN401 - pydantic hands over what it got
        if isinstance(data, dict) and data.get("method") == "periodogram":
            return {"overlap": 0.0, **data}
        return data

    @model_validator(mode="after")
    def _segments_belong_to_welch(self) -> _Spectrum:
        if self.method == "welch" and self.segment_s is None:
            raise refusal("segment_s", "nothing", "a length in seconds, above 0", "welch needs segment_s.")
        if self.method == "periodogram" and self.segment_s is not None:
            found = f"{self.segment_s:g}"
            raise refusal("segment_s", found, "no segment_s with periodogram", "Delete it, or use welch.")
        if self.method == "periodogram" and self.overlap != 0:
            found = f"{self.overlap:g}"
            raise refusal("overlap", found, "no overlap with periodogram", "Delete it, or use welch.")
        return self


class EegSpectrum(_Spectrum):
    """Spectrum of an epoch of EEG."""


class EmgSpectrum(_Spectrum):
    """Spectrum of an epoch of EMG."""


class EcgSpectrum(Block):
    """Spectrum of the intervals between heart beats."""

    method: Literal["welch"] = Field(
        description="welch: mean over segments of the evenly interpolated intervals.",
        json_schema_extra=told("", "welch"),
    )
    interpolation_hz: Positive = Field(
        default=4.0,
        description="Rate at which the intervals are interpolated.",
        json_schema_extra=told("Hz", "above 0, at least twice the highest band edge"),
    )
    window: Window = Field(
        default="hann", description="Taper of each segment.", json_schema_extra=told("", _WINDOWS)
    )
    segment_s: Positive = Field(
        description="Length of a segment; its inverse is the frequency resolution.",
        json_schema_extra=told("s", "above 0, at most the epoch"),
    )
    overlap: Overlap = Field(
        default=0.5,
        description="Share of a segment that it has in common with the next.",
        json_schema_extra=told("share", "0 or above, below 1"),
    )
    detrend: Literal["none", "constant", "linear"] = Field(
        default="linear",
        description="What is subtracted from each segment first: nothing, its mean, or its straight line.",
        json_schema_extra=told("", "none, constant or linear"),
    )


class EegFeatures(Block):
    """What is measured on the spectrum of EEG."""

    bands_hz: Annotated[dict[Name, Band], Field(min_length=1)] = Field(
        description="Names and edges of the bands; a band holds its lower edge, not its upper one.",
        json_schema_extra=told("Hz", f"at least one name with {_BAND}"),
    )
    total_hz: Band | None = Field(
        default=None,
        description="Range of the total power and of the spectral edge; absent: lowest to highest band edge.",
        json_schema_extra=told("Hz", f"{_BAND}; every band inside"),
    )


class EcgFeatures(Block):
    """What is measured on the spectrum of beat intervals."""

    # Band edges: Task Force of the ESC and NASPE (1996), Circulation 93, 1043-1065.
    bands_hz: Annotated[dict[Name, Band], Field(min_length=1)] = Field(
        default={"vlf": (0.003, 0.04), "lf": (0.04, 0.15), "hf": (0.15, 0.4)},
        description="Names and edges of the bands; a band holds its lower edge, not its upper one.",
        json_schema_extra=told("Hz", f"at least one name with {_BAND}"),
    )


class EmgFeatures(Block):
    """What is measured on EMG; it has no keys yet."""


class _Signal(Block):
    """What signals of every kind have in common."""

    channels: Annotated[Names, Field(min_length=1)] = Field(
        description="Names of the channels as they stand in the files, or names that aliases explains.",
        json_schema_extra=told("", "at least one name, each once"),
    )
    segments: Names | None = Field(
        default=None,
        description="Names of the segments used; absent: all that a recording declares; "
        "an empty list: the whole recording.",
        json_schema_extra=told("", "a list of declared segment names"),
    )
    load: Load | None = Field(
        default=None,
        description="What files do not say of themselves, for this signal; absent: the study's load.",
        json_schema_extra=told("", "a load block"),
    )
    recorder: Recorder | None = Field(
        default=None,
        description="What the recorder lets pass; absent: what the files say of it.",
        json_schema_extra=told("", "a recorder block"),
    )
    quality: QualityLimits = Field(
        default=QualityLimits(),
        description="How good a channel must be.",
        json_schema_extra=told("", "a quality block"),
    )
    resample: Resample | None = Field(
        default=None,
        description="A lower common rate, reached before the filters; absent: the rate of the file.",
        json_schema_extra=told("", "a resample block"),
    )
    reference: Reference | None = Field(
        default=None,
        description="What the channels are measured against, after resampling and before the filters; "
        "absent: as recorded.",
        json_schema_extra=told("", "average, a list of the signal's channels, or {pairs: {name: [a, b]}}"),
    )
    filter: tuple[FilterStage, ...] = Field(
        default=(),
        description="Filters, applied in the order in which they stand; absent: none.",
        json_schema_extra=told("", "a list of filter stages"),
    )
    epoch: Epoch = Field(
        description="How a stretch is cut into epochs.", json_schema_extra=told("", "an epoch block")
    )

    @property
    def measured_channels(self) -> tuple[str, ...]:
        """The channels that features and questions know: those that re-referencing leaves or makes."""
        return referenced_channels(self.channels, self.reference)


class EegSignal(_Signal):
    """Channels of EEG that are processed alike."""

    kind: Literal["eeg"] = Field(
        description="What the channels record.", json_schema_extra=told("", "eeg, ecg or emg")
    )
    quality: EegQuality = Field(
        default=EegQuality(),
        description="How good a channel must be.",
        json_schema_extra=told("", "a quality block"),
    )
    spectrum: EegSpectrum = Field(
        description="How the spectrum is estimated.", json_schema_extra=told("", "a spectrum block")
    )
    features: EegFeatures = Field(
        description="What is measured.", json_schema_extra=told("", "a features block")
    )


class EcgSignal(_Signal):
    """Channels of ECG that are processed alike."""

    kind: Literal["ecg"] = Field(
        description="What the channels record.", json_schema_extra=told("", "eeg, ecg or emg")
    )
    quality: EcgQuality = Field(
        default=EcgQuality(),
        description="How good a channel must be.",
        json_schema_extra=told("", "a quality block"),
    )
    spectrum: EcgSpectrum = Field(
        description="How the spectrum of the beat intervals is estimated.",
        json_schema_extra=told("", "a spectrum block"),
    )
    features: EcgFeatures = Field(
        default=EcgFeatures(),
        description="What is measured.",
        json_schema_extra=told("", "a features block"),
    )


class EmgSignal(_Signal):
    """Channels of EMG that are processed alike."""

    kind: Literal["emg"] = Field(
        description="What the channels record.", json_schema_extra=told("", "eeg, ecg or emg")
    )
    quality: EmgQuality = Field(
        default=EmgQuality(),
        description="How good a channel must be.",
        json_schema_extra=told("", "a quality block"),
    )
    spectrum: EmgSpectrum = Field(
        description="How the spectrum is estimated.", json_schema_extra=told("", "a spectrum block")
    )
    features: EmgFeatures = Field(
        default=EmgFeatures(),
        description="What is measured; no keys yet.",
        json_schema_extra=told("", "an empty block"),
    )


AnySignal = EegSignal | EcgSignal | EmgSignal


def _around_zero(bounds: tuple[float, float]) -> tuple[float, float]:
    if not bounds[0] < 0 < bounds[1]:
        found = f"[{bounds[0]:g}, {bounds[1]:g}]"
        raise refusal("", found, "two values with 0 between them", "Write the lower value first.")
    return bounds


class Question(Block):
    """One declared comparison."""

    name: Name = Field(
        description="Name of the question in the results.",
        json_schema_extra=told("", "text, each name once"),
    )
    signal: Name = Field(
        description="Signal whose feature is compared.", json_schema_extra=told("", "a declared signal")
    )
    feature: Name = Field(
        description="Feature that is compared.",
        json_schema_extra=told("", "a feature of the signal's kind"),
    )
    band: Name | None = Field(
        default=None,
        description="Band of the feature; required for a feature per band, absent for any other.",
        json_schema_extra=told("", "a band of the signal"),
    )
    channels: Literal["each", "mean"] | Annotated[Names, Field(min_length=1)] = Field(
        default="each",
        description="each: one test per channel; mean: one test of the channels' mean; "
        "a list: one test for each channel named.",
        json_schema_extra=told("", "each, mean or a list of the signal's channels"),
    )
    segment: Name | None = Field(
        default=None,
        description="Segment that is compared; required when the signal uses several, "
        "unless they are what is compared.",
        json_schema_extra=told("", "a segment of the signal"),
    )
    scale: Literal["identity", "log10", "ln", "logit"] = Field(
        default="identity",
        description="Transformation of each value before the test.",
        json_schema_extra=told("", "identity, log10, ln or logit"),
    )
    within: Name | None = Field(
        default=None,
        description="Design column whose levels are compared within each participant, or segment.",
        json_schema_extra=told("", "a design column or segment; either within or between"),
    )
    between: Name | None = Field(
        default=None,
        description="Design column whose levels are groups of different participants.",
        json_schema_extra=told("", "a design column; either within or between"),
    )
    contrast: tuple[Name, Name] = Field(
        description="The two levels compared: the estimate is the first minus the second.",
        json_schema_extra=told("", "two different levels of the column"),
    )
    test: Literal["paired_t", "wilcoxon", "welch_t", "mann_whitney", "permutation"] = Field(
        description="paired_t, wilcoxon: differences within participants, by their mean or their ranks; "
        "welch_t, mann_whitney: two groups, by means of unequal variance or by ranks; "
        "permutation: mean difference, by flipping signs or exchanging people.",
        json_schema_extra=told(
            "",
            "paired_t, wilcoxon or permutation (with within), "
            "welch_t, mann_whitney or permutation (with between)",
        ),
    )
    seed: Annotated[int, Field(strict=True, ge=0)] | None = Field(
        default=None,
        description="Seed of a permutation test with more than 32768 arrangements; absent: 0.",
        json_schema_extra=told("", "a whole number, 0 or above; permutation only"),
    )
    family: Name | None = Field(
        default=None,
        description="p values of one family are adjusted together; absent: the question is its own family.",
        json_schema_extra=told("", "text"),
    )
    adjustment: Literal["holm", "bonferroni", "benjamini_hochberg", "benjamini_yekutieli", "none"] | None = (
        Field(
            default=None,
            description="What the adjusted p values of the family hold: the family-wise error rate (holm, bonferroni), "
            "the false discovery rate (benjamini_hochberg, benjamini_yekutieli) or nothing; absent: holm.",
            json_schema_extra=told(
                "",
                "holm, bonferroni, benjamini_hochberg, benjamini_yekutieli or none; the same in a whole family",
            ),
        )
    )
    equivalence: Annotated[tuple[Number, Number], AfterValidator(_around_zero)] | None = Field(
        default=None,
        description="Largest differences that do not matter, on the scale: tested for equivalence by two one-sided "
        "tests in a row of its own; absent: not tested.",
        json_schema_extra=told(
            "unit of the estimate", "two values with 0 between them; paired_t or welch_t only"
        ),
    )
    role: Literal["primary", "secondary", "exploratory"] | None = Field(
        default=None,
        description="What the study makes of the answer, told beside it; it changes no number; absent: not told.",
        json_schema_extra=told("", "primary, secondary or exploratory"),
    )
    confidence: Annotated[Number, Field(gt=0.5, lt=1)] = Field(
        default=0.95,
        description="Coverage of the confidence intervals.",
        json_schema_extra=told("share", "above 0.5, below 1"),
    )

    @model_validator(mode="after")
    def _one_comparison(self) -> Question:
        if (self.within is None) == (self.between is None):
            found = "neither within nor between" if self.within is None else "both within and between"
            raise refusal("", found, "one of the two", "Name the column in within or in between.")
        side = "within" if self.between is None else "between"
        if self.test not in TESTS_OF[side]:
            allowed = f"{', '.join(TESTS_OF[side][:-1])} or {TESTS_OF[side][-1]} with {side}"
            raise refusal("test", self.test, allowed, "Change test, or the kind of comparison.")
        if self.seed is not None and self.test != "permutation":
            raise refusal(
                "seed", str(self.seed), f"no seed with {self.test}", "Delete it, or use permutation."
            )
        if self.equivalence is not None and not self.test.endswith("_t"):
            allowed = f"no equivalence with {self.test}"
            raise refusal("equivalence", "bounds", allowed, "Delete it, or use paired_t or welch_t.")
        if self.contrast[0] == self.contrast[1]:
            raise refusal("contrast", f"{self.contrast[0]} twice", "two different levels", "Name two levels.")
        return self


class AnnotationSegments(Block):
    """Segments that are taken from the annotations of the files."""

    annotations: Annotated[Names, Field(min_length=1)] = Field(
        description="Texts of the annotations whose stretches become segments of that name.",
        json_schema_extra=told("", "at least one text, each once"),
    )


class StudyDescription(Block):
    """The whole of study.yaml."""

    study: Name = Field(description="Title of the study.", json_schema_extra=told("", "text"))
    recordings: Name = Field(
        default="recordings.csv",
        description="Table of recordings, in the study folder.",
        json_schema_extra=told("", "path of a .csv or .tsv file"),
    )
    segments: Name | AnnotationSegments | None = Field(
        default=None,
        description="Table of segments, or the annotations that become segments; "
        "absent: segments.csv where the study folder has one.",
        json_schema_extra=told("", "path of a .csv or .tsv file, or {annotations: [texts]}"),
    )
    events: Name | None = Field(
        default=None,
        description="Table of events that epochs may lie about; absent: events.csv where the study folder has one, "
        "else the annotations of the files.",
        json_schema_extra=told("", "path of a .csv or .tsv file"),
    )
    decisions: Name | None = Field(
        default=None,
        description="Table of the stretches and channels that someone has decided to leave out; "
        "absent: decisions.csv where the study folder has one.",
        json_schema_extra=told("", "path of a .csv or .tsv file"),
    )
    mains_hz: Literal[50, 60] = Field(
        description="Mains frequency where the study was recorded.", json_schema_extra=told("Hz", "50 or 60")
    )
    aliases: dict[Name, Annotated[Names, Field(min_length=1)]] | None = Field(
        default=None,
        description="Channel names of the study and the labels under which they stand in files; the name itself "
        "wins where a file has it.",
        json_schema_extra=told("", "names, each with a list of labels; no label under two names"),
    )
    accept_same_content: Name | None = Field(
        default=None,
        description="Why two recordings may hold the very same samples; absent: that is refused.",
        json_schema_extra=told("", "the reason, in words"),
    )
    load: Load = Field(
        default=Load(),
        description="What files do not say of themselves, for every signal without a load block of its own.",
        json_schema_extra=told("", "a load block"),
    )
    signals: Annotated[dict[Name, Annotated[AnySignal, Field(discriminator="kind")]], Field(min_length=1)] = (
        Field(
            description="Names of the signals and how each is processed.",
            json_schema_extra=told("", "at least one named signal"),
        )
    )
    questions: tuple[Question, ...] = Field(
        default=(),
        description="The comparisons that the study declares.",
        json_schema_extra=told("", "a list of questions, each name once"),
    )

    @model_validator(mode="after")
    def _aliases_are_clear(self) -> StudyDescription:
        aliases = self.aliases or {}
        meant = [(label, name) for name, labels in aliases.items() for label in labels]
        first = dict(reversed(meant))
        twice = sorted(
            {label for label, name in meant if first[label] != name or label in {*aliases} - {name}}
        )
        if twice:
            found = f"{', '.join(twice)} with two meanings"
            raise refusal("aliases", found, "each label under one name", "Delete one of the two.")
        channels = {channel for signal in self.signals.values() for channel in signal.channels}
        unused = sorted(set(aliases) - channels)
        if unused:
            allowed = f"channels of the signals: {', '.join(sorted(channels))}"
            raise refusal("aliases", ", ".join(unused), allowed, "Correct the name, or delete it.")
        return self

    def load_of(self, signal: AnySignal) -> Load:
        """Return what is declared of files: the signal's own load block, else the study's."""
        return signal.load or self.load
