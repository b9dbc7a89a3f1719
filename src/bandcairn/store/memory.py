"""Recently made or read frames, kept in memory so that the next step of the chain need not read them back."""

from __future__ import annotations

from collections import OrderedDict
from threading import Lock
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from bandcairn.store.frame import Frame


class FrameMemory:
    """A bounded memory of frames; the least recently used goes first. Safe to share between threads.

    Parameters
    ----------
    limit_bytes : int
        Upper bound of what is kept.
    """

    def __init__(self, limit_bytes: int) -> None:
        self._limit_bytes = limit_bytes
        self._held_bytes = 0
        self._frames: OrderedDict[str, Frame] = OrderedDict()
        self._lock = Lock()

    def get(self, key: str) -> Frame | None:
        """Return the frame of a key, if it is still held."""
        with self._lock:
            frame = self._frames.get(key)
            if frame is not None:
                self._frames.move_to_end(key)
            return frame

    def put(self, key: str, frame: Frame) -> None:
        """Hold a frame; one that is larger than the bound is not held."""
        with self._lock:
            if key in self._frames or frame.nbytes > self._limit_bytes:
                return
            self._frames[key] = frame
            self._held_bytes += frame.nbytes
            while self._held_bytes > self._limit_bytes:
                _, dropped = self._frames.popitem(last=False)
                self._held_bytes -= dropped.nbytes

    def forget(self, key: str) -> None:
        """Drop the frame of a key."""
        with self._lock:
            frame = self._frames.pop(key, None)
            if frame is not None:
                self._held_bytes -= frame.nbytes
