"""The data records of EDF and BDF files: blocks of bytes in, integers out."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from bandcairn.recordings.refusal import refusal, unreadable

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

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


def read_digital(
    path: Path, header: Header, signals: tuple[SignalHeader, ...], first: int, stop: int
) -> tuple[NDArray[np.int16] | NDArray[np.int32], ...]:
    """Read samples `first` up to `stop` of signals that share one rate.

    Returns
    -------
    tuple of ndarray, shape (stop - first,)
        int16 for EDF, int32 for BDF; one for each of `signals`.
    """
    per_record = signals[0].samples_per_record
    first_record, stop_record = first // per_record, -(-stop // per_record)
    dtype = np.int16 if header.container == "EDF" else np.int32
    shape = (stop_record - first_record, per_record)
    whole = [np.empty(shape, dtype=dtype) for _ in signals]
    place = 0
    for block in each_block(path, header, first_record, stop_record):
        for samples, signal in zip(whole, signals, strict=True):
            samples[place : place + len(block)] = _integers(block, signal, header)
        place += len(block)
    skipped = first_record * per_record
    return tuple(samples.reshape(-1)[first - skipped : stop - skipped] for samples in whole)


def bytes_of(block: NDArray[np.uint8], signal: SignalHeader) -> NDArray[np.uint8]:
    """Return the bytes of `signal` in a block of records, shape (n_records, n_bytes), contiguous."""
    return np.ascontiguousarray(block[:, signal.first_byte : signal.stop_byte])


def _integers(
    block: NDArray[np.uint8], signal: SignalHeader, header: Header
) -> NDArray[np.int16] | NDArray[np.int32]:
    if header.container == "EDF":
        return block.view("<i2")[:, signal.first_byte // 2 : signal.stop_byte // 2]
    # Words of four bytes, three apart, that begin a byte early: the shift drops that byte and keeps the sign.
    three = block[:, signal.first_byte : signal.stop_byte]
    padded = np.zeros(three.size + 1, dtype=np.uint8)
    padded[1:].reshape(three.shape)[:] = three
    words = np.ndarray(
        (len(block), signal.samples_per_record), "<i4", buffer=padded, strides=(three.shape[1], 3)
    )
    shifted: NDArray[np.int32] = words >> 8
    return shifted
