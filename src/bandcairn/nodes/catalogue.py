"""The steps of the chain: their names, versions and parents.

A step's version is raised by hand when its numbers change; a test with frozen outputs fails if that is forgotten.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Step:
    """One step of the chain.

    Attributes
    ----------
    name : str
        The verb or noun that names it everywhere: in the store, the ledger and the rules.
    version : int
        Raised when the numbers of the step change.
    does : str
        What it does, in half a sentence.
    """

    name: str
    version: int
    does: str


# In the order of the data. The first nine act on one signal of one recording, the others on the study.
STEPS = (
    Step("load", 1, "reads a signal's channels from the raw file at their own rate"),
    Step(
        "quality",
        2,
        "measures clipping, gaps, mains, steps and amplitude before anything is done to the samples",
    ),
    Step("resample", 1, "brings the signal to the study's rate"),
    Step("reference", 1, "measures the channels against others"),
    Step("filter", 2, "applies the filter stages in order"),
    Step("beats", 1, "finds the R peaks of an ECG"),
    Step("epoch", 2, "lays windows and marks those that are not used"),
    Step("spectrum", 1, "estimates power spectral densities"),
    Step("features", 2, "computes the features of one signal of one recording"),
    Step("verdict", 2, "holds each channel's quality against the study's limits"),
    Step("table", 2, "gathers a signal's features from all recordings"),
    Step("statistics", 2, "answers the questions of one family"),
)
VERSIONS = {step.name: step.version for step in STEPS}
RECORDING_STEPS = tuple(step.name for step in STEPS[:9])
STUDY_STEPS = tuple(step.name for step in STEPS[9:])
