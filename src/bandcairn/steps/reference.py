"""Measure channels against others: against their average, against named ones, or in pairs.

References
----------
.. [1] Nunez P.L., Srinivasan R. (2006) Electric Fields of the Brain, 2nd ed., Oxford University Press, chapter 7
   (average, linked and bipolar references). From memory.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from bandcairn.errors import StepError
from bandcairn.signal import Signal

if TYPE_CHECKING:
    from numpy.typing import NDArray


@dataclass(frozen=True, slots=True)
class Pair:
    """A new channel: the first minus the second."""

    name: str
    first: str
    second: str


@dataclass(frozen=True, slots=True)
class Derivation:
    """New channels as weighted sums of old ones.

    Attributes
    ----------
    channels : tuple of str
        Names of the new channels.
    weights : ndarray, shape (n_new, n_old)
        Their weights; each row adds up to 0, so that what all old channels share is gone.
    """

    channels: tuple[str, ...]
    weights: NDArray[np.float64]

    @property
    def rank(self) -> int:
        """How many of the new channels are independent: one less than their number after an average."""
        return int(np.linalg.matrix_rank(self.weights))


def against_average(channels: tuple[str, ...]) -> Derivation:
    """Take the mean of all channels from each [1]_. They then add up to 0 at every moment.

    Parameters
    ----------
    channels : tuple of str
        At least two.

    Raises
    ------
    StepError
        If there is one channel only.
    """
    n_channels = len(channels)
    if n_channels < 2:
        raise StepError(f"reference: found the average of {n_channels} channel(s); allowed: of at least 2.")
    return Derivation(channels, np.eye(n_channels) - 1 / n_channels)


def against_channels(channels: tuple[str, ...], reference: tuple[str, ...]) -> Derivation:
    """Take the mean of named channels from the others [1]_; the named ones leave.

    Parameters
    ----------
    channels : tuple of str
        All channels.
    reference : tuple of str
        Some of them, not all.

    Raises
    ------
    StepError
        If a name is no channel, or no channel is left.
    """
    _check_known(reference, channels)
    kept = tuple(channel for channel in channels if channel not in reference)
    if not kept or not reference:
        raise StepError(
            f"reference: found {len(reference)} of {len(channels)} channels; allowed: some, but not all."
        )
    mean = np.array([channel in reference for channel in channels]) / len(reference)
    return Derivation(kept, np.array([_unit(channel, channels) - mean for channel in kept]))


def as_pairs(channels: tuple[str, ...], pairs: tuple[Pair, ...]) -> Derivation:
    """Put differences of two channels in the place of the channels [1]_.

    Parameters
    ----------
    channels : tuple of str
        All channels.
    pairs : tuple of Pair
        At least one, of different names, each of two different channels.

    Raises
    ------
    StepError
        If a name is no channel, a pair has one channel twice, or two pairs have one name.
    """
    _check_known(tuple(name for pair in pairs for name in (pair.first, pair.second)), channels)
    names = tuple(pair.name for pair in pairs)
    if not pairs or len(set(names)) < len(names) or any(pair.first == pair.second for pair in pairs):
        raise StepError(
            "reference: allowed: at least one pair, each under its own name, of two different channels."
        )
    weights = [_unit(pair.first, channels) - _unit(pair.second, channels) for pair in pairs]
    return Derivation(names, np.array(weights))


def rereference(signal: Signal, derivation: Derivation) -> Signal:
    """Derive new channels from those of a signal, moment by moment.

    Parameters
    ----------
    signal : Signal
        Not modified; its channels in the order of the derivation's weights.
    derivation : Derivation
        The weights.

    Returns
    -------
    Signal
        Same rate and runs; the channels of the derivation.
    """
    samples = np.zeros((len(derivation.channels), signal.samples.shape[1]))
    # Sum by sum in the order of the channels: a product of matrices may round otherwise on another processor.
    for target, weights in zip(samples, derivation.weights, strict=True):
        for weight, source in zip(weights, signal.samples, strict=True):
            if weight:
                np.add(target, weight * source, out=target)
    return Signal(samples, signal.rate_hz, derivation.channels, signal.runs)


def _unit(channel: str, channels: tuple[str, ...]) -> NDArray[np.float64]:
    return np.array([float(channel == name) for name in channels])


def _check_known(names: tuple[str, ...], channels: tuple[str, ...]) -> None:
    unknown = [name for name in names if name not in channels]
    if unknown:
        raise StepError(f"reference: found {', '.join(unknown)}; allowed: {', '.join(channels)}.")
