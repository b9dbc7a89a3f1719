"""What the study declares of its files."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

# A copy that broke off or a recorder that was not closed loses its last record; more is another recording.
MAX_MISSING_SHARE = Fraction(1, 100)


@dataclass(frozen=True, slots=True)
class Declared:
    """Declaration for one signal.

    Attributes
    ----------
    rate_hz : Fraction or None
        Sampling rate of delimited text and Parquet; needed unless the file has a column ``time_s``.
    unit : str or None
        Unit of all channels of delimited text and Parquet, which state none; of a channel of EDF or BDF whose
        unit is blank or unknown, if a reason is given.
    unit_reason : str or None
        Why the unit of an EDF or BDF file is known although the file does not tell it.
    missing_are_gaps : bool
        Whether blank cells and jumps of the clock of delimited text and Parquet are gaps; else they are refused.
    max_missing_share : Fraction
        Largest share of the data records by which an EDF or BDF file may differ from its header's number.
    """

    rate_hz: Fraction | None = None
    unit: str | None = None
    unit_reason: str | None = None
    missing_are_gaps: bool = False
    max_missing_share: Fraction = MAX_MISSING_SHARE
