"""What a recorder lets pass: the text of a file's header read, and a band held against it."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass

import numpy as np

_FILTER = re.compile(
    r"(?<![a-z])(?P<name>high[ -]?pass|low[ -]?pass|notch|hpf?|lpf?|tc|n)(?![a-z])"
    r"\s*[:=]?\s*"
    r"(?P<value>dc(?![a-z])|(?:[0-9]+(?:[.,][0-9]+)?|[.,][0-9]+))"
    r"\s*(?P<unit>(?:k?hz|ms|sec|s)(?![a-z]))?"
)
# Words that say that there is no filter.
_NOTHING = {"none", "no", "off", "filter", "filters"}
_PER_UNIT = {"khz": 1000.0, "hz": 1.0, "ms": 0.001, "sec": 1.0, "s": 1.0}


@dataclass(frozen=True, slots=True)
class RecorderBand:
    """What a recorder is said to let pass.

    Attributes
    ----------
    highpass_hz, lowpass_hz : float or None
        Its edges; a high-pass of 0 is coupled directly (DC). None where nothing is said.
    notch_hz : tuple of float
        Frequencies that it takes out.
    unclear : tuple of str
        Parts of the text that were not understood.
    """

    highpass_hz: float | None = None
    lowpass_hz: float | None = None
    notch_hz: tuple[float, ...] = ()
    unclear: tuple[str, ...] = ()


def read_prefilter(text: str) -> RecorderBand:
    """Read the filters that the header of an EDF or BDF file names for a channel.

    ``HP:0.1Hz LP:70Hz N:50Hz`` is what the format proposes; commas or blanks between the parts, a decimal comma,
    ``DC``, absent units (hertz) and time constants, ``TC:0.3s`` or ``HP:0.3s``, are understood as well: a first-order
    high-pass has its corner at 1/(2 pi time constant). What is not understood is told, never guessed; if the
    high-pass does not lie below the low-pass the two have been mistaken for one another, and neither counts.

    Parameters
    ----------
    text : str
        As it stands in the header; may be empty.

    Returns
    -------
    RecorderBand

    References
    ----------
    Kemp B, Olivan J (2003) European data format 'plus' (EDF+). Clin Neurophysiol 114:1755-1761: the form of the text.
    """
    highpass: list[float] = []
    lowpass: list[float] = []
    notch: list[float] = []
    rest = re.split(r"[\s,;/|]+", _FILTER.sub(" ", text.lower()))
    unclear = [part for part in rest if part and part not in _NOTHING]
    for found in _FILTER.finditer(text.lower()):
        name, edge_hz = found["name"][0], _edge_hz(found)
        kind = {"h": highpass, "t": highpass, "l": lowpass, "n": notch}[name]
        if edge_hz is None or (edge_hz == 0 and kind is not highpass):
            unclear.append(found[0].strip())
        else:
            kind.append(edge_hz)
    band = RecorderBand(max(highpass, default=None), min(lowpass, default=None), tuple(notch), tuple(unclear))
    if band.highpass_hz is not None and band.lowpass_hz is not None and band.highpass_hz >= band.lowpass_hz:
        return RecorderBand(None, None, band.notch_hz, (*unclear, text.strip()))
    return band


def _edge_hz(found: re.Match[str]) -> float | None:
    """Return the edge of one filter; None where its unit does not fit its name."""
    is_highpass = found["name"][0] in "ht"
    if found["value"] == "dc":
        return 0.0 if is_highpass else None
    value = float(found["value"].replace(",", "."))
    unit = found["unit"] or ("s" if found["name"] == "tc" else "hz")
    if unit.endswith("hz"):
        return None if found["name"] == "tc" else value * _PER_UNIT[unit]
    if not is_highpass or value == 0:
        return None
    return 1 / (2 * math.pi * value * _PER_UNIT[unit])


def strictest(
    header: RecorderBand, highpass_hz: float | None, lowpass_hz: float | None
) -> tuple[float | None, float | None]:
    """Return high-pass and low-pass in Hz that let the least pass, of the header's and the declared ones."""
    highpasses = [edge for edge in (header.highpass_hz, highpass_hz) if edge is not None]
    lowpasses = [edge for edge in (header.lowpass_hz, lowpass_hz) if edge is not None]
    return max(highpasses, default=None), min(lowpasses, default=None)


def share_beyond(low_hz: float, high_hz: float, highpass_hz: float | None, lowpass_hz: float | None) -> float:
    """Return the share of a band, 0 to 1, that lies beyond the recorder's edges.

    A band that starts at 0 Hz takes what the recorder gives: its lower side is not judged.
    """
    below = 0.0 if highpass_hz is None or low_hz == 0 else min(max(highpass_hz - low_hz, 0), high_hz - low_hz)
    above = 0.0 if lowpass_hz is None else min(max(high_hz - lowpass_hz, 0), high_hz - low_hz)
    return min(1.0, (below + above) / (high_hz - low_hz))


def loss_db(low_hz: float, high_hz: float, highpass_hz: float | None, lowpass_hz: float | None) -> float:
    """Return the power that a band of even density loses to the recorder, in dB.

    The order of a recorder's filters stands nowhere; of the first order, assumed here, they take the least.
    """
    frequency_hz = np.linspace(low_hz, high_hz, 2001)
    passed = np.ones(frequency_hz.size)
    if lowpass_hz is not None:
        passed /= 1 + (frequency_hz / lowpass_hz) ** 2
    if highpass_hz:
        passed *= frequency_hz**2 / (frequency_hz**2 + highpass_hz**2)
    return -10 * math.log10(float(np.trapezoid(passed, frequency_hz)) / (high_hz - low_hz))
