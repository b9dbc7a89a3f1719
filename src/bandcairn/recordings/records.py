"""The data records of EDF and BDF files as blocks of bytes, for what needs no numbers: digests and annotations."""

from __future__ import annotations

from typing import TYPE_CHECKING

from bandcairn.recordings.refusal import refusal, unreadable

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

    import numpy as np
    from numpy.typing import NDArray

    from bandcairn.recordings.header import Header, SignalHeader

# Large enough to make calls rare, small enough to stay in a processor's cache between read and copy.
_BLOCK_BYTES = 1 << 20


def each_block(
    path: Path, header: Header, first: int = 0, stop: int | None = None
) -> Iterator[NDArray[np.uint8]]:
    """Yield the data records from `first` up to `stop` in blocks.

    Plain reads rather than a memory map: a file cut short meanwhile is an error, not the end of the process.

    Parameters
    ----------
    path : Path
        The file.
    header : Header
        Its header.
    first, stop : int
        Half-open range of records; all of them by default.

    Yields
    ------
    ndarray, shape (n_records of the block, header.record_bytes), uint8
        Valid until the next one: the memory is used again.
    """
    import numpy as np

    stop = header.n_records if stop is None else stop
    per_block = max(1, min(stop - first, _BLOCK_BYTES // header.record_bytes))
    buffer = np.empty((per_block, header.record_bytes), dtype=np.uint8)
    try:
        with path.open("rb") as file:
            file.seek(header.header_bytes + first * header.record_bytes)
            for record in range(first, stop, per_block):
                block = buffer[: min(per_block, stop - record)]
                if file.readinto(block) != block.nbytes:  # type: ignore[arg-type]  # an array is a buffer
                    raise refusal(path, "a file cut short while it was read", "a finished file", "Try again.")
                yield block
    except OSError as error:
        raise unreadable(path, error) from error


def each_byte_block(path: Path, first_byte: int = 0) -> Iterator[bytes]:
    """Yield the bytes of a file from `first_byte` on, in blocks."""
    try:
        with path.open("rb") as file:
            file.seek(first_byte)
            while block := file.read(_BLOCK_BYTES):
                yield block
    except OSError as error:
        raise unreadable(path, error) from error


def bytes_of(block: NDArray[np.uint8], signal: SignalHeader) -> NDArray[np.uint8]:
    """Return the bytes of `signal` in a block of records, shape (n_records, n_bytes), contiguous."""
    import numpy as np

    return np.ascontiguousarray(block[:, signal.first_byte : signal.stop_byte])


def numbered_header(path: Path, header: Header, n_records: int) -> bytes:
    """Return the bytes of the header, with `n_records` as the number of data records."""
    try:
        with path.open("rb") as file:
            content = file.read(header.header_bytes)
    except OSError as error:
        raise unreadable(path, error) from error
    return content[:236] + str(n_records).encode().ljust(8) + content[244:]
