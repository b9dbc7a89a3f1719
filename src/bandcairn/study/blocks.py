"""What all blocks of study.yaml are made of: strict values, and refusals that name what is allowed."""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import AfterValidator, BaseModel, ConfigDict, Field
from pydantic_core import PydanticCustomError


def refusal(field: str, found: str, allowed: str, remedy: str) -> PydanticCustomError:
    """Return a validation error that carries what a `bandcairn.errors.Problem` needs.

    Parameters
    ----------
    field : str
        Key at fault below the block that is validated; empty for the block itself.
    found, allowed, remedy : str
        As in `bandcairn.errors.Problem`.

    Returns
    -------
    PydanticCustomError
        To be raised inside a validator.
    """
    context = {"field": field, "found": found, "allowed": allowed, "remedy": remedy}
    return PydanticCustomError("refused", "found {found}; allowed: {allowed}. {remedy}", context)


def told(unit: str, allowed: str) -> dict[str, Any]:
    """Return unit and range of a key, for the table of keys and for error messages."""
    return {"unit": unit, "allowed": allowed}


def _increasing(band: tuple[float, float]) -> tuple[float, float]:
    if band[0] >= band[1]:
        found = f"[{band[0]:g}, {band[1]:g}]"
        raise refusal("", found, "two increasing values", "Write the lower value first.")
    return band


def _unique(names: tuple[str, ...]) -> tuple[str, ...]:
    twice = sorted({name for name in names if names.count(name) > 1})
    if twice:
        raise refusal("", f"{', '.join(twice)} more than once", "each name once", "Delete the repetition.")
    return names


# Numbers are strict: neither "4" in quotes nor true passes as a number.
Number = Annotated[float, Field(strict=True, allow_inf_nan=False)]
Positive = Annotated[Number, Field(gt=0)]
NotNegative = Annotated[Number, Field(ge=0)]
Share = Annotated[Number, Field(ge=0, le=1)]
Overlap = Annotated[Number, Field(ge=0, lt=1)]
Name = Annotated[str, Field(min_length=1)]
Names = Annotated[tuple[Name, ...], AfterValidator(_unique)]
Band = Annotated[tuple[NotNegative, NotNegative], AfterValidator(_increasing)]


class Block(BaseModel):
    """Base of all blocks: frozen, unknown keys refused."""

    model_config = ConfigDict(frozen=True, extra="forbid")
