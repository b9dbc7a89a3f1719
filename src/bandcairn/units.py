"""The one reader of units: every amplitude in bandcairn is in microvolt."""

from __future__ import annotations

from bandcairn.errors import UnknownUnitError

MICROVOLT = "uV"

# U+00B5 is the micro sign, U+03BC the Greek letter mu: exporters write either.
_MICROVOLTS_PER_UNIT = {
    "nV": 1e-3,
    "uV": 1.0,
    "\u00b5V": 1.0,
    "\u03bcV": 1.0,
    "mV": 1e3,
    "V": 1e6,
}
KNOWN_UNITS = tuple(_MICROVOLTS_PER_UNIT)


def microvolts_per(unit: str) -> float:
    """Return how many microvolts one of `unit` is.

    Parameters
    ----------
    unit : str
        As written in a file header or a declaration; blanks around it are ignored, its case is not
        (mV and MV differ by nine orders of magnitude).

    Returns
    -------
    float
        Microvolts per unit.

    Raises
    ------
    UnknownUnitError
        If the unit is blank or unknown. A wrong scale is worse than no data: nothing is guessed.

    Examples
    --------
    >>> microvolts_per("mV")
    1000.0
    """
    try:
        return _MICROVOLTS_PER_UNIT[unit.strip()]
    except KeyError:
        found = repr(unit.strip()) if unit.strip() else "no unit"
        raise UnknownUnitError(f"found {found}; allowed: {', '.join(KNOWN_UNITS)}") from None
