"""From plain values to models: every refusal of pydantic told as a fault, and what remains put to use.

A signal with one bad key must not hide the faults of its other keys, so the bad key is taken out and the rest
is validated again: further checks see as much of the study as can be understood.
"""

from __future__ import annotations

import copy
import difflib
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, TypeVar, get_args

from pydantic import BaseModel, ValidationError

from bandcairn.study.faults import Fault, listed, suggestion
from bandcairn.study.models import (
    NOT_YET_AVAILABLE,
    AnySignal,
    EcgSignal,
    EegSignal,
    EmgSignal,
    Question,
    StudyDescription,
)

if TYPE_CHECKING:
    from collections.abc import Iterable

    from pydantic.fields import FieldInfo
    from pydantic_core import ErrorDetails

    from bandcairn.study.faults import Path

_KINDS: dict[object, type[EegSignal | EcgSignal | EmgSignal]] = {
    "eeg": EegSignal,
    "ecg": EcgSignal,
    "emg": EmgSignal,
}
_QUOTES = "Write it in quotes: '{}'."
_ROUNDS = 12  # each round removes at least one key; deeper nesting than this does not exist in the models

Model = TypeVar("Model", bound=BaseModel)


@dataclass(frozen=True, slots=True)
class Understood:
    """What could be understood of study.yaml.

    Attributes
    ----------
    description : StudyDescription or None
        The whole; None where anything was refused.
    signals : dict of str to AnySignal
        Signals, without the keys that were refused.
    declared_signals : tuple of str
        Names of all signals, understood or not.
    pruned : frozenset of str
        Names of the signals that may have lost a band or segment that a question names.
    questions : dict of int to Question
        By position in the file.
    faults : tuple of Fault
        What was refused.
    """

    description: StudyDescription | None
    signals: dict[str, AnySignal]
    declared_signals: tuple[str, ...]
    pruned: frozenset[str]
    questions: dict[int, Question]
    faults: tuple[Fault, ...]


def understand(content: dict[str, Any]) -> Understood:
    """Validate the content of study.yaml.

    Parameters
    ----------
    content : dict
        Plain values, as read.

    Returns
    -------
    Understood
    """
    try:
        whole = StudyDescription.model_validate(content)
    except ValidationError as error:
        return _salvaged(content, _faults(error, content, ()))
    questions = dict(enumerate(whole.questions))
    return Understood(whole, whole.signals, tuple(whole.signals), frozenset(), questions, ())


def _salvaged(content: dict[str, Any], faults: list[Fault]) -> Understood:
    raw_signals = content.get("signals")
    raw_signals = raw_signals if isinstance(raw_signals, dict) else {}
    raw_questions = content.get("questions")
    raw_questions = raw_questions if isinstance(raw_questions, list) else []
    signals: dict[str, AnySignal] = {}
    pruned = set()
    for name, raw in raw_signals.items():
        kind = _KINDS.get(raw.get("kind")) if isinstance(raw, dict) and _is_text(raw.get("kind")) else None
        signal, found = _salvage(kind, raw, ("signals", name)) if kind else (None, [])
        faults += found
        if signal is None or any(_concerns_questions(fault.path) for fault in found):
            pruned.add(name)
        if signal is not None:
            signals[name] = signal
    questions: dict[int, Question] = {}
    for index, raw in enumerate(raw_questions):
        question, found = _salvage(Question, raw, ("questions", index))
        faults += found
        if question is not None:
            questions[index] = question
    return Understood(None, signals, tuple(raw_signals), frozenset(pruned), questions, _told_once(faults))


def _concerns_questions(path: Path) -> bool:
    """Tell whether a key taken out at `path` may have held what a question names: a band or a segment."""
    return len(path) <= 3 or path[2] in ("features", "segments")


def _is_text(value: object) -> bool:
    return isinstance(value, str)


def _salvage(model: type[Model], raw: object, above: Path) -> tuple[Model | None, list[Fault]]:
    """Validate a block without its refused keys; return it with every fault met on the way."""
    faults: list[Fault] = []
    if not isinstance(raw, dict):
        return None, faults
    block: dict[str, Any] = copy.deepcopy(raw)
    removed: set[Path] = set()
    for _ in range(_ROUNDS):
        try:
            return model.model_validate(block), faults
        except ValidationError as error:
            wanted = [path for path in _missing(error, block) if path in removed]
            faults += [
                fault for fault in _faults(error, block, above) if fault.path[len(above) :] not in wanted
            ]
            paths = {_removable(_document_path(detail, block), removed) for detail in error.errors()}
            if () in paths:
                # Every key is sound by itself, only their combination was refused: look at the rest as it is.
                return (model.model_construct(**block) if len(paths) == 1 and not wanted else None), faults
            for path in paths:
                _remove(block, path)
                removed.add(path)
    return None, faults


def _missing(error: ValidationError, block: dict[str, Any]) -> list[Path]:
    return [_document_path(d, block) for d in error.errors() if d["type"] == "missing"]


def _removable(path: Path, removed: set[Path]) -> Path:
    """Return the key to take out for a fault at `path`: never a list item, or the others would move up."""
    index = next((i for i, step in enumerate(path) if isinstance(step, int)), len(path))
    path = path[:index]
    return path[:-1] if path in removed else path


def _remove(block: dict[str, Any], path: Path) -> None:
    parent: Any = block
    for step in path[:-1]:
        parent = parent.get(step) if isinstance(parent, dict) else None
    if isinstance(parent, dict):
        parent.pop(path[-1], None)


def _faults(error: ValidationError, block: dict[str, Any], above: Path) -> list[Fault]:
    faults = []
    for detail in error.errors():
        path = (*above, *_document_path(detail, block))
        faults.append(_fault(detail, path, block, above))
    return list(_told_once(faults))


def _told_once(faults: Iterable[Fault]) -> tuple[Fault, ...]:
    """Keep one fault a place, and of a value with several readings the fault that lies deepest."""
    first: dict[Path, Fault] = {}
    for fault in faults:
        first.setdefault(fault.path, fault)
    above = {path[:length] for path in first for length in range(len(path))}
    return tuple(fault for path, fault in first.items() if path not in above)


def _document_path(detail: ErrorDetails, block: object) -> Path:
    """Return the place of an error as written in the file, without pydantic's names of union members."""
    path: list[str | int] = []
    steps = detail["loc"]
    value: Any = block
    for position, step in enumerate(steps):
        absent_key = detail["type"] == "missing" and position == len(steps) - 1
        in_dict = isinstance(value, dict) and step in value
        in_list = isinstance(value, list) and isinstance(step, int) and step < len(value)
        if in_dict or in_list:
            value = value[step]
            path.append(step)
        elif absent_key:
            path.append(step)
    return tuple(path)


def _fault(detail: ErrorDetails, path: Path, block: dict[str, Any], above: Path) -> Fault:
    """Return one error of pydantic in plain words."""
    kind, value = detail["type"], detail["input"]
    if kind == "refused":
        told = detail["ctx"]
        path = (*path, told["field"]) if told["field"] else path
        return Fault(path, told["found"], told["allowed"], told["remedy"])
    if kind.startswith("union_tag"):
        path = (*path, "kind")
        value = value.get("kind") if isinstance(value, dict) else value
        kind = "missing" if value is None else kind
    content = _nested(block, above)
    if kind == "extra_forbidden":
        known = tuple(_known_keys(path[:-1], content))
        name = str(path[-1])
        return Fault(path, f"the unknown key {name}", listed(known), suggestion(name, known, "Delete it."))
    allowed = _allowed(path, content)
    if kind == "missing":
        return Fault(path, "nothing", allowed, f"Add the key {path[-1]}.")
    return Fault(path, _shown(value), allowed, _remedy(kind, value, str(path[-1]), allowed))


def _nested(block: dict[str, Any], above: Path) -> dict[str, Any]:
    """Return a study that holds only `block` at its place."""
    if not above:
        return block
    return {str(above[0]): {above[1]: block}}


def _shown(value: object) -> str:
    if value is None:
        return "nothing"
    text = {True: "true", False: "false"}.get(value) if isinstance(value, bool) else None
    text = text or repr(value)
    return text if len(text) <= 60 else text[:57] + "..."


def _remedy(kind: str, value: object, key: str, allowed: str) -> str:
    if isinstance(value, str) and value in NOT_YET_AVAILABLE.get(key, ()):
        return f"{value} is planned but not available yet: choose one that is allowed."
    if kind == "string_type" and isinstance(value, int | float):
        return _QUOTES.format(_shown(value))
    if kind in ("float_type", "int_type") and isinstance(value, str):
        return "Write a number alone: no quotes, no unit, a decimal point."
    if isinstance(value, str):
        close = difflib.get_close_matches(value, allowed.replace(",", " ").split(), n=1)
        return f"Did you mean {close[0]}?" if close else "Choose one that is allowed."
    return "Correct the value." if value is not None else f"Give {key} a value, or delete the key."


def _known_keys(path: Path, content: dict[str, Any]) -> Iterable[str]:
    model, _ = _walk(path, content)
    return model.model_fields if model else ()


def _allowed(path: Path, content: dict[str, Any]) -> str:
    _, field = _walk(path, content)
    extra = field.json_schema_extra if field else None
    return str(extra["allowed"]) if isinstance(extra, dict) else "a mapping of keys"


def _walk(path: Path, content: dict[str, Any]) -> tuple[type[BaseModel] | None, FieldInfo | None]:
    """Return the model that stands at `path`, if one does, and the field that holds it."""
    model: type[BaseModel] | None = StudyDescription
    field: FieldInfo | None = None
    for position, step in enumerate(path):
        if path[0] == "signals" and position == 1:
            # Of an unknown kind only the key kind itself is told, and it reads alike in all of them.
            model = _KINDS.get(_kind(content, step), EegSignal)
        elif isinstance(step, str) and model is not None:
            field = model.model_fields.get(step, field)
            model = _model_within(field.annotation) if field and step in model.model_fields else None
    return model, field


def _kind(content: dict[str, Any], name: str | int) -> object:
    signals = content.get("signals")
    signal = signals.get(name) if isinstance(signals, dict) else None
    kind = signal.get("kind") if isinstance(signal, dict) else None
    return kind if isinstance(kind, str) else None


def _model_within(annotation: object) -> type[BaseModel] | None:
    """Return the block a key holds: itself, optional, or as the items of a list."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    return next((model for part in get_args(annotation) if (model := _model_within(part))), None)
