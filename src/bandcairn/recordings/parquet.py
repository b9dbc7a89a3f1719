"""Parquet files: one column a channel, an optional column ``time_s``; they state no unit that is read."""

from __future__ import annotations

from typing import TYPE_CHECKING

from bandcairn.recordings.clock import TIME_COLUMN, read_clock
from bandcairn.recordings.refusal import refusal, unreadable
from bandcairn.recordings.table import Table
from bandcairn.signal import FileDetails

if TYPE_CHECKING:
    from pathlib import Path

    import numpy as np
    import pandas as pd
    from numpy.typing import NDArray


def open_parquet(path: Path) -> Table:
    """Read a Parquet file into memory.

    Raises
    ------
    RecordingError
        If the file cannot be read, holds no row, or its clock is at fault.
    """
    import pandas as pd

    try:
        frame = pd.read_parquet(path)
    except OSError as error:
        if error.errno is None:
            raise _damaged(path, error) from error
        raise unreadable(path, error) from error
    except (ValueError, KeyError, TypeError, RuntimeError) as error:
        raise _damaged(path, error) from error
    if frame.empty:
        raise refusal(path, "no rows", "one row a sample", "Export the recording again.")
    names = tuple(str(name).strip() for name in frame.columns)

    def parse(places: tuple[int, ...]) -> tuple[NDArray[np.float64] | tuple[str, ...], ...]:
        return tuple(_column(frame.iloc[:, place]) for place in places)

    clock = None
    if names.count(TIME_COLUMN) == 1:
        times = _column(frame.iloc[:, names.index(TIME_COLUMN)])
        # The shortest text of a double says how many digits of it are meant.
        cells = times if isinstance(times, tuple) else tuple(map(repr, times.tolist()))
        clock = read_clock(path, [cell.encode() for cell in cells])
    return Table(path, names, len(frame), clock, parse, FileDetails(format="Parquet"))


def _column(series: pd.Series[float]) -> NDArray[np.float64] | tuple[str, ...]:
    """Return numbers as doubles, NaN where they are missing; anything else as text."""
    import numpy as np
    import pandas as pd

    if pd.api.types.is_numeric_dtype(series.dtype) and not pd.api.types.is_bool_dtype(series.dtype):
        return np.ascontiguousarray(series.to_numpy(dtype=np.float64, na_value=np.nan))
    return tuple("" if pd.isna(value) else str(value) for value in series)


def _damaged(path: Path, error: Exception) -> Exception:
    told = str(error).splitlines()[0][:120] if str(error) else type(error).__name__
    return refusal(path, f"no Parquet ({told})", "a Parquet file", "Export the recording again.")
