"""What the channels of a signal are measured against, and which channels are then left."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from bandcairn.study.blocks import Block, Name, Names, told


class BipolarPairs(Block):
    """Differences of two channels, which take the place of the channels."""

    pairs: Annotated[dict[Name, tuple[Name, Name]], Field(min_length=1)] = Field(
        description="New channels, each the first minus the second of two channels of the signal.",
        json_schema_extra=told("", "at least one new name with two different channels"),
    )


Reference = Literal["average"] | Annotated[Names, Field(min_length=1)] | BipolarPairs


def referenced_channels(channels: tuple[str, ...], reference: Reference | None) -> tuple[str, ...]:
    """Return the channels that a reference leaves or makes.

    Parameters
    ----------
    channels : tuple of str
        Channels of the signal as declared.
    reference : Reference or None
        "average" keeps all of them; named channels leave, for they hold nothing but their own difference; pairs
        take the place of all. None keeps all.

    Returns
    -------
    tuple of str
        In the order declared.
    """
    if isinstance(reference, BipolarPairs):
        return tuple(reference.pairs)
    if isinstance(reference, tuple):
        return tuple(channel for channel in channels if channel not in reference)
    return channels
