"""Which epochs are not used, and why.

References
----------
.. [1] Hampel F.R. (1974) The influence curve and its role in robust estimation. J. Am. Stat. Assoc. 69, 383-393
   (1.4826 median absolute deviations estimate the standard deviation of normal values).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Literal

import numpy as np

from bandcairn.errors import StepError

if TYPE_CHECKING:
    from numpy.typing import NDArray

KEPT, TOO_LARGE, TOO_FLAT, TOO_STEEP, OUTLYING, AT_EDGE, BY_DECISION = range(7)
# Every reason by the name of its count, the one that is told first where several hold.
REASONS = {
    "by_decision": BY_DECISION,
    "at_edge": AT_EDGE,
    "too_large": TOO_LARGE,
    "too_flat": TOO_FLAT,
    "too_steep": TOO_STEEP,
    "outlying": OUTLYING,
}
MAD_TO_SD = 1.4826
# Of fewer epochs no median tells what is usual: common practice, without a source.
FEWEST_FOR_Z = 10
# Spread of the logarithms below which epochs are alike but for rounding.
_LEAST_SPREAD = 1e-6


@dataclass(frozen=True, slots=True)
class Reject:
    """Limits beyond which an epoch is not used; None: no such limit.

    Attributes
    ----------
    peak_to_peak_uv : float or None
        An epoch whose range exceeds it is too large.
    flat_uv : float or None
        An epoch whose range is below it is too flat.
    step_uv : float or None
        An epoch in which two neighbouring samples differ by more is too steep.
    robust_z : float or None
        An epoch is outlying whose logarithm of the range lies further from the median of the channel's epochs than
        this many times their 1.4826 median absolute deviations [1]_.
    scope : {"channel", "epoch"}
        Whether an epoch is dropped for the channel that fails, or then for all channels.
    """

    peak_to_peak_uv: float | None = None
    flat_uv: float | None = None
    scope: Literal["channel", "epoch"] = "channel"
    step_uv: float | None = None
    robust_z: float | None = None


def check_limits(reject: Reject | None) -> None:
    """Refuse limits that leave no epoch.

    Raises
    ------
    StepError
        If what is not too flat is too large.
    """
    if reject is None or reject.flat_uv is None or reject.peak_to_peak_uv is None:
        return
    if reject.flat_uv >= reject.peak_to_peak_uv:
        raise StepError(
            f"epoch: found flat_uv {reject.flat_uv:g} and peak_to_peak_uv {reject.peak_to_peak_uv:g}; "
            "allowed: flat_uv below peak_to_peak_uv, or no epoch is left. Correct one of them."
        )


def judge(
    peak_to_peak_uv: NDArray[np.float64],
    step_uv: NDArray[np.float64] | None,
    reject: Reject | None,
    given: NDArray[np.int8],
    unasked: NDArray[np.bool_],
) -> NDArray[np.int8]:
    """Return why each epoch of each channel is dropped, or 0.

    Where several reasons hold, the first of `REASONS` is told. With scope "epoch", a channel that passes by itself
    takes the reason of those that fail, again the first. An epoch that is out before it is measured is no standard
    for what is usual.

    Parameters
    ----------
    peak_to_peak_uv : ndarray, shape (n_channels, n_epochs)
        Range of each epoch.
    step_uv : ndarray, shape (n_channels, n_epochs), or None
        Largest difference of neighbouring samples; needed for that limit alone.
    reject : Reject or None
        The limits.
    given : ndarray of int8, shape (n_channels, n_epochs)
        Reasons that hold already: edges and decisions.
    unasked : ndarray of bool, shape (n_channels,)
        Channels that are left out by decision: they drop no epoch of the others.

    Returns
    -------
    ndarray of int8, shape (n_channels, n_epochs)
    """
    if reject is None:
        return given
    reason = np.zeros(peak_to_peak_uv.shape, np.int8)
    if reject.step_uv is not None and step_uv is not None:
        reason[step_uv > reject.step_uv] = TOO_STEEP
    if reject.flat_uv is not None:
        reason[peak_to_peak_uv < reject.flat_uv] = TOO_FLAT
    if reject.peak_to_peak_uv is not None:
        reason[peak_to_peak_uv > reject.peak_to_peak_uv] = TOO_LARGE
    if reject.robust_z is not None:
        usable = (reason == KEPT) & (given == KEPT)
        reason[usable & (robust_z(peak_to_peak_uv, usable) > reject.robust_z)] = OUTLYING
    if reject.scope == "epoch":
        asked = np.where((given == KEPT) & ~unasked[:, np.newaxis], reason, KEPT)
        reason = np.where(reason == KEPT, _first_reason(asked), reason)
    return np.where(given == KEPT, reason, given)


def robust_z(peak_to_peak_uv: NDArray[np.float64], usable: NDArray[np.bool_]) -> NDArray[np.float64]:
    """Return how unusual the range of each epoch is among the usable ones of its channel [1]_.

    Parameters
    ----------
    peak_to_peak_uv : ndarray, shape (n_channels, n_epochs)
        Range of each epoch.
    usable : ndarray of bool, shape (n_channels, n_epochs)
        Those that tell what is usual.

    Returns
    -------
    ndarray, shape (n_channels, n_epochs)
        Distance of the logarithm from the median, in 1.4826 median absolute deviations, without sign; 0 for a channel
        with fewer than 10 usable epochs.
    """
    found = np.zeros(peak_to_peak_uv.shape)
    # The range of a constant epoch is 0, and its logarithm no number: it counts as the smallest range there can be.
    log_range = np.log(np.maximum(peak_to_peak_uv, np.finfo(np.float64).tiny))
    for z, values, here in zip(found, log_range, usable, strict=True):
        if np.count_nonzero(here) >= FEWEST_FOR_Z:
            middle = np.median(values[here])
            spread = MAD_TO_SD * np.median(np.abs(values[here] - middle))
            z[:] = np.abs(values - middle) / max(float(spread), _LEAST_SPREAD)
    return found


def _first_reason(reason: NDArray[np.int8]) -> NDArray[np.int8]:
    """Return for each epoch the first of `REASONS` that any channel has, or 0."""
    first = np.zeros(reason.shape[1], np.int8)
    for code in reversed(REASONS.values()):
        first[(reason == code).any(axis=0)] = code
    return first
