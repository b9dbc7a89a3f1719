"""Keys: one canonical text for one meaning, and a key for that text that never changes unnoticed."""

from __future__ import annotations

import hashlib
import json
import math
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
import pytest
from hypothesis import HealthCheck, assume, given, settings
from hypothesis import strategies as st

from bandcairn.nodes.catalogue import STEPS, VERSIONS
from bandcairn.nodes.key import canonical_json, key_of, recipe_json
from bandcairn.nodes.node import make_node
from bandcairn.nodes.plan import build_plan

if TYPE_CHECKING:
    from collections.abc import Callable

    from bandcairn.nodes.plan import Plan
    from bandcairn.nodes.survey import RawContent
    from bandcairn.study.description import LoadedStudy
    from bandcairn.study.tables import RecordingRow

GOLDEN = Path(__file__).with_name("golden_recipes.json")
DIGEST = "0123456789abcdef" * 4

# The same examples every time, and no failure because a machine is busy.
calm = settings(derandomize=True, deadline=None, suppress_health_check=[HealthCheck.too_slow])
names = st.text(st.characters(exclude_categories=["Cs"]), max_size=6)
numbers = st.integers() | st.floats(allow_nan=False, allow_infinity=False)
values = st.recursive(
    st.none() | st.booleans() | numbers | names,
    lambda inner: st.lists(inner, max_size=4) | st.dictionaries(names, inner, max_size=4),
    max_leaves=12,
)


def reordered(value: Any) -> Any:  # noqa: ANN401 - any JSON value
    """Return a value with the keys of every mapping in the opposite order."""
    if isinstance(value, dict):
        return {name: reordered(value[name]) for name in reversed(value)}
    return [reordered(item) for item in value] if isinstance(value, list) else value


@pytest.mark.parametrize(
    ("first", "second"),
    [
        ({"a": 1, "b": 2}, {"b": 2, "a": 1}),
        (1, 1.0),
        (-0.0, 0),
        ((0.5, 45), [0.5, 45.0]),
        (1e22, 10**22),
        (np.float64(0.1), 0.1),
    ],
)
def test_values_that_mean_the_same_have_one_text(first: object, second: object) -> None:
    """The order of keys, the type of a whole number, the sign of zero and tuples do not enter a key."""
    assert canonical_json(first) == canonical_json(second)


@pytest.mark.parametrize(
    ("first", "second"),
    [(1, True), (0, False), (None, ""), ("1", 1), ([], {}), (0.1 + 0.2, 0.3), ([1, 2], [2, 1])],
)
def test_values_that_differ_have_different_texts(first: object, second: object) -> None:
    """Nothing that could mean something else shares a key, down to the last bit of a number."""
    assert canonical_json(first) != canonical_json(second)


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf, {"a": [math.nan]}])
def test_a_number_that_is_not_finite_is_refused(value: object) -> None:
    """NaN equals nothing, so it can be no part of a key."""
    with pytest.raises(ValueError, match="cannot stand in a recipe"):
        canonical_json(value)


@pytest.mark.parametrize("value", [{1, 2}, b"raw", Path("raw"), np.arange(3), {"a": object()}])
def test_a_value_that_is_not_json_is_refused(value: object) -> None:
    """A text made up for a strange object would depend on its class, not on its meaning."""
    with pytest.raises(ValueError, match="cannot stand in a recipe"):
        canonical_json(value)


def test_a_mapping_with_other_names_than_text_is_refused() -> None:
    """1 and "1" would fall together."""
    with pytest.raises(ValueError, match="only text may name"):
        canonical_json({1: "a"})


@calm
@given(values)
def test_the_order_of_keys_never_changes_the_text(value: object) -> None:
    """However deep the mappings lie."""
    assert canonical_json(reordered(value)) == canonical_json(value)


@calm
@given(values)
def test_the_text_reads_back_as_the_value(value: object) -> None:
    """Nothing is lost in a key: the text says what was computed."""
    assert json.loads(canonical_json(value)) == value


@calm
@given(st.dictionaries(names, values, min_size=2, max_size=5), st.data())
def test_two_values_swapped_give_another_text(mapping: dict[str, Any], data: st.DataObject) -> None:
    """Which value belongs to which name is part of the key: two swapped cut-offs are not the same filter."""
    first, second = data.draw(st.permutations(list(mapping)))[:2]
    assume(canonical_json(mapping[first]) != canonical_json(mapping[second]))
    swapped = {**mapping, first: mapping[second], second: mapping[first]}
    assert canonical_json(swapped) != canonical_json(mapping)


@calm
@given(st.dictionaries(names, st.just(DIGEST), max_size=4), st.lists(st.just(DIGEST), max_size=3), values)
def test_a_recipe_is_the_canonical_json_of_its_document(
    parents: dict[str, str], raw: list[str], parameters: object
) -> None:
    """The recipe is put together from texts for speed; any JSON library arrives at the same."""
    document = {
        "key_format": 1,
        "step": "filter",
        "version": 1,
        "parameters": parameters,
        "parents": parents,
        "raw": raw,
    }
    recipe = recipe_json("filter", 1, canonical_json(parameters), parents.items(), raw)
    assert recipe == canonical_json(document)


def test_a_key_is_the_sha_256_of_the_recipe() -> None:
    """Anyone can recompute a key with a standard tool."""
    assert key_of("{}") == hashlib.sha256(b"{}").hexdigest()


@pytest.mark.parametrize(
    "change",
    [
        {"step": "epoch"},
        {"parameters": '{"a":2}'},
        {"parents": (("signal", "1" * 64),)},
        {"parents": (("epochs", DIGEST),)},
        {"raw": (DIGEST, DIGEST)},
    ],
)
def test_every_part_of_a_recipe_enters_the_key(change: dict[str, Any]) -> None:
    """Step, parameters, the role and key of a parent, raw content: one of them changed is another node."""
    recipe: dict[str, Any] = {
        "step": "filter",
        "parameters": '{"a":1}',
        "parents": (("signal", DIGEST),),
        "raw": (DIGEST,),
    }
    before, after = (make_node(made.pop("step"), **made) for made in (dict(recipe), {**recipe, **change}))
    assert before.key != after.key


def test_the_version_of_a_step_enters_the_key(monkeypatch: pytest.MonkeyPatch) -> None:
    """A raised version makes every number of the step anew."""
    before = make_node("filter", parameters="{}")
    monkeypatch.setitem(VERSIONS, "filter", VERSIONS["filter"] + 1)
    assert make_node("filter", parameters="{}").key != before.key


def test_labels_and_the_order_of_parents_stay_out_of_the_key() -> None:
    """A recording renamed has the same numbers; parents are told apart by role alone."""
    roles = (("epochs", DIGEST), ("signal", "1" * 64))
    first = make_node("spectrum", parameters="{}", parents=roles, recording="p1", signal="eeg")
    second = make_node("spectrum", parameters="{}", parents=roles[::-1], recording="p2", signal="brain")
    assert first.key == second.key
    assert first.parents == second.parents


@pytest.fixture
def plan_with_reference(
    load: Callable[..., LoadedStudy],
    content: Callable[..., RawContent],
    rows: tuple[RecordingRow, ...],
    study_text: str,
) -> Plan:
    """Return the plan of the study with its EEG in pairs."""
    channels = "channels: [Fz, Cz]"
    text = study_text.replace(channels, f"{channels}\n    reference: {{pairs: {{b: [Fz, Cz], a: [Cz, Fz]}}}}")
    return build_plan(load(text, rows), {row.recording: content(row.recording) for row in rows})


def test_the_recipe_and_key_of_a_reference_stand_frozen(plan_with_reference: Plan) -> None:
    """As below, for the step that not every study asks for; pairs keep their order."""
    golden = json.loads(GOLDEN.read_text("utf-8"))["reference"]
    node = next(node for node in plan_with_reference.nodes.values() if node.step == "reference")
    assert (
        recipe_json(node.step, VERSIONS[node.step], node.parameters, node.parents, node.raw)
        == golden["recipe"]
    )
    assert node.key == golden["key"]


@pytest.mark.parametrize("step", [step.name for step in STEPS if step.name != "reference"])
def test_the_recipe_and_key_of_every_step_stand_frozen(step: str, plan: Plan) -> None:
    """A change of the key format or of a step's parameters makes every store of every lab stale: never by accident.

    If it is meant, raise KEY_FORMAT or the version of the step, and freeze the new texts.
    """
    golden = json.loads(GOLDEN.read_text("utf-8"))[step]
    node = next(node for node in plan.nodes.values() if node.step == step)
    recipe = recipe_json(node.step, VERSIONS[step], node.parameters, node.parents, node.raw)
    assert recipe == golden["recipe"]
    assert node.key == golden["key"]
