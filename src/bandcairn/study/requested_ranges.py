"""Which frequencies of the recorded signal a study makes use of: the recorder must have passed them."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

from bandcairn.study.filter_checks import passband
from bandcairn.study.models import EegSignal

if TYPE_CHECKING:
    from bandcairn.study.models import AnySignal

    # Name of the band, empty for the whole; lower and upper edge, the latter None for the end of the spectrum.
    RequestedRange = tuple[str, float, float | None]


def requested_ranges(signal: AnySignal) -> tuple[RequestedRange, ...]:
    """Return the ranges of frequency that a signal's features rest on.

    Parameters
    ----------
    signal : EegSignal, EcgSignal or EmgSignal
        Its description.

    Returns
    -------
    tuple of (str, float, float or None)
        Of EEG every band and, without a name, the range of the total power. Of ECG and EMG what the filters let pass
        (the bands of an ECG are those of the intervals between beats); nothing where no filter bounds it.
    """
    if isinstance(signal, EegSignal):
        bands = [(name, low_hz, high_hz) for name, (low_hz, high_hz) in signal.features.bands_hz.items()]
        lowest, highest = min(low for _, low, _ in bands), max(high for _, _, high in bands)
        return (*bands, ("", *(signal.features.total_hz or (lowest, highest))))
    passed = passband(signal)
    if passed.low_hz == 0 and math.isinf(passed.high_hz):
        return ()
    return (("", passed.low_hz, None if math.isinf(passed.high_hz) else passed.high_hz),)
