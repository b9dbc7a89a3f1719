"""Which keys of a filter stage belong together, and how a reference names channels."""

from __future__ import annotations

from typing import Any

import pytest
from pydantic import ValidationError

from bandcairn.study.filter_blocks import NOTCH, FilterStage
from bandcairn.study.filter_checks import TRANSITION_TIMES_LENGTH, reach_s
from bandcairn.study.reference_blocks import BipolarPairs, referenced_channels

LOW = {"type": "lowpass", "cutoff_hz": 30}
SOUND: list[dict[str, Any]] = [
    {**LOW, "design": "butterworth", "order": 4},
    {**LOW, "design": "butterworth", "order": 4, "corrected": True},
    {**LOW, "design": "bessel", "order": 4, "corrected": True},
    {**LOW, "design": "chebyshev1", "order": 4, "ripple_db": 1.5},
    {**LOW, "design": "chebyshev1", "order": 4, "ripple_db": 3, "phase": "causal"},
    {**LOW, "design": "chebyshev2", "order": 4, "attenuation_db": 40},
    {**LOW, "design": "elliptic", "order": 4, "attenuation_db": 40, "ripple_db": 1},
    {**LOW, "design": "fir", "window": "hann", "transition_hz": 5},
    {**LOW, "design": "fir", "attenuation_db": 60, "transition_hz": 60},
    {"type": "notch"},
    {"type": "notch", "width_hz": 1, "harmonics": False, "order": 1, "phase": "causal"},
]
# Each with the key at fault and what is said of it.
UNSOUND: list[tuple[dict[str, Any], str, str]] = [
    ({**LOW, "order": 4}, "design", "found nothing"),
    ({**LOW, "design": "butterworth"}, "order", "butterworth needs it"),
    (
        {"type": "lowpass", "design": "butterworth", "order": 4},
        "cutoff_hz",
        "found nothing; allowed: one value",
    ),
    ({"type": "notch", "cutoff_hz": 50}, "cutoff_hz", "allowed: no value for notch"),
    ({"type": "notch", "design": "elliptic"}, "design", "butterworth for a notch"),
    ({"type": "notch", "corrected": True}, "corrected", "no corrected with notch"),
    ({"type": "notch", "width_hz": 21}, "width_hz", "less than or equal to 20"),
    ({"type": "notch", "width_hz": None}, "width_hz", "notch needs it"),
    ({**LOW, "design": "butterworth", "order": 4, "width_hz": 2}, "width_hz", "no width_hz with butterworth"),
    ({**LOW, "design": "butterworth", "order": 4, "harmonics": False}, "harmonics", "found false"),
    ({**LOW, "design": "butterworth", "order": 4, "ripple_db": 1}, "ripple_db", "found 1; allowed: no"),
    ({**LOW, "design": "bessel", "order": 4, "attenuation_db": 40}, "attenuation_db", "no attenuation_db"),
    ({**LOW, "design": "chebyshev1", "order": 4}, "ripple_db", "chebyshev1 needs it"),
    (
        {**LOW, "design": "chebyshev1", "order": 4, "ripple_db": 1.6},
        "ripple_db",
        "at most 1.5 with phase zero",
    ),
    ({**LOW, "design": "chebyshev2", "order": 4}, "attenuation_db", "chebyshev2 needs it"),
    ({**LOW, "design": "elliptic", "order": 4, "ripple_db": 1}, "attenuation_db", "elliptic needs it"),
    (
        {**LOW, "design": "elliptic", "order": 4, "ripple_db": 1, "attenuation_db": 40, "corrected": True},
        "corrected",
        "no corrected with elliptic",
    ),
    (
        {**LOW, "design": "butterworth", "order": 4, "corrected": True, "phase": "causal"},
        "corrected",
        "causal, which runs once",
    ),
    ({**LOW, "design": "butterworth", "order": 4, "corrected": "yes"}, "corrected", "valid boolean"),
    ({**LOW, "design": "fir", "window": "hann"}, "transition_hz", "fir needs it"),
    ({**LOW, "design": "fir", "transition_hz": 5}, "", "neither window nor attenuation_db"),
    (
        {**LOW, "design": "fir", "transition_hz": 5, "window": "hann", "attenuation_db": 60},
        "",
        "both window and attenuation_db",
    ),
    ({**LOW, "design": "fir", "transition_hz": 5, "attenuation_db": 20}, "attenuation_db", "at least 21"),
    (
        {**LOW, "design": "fir", "transition_hz": 5, "window": "hann", "order": 4},
        "order",
        "no order with fir",
    ),
    ({**LOW, "design": "fir", "transition_hz": 61, "window": "hann"}, "transition_hz", "at most 60 Hz"),
    (
        {"type": "bandpass", "cutoff_hz": [8, 13], "design": "fir", "transition_hz": 6, "window": "hann"},
        "transition_hz",
        "at most 5 Hz",
    ),
]


@pytest.mark.parametrize("stage", SOUND, ids=str)
def test_a_complete_stage_is_taken_and_reads_back_the_same(stage: dict[str, Any]) -> None:
    """With every default written out, and with every absent key as null."""
    read = FilterStage.model_validate(stage)

    assert FilterStage.model_validate(read.model_dump()) == read
    assert FilterStage.model_validate(read.model_dump(exclude_none=True)) == read


@pytest.mark.parametrize(("stage", "key", "message"), UNSOUND, ids=lambda value: str(value)[:90])
def test_a_key_that_lacks_or_does_not_belong_is_refused(
    stage: dict[str, Any], key: str, message: str
) -> None:
    """The key is named, and the reason."""
    with pytest.raises(ValidationError, match=message) as caught:
        FilterStage.model_validate(stage)
    (detail,) = caught.value.errors()
    assert detail.get("ctx", {}).get("field", *detail["loc"][:1]) == key


def test_a_stage_without_new_keys_is_written_as_before() -> None:
    """The recipe of a plain filter, and so its key, knows nothing of options that it does not use."""
    stage = {**LOW, "design": "butterworth", "order": 4}

    written = FilterStage.model_validate(stage).model_dump(mode="json", exclude_none=True)

    assert written == {**stage, "phase": "zero"}


def test_not_corrected_is_the_same_as_absent() -> None:
    """One meaning, one key."""
    stage = {**LOW, "design": "butterworth", "order": 4}

    assert FilterStage.model_validate({**stage, "corrected": False}) == FilterStage.model_validate(stage)


def test_a_notch_writes_its_defaults_out() -> None:
    """What is recorded says everything, though a study says no more than notch."""
    written = FilterStage.model_validate({"type": "notch"}).model_dump(mode="json", exclude_none=True)

    assert written == {"type": "notch", "phase": "zero", **NOTCH}


@pytest.mark.parametrize(
    "options", [{"window": name} for name in TRANSITION_TIMES_LENGTH] + [{"attenuation_db": 60}]
)
def test_the_reach_of_a_fir_is_that_of_the_step(options: dict[str, Any]) -> None:
    """The check and the step count the same taps, but for those that make the length odd."""
    from bandcairn.steps.filter_design import n_taps
    from bandcairn.steps.filter_stage import FilterStage as Stage

    stage = FilterStage.model_validate({**LOW, "design": "fir", "transition_hz": 0.5, **options})

    samples = n_taps(
        Stage(type="lowpass", cutoff_hz=(30.0,), design="fir", transition_hz=0.5, **options), 250.0
    )

    assert reach_s(stage) * 250 == pytest.approx(samples // 2, abs=1.5)


def test_a_reference_decides_which_channels_are_left() -> None:
    """Average: all; names: the others; pairs: the pairs, in their order."""
    channels = ("F3", "F4", "M1", "M2")
    pairs = BipolarPairs.model_validate({"pairs": {"F4-M1": ["F4", "M1"], "F3-M2": ["F3", "M2"]}})

    assert referenced_channels(channels, None) == channels
    assert referenced_channels(channels, "average") == channels
    assert referenced_channels(channels, ("M2", "M1")) == ("F3", "F4")
    assert referenced_channels(channels, pairs) == ("F4-M1", "F3-M2")
