"""What could not be computed. Apart from the worker, so that telling of it loads no numerical library."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Failure:
    """A node that could not be computed.

    Attributes
    ----------
    recording, signal, step : str
        Where.
    reason : str
        Why, for a user.
    fault : str
        Empty, or the traceback of a fault of bandcairn itself.
    """

    recording: str
    signal: str
    step: str
    reason: str
    fault: str = ""

    @property
    def sentence(self) -> str:
        """The step and why it failed, for a user."""
        return f"{self.step}: {self.reason.removeprefix(f'{self.step}: ')}"
