"""What is asked: two levels of one factor, compared by one test on one scale."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from bandcairn.errors import StepError
from bandcairn.statistics.registry import designs_of
from bandcairn.statistics.scales import ScaleName, available_scales

Design = Literal["within", "between"]


@dataclass(frozen=True, slots=True)
class Comparison:
    """One declared comparison of two levels; the estimate is first minus second.

    Attributes
    ----------
    design : {"within", "between"}
        Whether the same people stand at both levels, or different people.
    factor : str
        The design column that holds the levels.
    first, second : str
        The two levels.
    test : str
        One of `available_tests`.
    scale : {"identity", "log10", "ln", "logit"}
        Applied to each person's mean, so that "log10" tests the log of the mean power, not the mean of logs.
    confidence : float
        Coverage of both intervals, between 0.5 and 1.
    unit : str
        Unit of the measured value, as it shall stand in the result.
    seed : int
        Of the random arrangements of a permutation test, 0 or above; other tests draw no random numbers.

    Raises
    ------
    StepError
        If the test is unknown or made for the other design, the scale is unknown, both levels are the same, or
        the confidence is out of range.
    """

    design: Design
    factor: str
    first: str
    second: str
    test: str
    scale: ScaleName = "identity"
    confidence: float = 0.95
    unit: str = ""
    seed: int = 0

    def __post_init__(self) -> None:
        _refuse_other(self.design, designs_of(self.test), f"design of the test {self.test}")
        _refuse_other(self.scale, available_scales(), "scale")
        if self.first == self.second:
            raise StepError(f"contrast: found {self.first!r} twice; allowed: two different levels")
        if not 0.5 < self.confidence < 1:
            raise StepError(f"confidence: found {self.confidence}; allowed: above 0.5 and below 1")
        if self.seed < 0:
            raise StepError(f"seed: found {self.seed}; allowed: a whole number, 0 or above")

    @property
    def term(self) -> str:
        """The contrast as it is printed: "night - day"."""
        return f"{self.first} - {self.second}"


def _refuse_other(found: str, allowed: tuple[str, ...], what: str) -> None:
    if found not in allowed:
        raise StepError(f"{what}: found {found!r}; allowed: {', '.join(allowed)}")
