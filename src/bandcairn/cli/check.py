"""``bandcairn check``: tell whether the study is sound, and print it in full."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from bandcairn.cli.console import DONE, SOME_FAILED, AsJson, StudyFolder, note, print_json, say

if TYPE_CHECKING:
    import typer
    from pydantic import BaseModel


def register(app: typer.Typer) -> None:
    """Add the command."""
    app.command(epilog="Example: bandcairn check demo-study")(check)


def check(study: StudyFolder, *, as_json: AsJson = False) -> int:
    """Check a study's description, tables and files, and print it with every default.

    Nothing is computed and nothing is written. All problems of one pass are told together. The exit code is 3 if a raw
    file cannot be read: a run would leave its recording out.
    """
    from bandcairn.execution.project import check_project

    loaded, unreadable = check_project(study)
    code = SOME_FAILED if unreadable else DONE
    if as_json:
        print_json({"study": loaded.description.model_dump(mode="json"), "unreadable": unreadable})
        return code
    people = {row.participant for row in loaded.recordings}
    found = "no problem found" if not unreadable else f"{len(unreadable)} cannot be read, the rest is sound"
    say(f"# {len(loaded.recordings)} recordings of {len(people)} participants; {found}")
    say("# every key that stands at its default is marked")
    for line in described(loaded.description):
        say(line)
    for recording, reason in unreadable.items():
        note(f"warning: {recording} cannot be read and would be left out: {reason}")
    return code


def described(model: BaseModel, indent: str = "") -> list[str]:
    """Return a description as the lines of a YAML document, defaults written out and marked."""
    lines: list[str] = []
    for name in type(model).model_fields:
        mark = "" if name in model.model_fields_set else "  # default"
        lines += _entry(name, getattr(model, name), indent, mark)
    return lines


def _entry(name: str, value: Any, indent: str, mark: str) -> list[str]:  # noqa: ANN401 - any value of a model
    from pydantic import BaseModel

    below = f"{indent}  "
    if isinstance(value, BaseModel):
        lines = described(value, below)
        return [f"{indent}{name}:{mark}", *lines] if lines else [f"{indent}{name}: {{}}{mark}"]
    if isinstance(value, dict) and any(isinstance(item, BaseModel) for item in value.values()):
        return [
            f"{indent}{name}:",
            *(line for key, item in value.items() for line in _entry(key, item, below, "")),
        ]
    if isinstance(value, tuple) and value and all(isinstance(item, BaseModel) for item in value):
        return [f"{indent}{name}:", *(line for item in value for line in _listed(item, below))]
    return [f"{indent}{name}: {_scalar(value)}{mark}"]


def _listed(model: BaseModel, indent: str) -> list[str]:
    first, *rest = described(model, f"{indent}  ")
    return [f"{indent}- {first.lstrip()}", *rest]


def _scalar(value: Any) -> str:  # noqa: ANN401
    """Return a value as YAML writes it on one line; 150.0 as 150."""
    import yaml

    from bandcairn.nodes.key import canonical_json

    plain = yaml.safe_load(canonical_json(value))
    if isinstance(value, dict):
        plain = {key: plain[key] for key in value}
    text: str = yaml.safe_dump(
        plain, default_flow_style=True, allow_unicode=True, width=10_000, sort_keys=False
    )
    return text.removesuffix("\n").removesuffix("\n...")
