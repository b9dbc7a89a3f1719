"""The named errors of bandcairn.

Each carries its data besides its sentence; the command line alone turns them into exit codes.
"""

from __future__ import annotations

from dataclasses import dataclass


class BandcairnError(Exception):
    """Base of every error that a user may meet."""


@dataclass(frozen=True, slots=True)
class Problem:
    """One fault of a study, told so that it can be mended.

    Attributes
    ----------
    file : str
        File that holds the fault, relative to the study folder.
    where : str
        ``"line 12"``, ``"row 4, column condition"``, or empty for the whole file.
    field : str
        The key, column or channel at fault, written as a path: ``signals.eeg.filter[0].cutoff_hz``.
    found : str
        What stands there.
    allowed : str
        What may stand there.
    remedy : str
        What to do about it.
    """

    file: str
    where: str
    field: str
    found: str
    allowed: str
    remedy: str

    def __str__(self) -> str:
        place = f"{self.file}, {self.where}" if self.where else self.file
        return f"{place}: {self.field}: found {self.found}; allowed: {self.allowed}. {self.remedy}"


class StudyError(BandcairnError):
    """The study or its files are at fault; holds every problem of one pass.

    Parameters
    ----------
    problems : tuple of Problem
        At least one.
    """

    def __init__(self, problems: tuple[Problem, ...]) -> None:
        self.problems = problems
        super().__init__("\n".join(str(problem) for problem in problems))


class RecordingError(BandcairnError):
    """One recording cannot be read or processed; the others go on."""


class UnknownUnitError(RecordingError):
    """A unit that is blank or not one of the known ones."""


class StepError(RecordingError):
    """A step refuses its input: too short, not finite, a cut-off beyond Nyquist."""


class DamagedNodeError(BandcairnError):
    """A node's file is torn or altered: its data do not match their digest."""


class EngineError(BandcairnError):
    """The workflow engine ended without finishing the plan."""
