"""The memory of frames: bounded, and the least recently used goes first."""

from __future__ import annotations

import numpy as np

from bandcairn.store.frame import Frame
from bandcairn.store.memory import FrameMemory

HUNDRED_BYTES = Frame({"a": np.zeros(100, np.int8)})


def held(memory: FrameMemory, keys: str) -> str:
    """Return which of the keys are held. Asking counts as using them, from left to right."""
    return "".join(key for key in keys if memory.get(key) is not None)


def test_the_bound_is_kept_by_dropping_the_oldest() -> None:
    """Three frames of a hundred bytes fit into 300 bytes; a fourth drives out the first."""
    memory = FrameMemory(300)
    for key in "abcd":
        memory.put(key, HUNDRED_BYTES)
    assert held(memory, "abcd") == "bcd"


def test_a_frame_that_was_used_stays_longer() -> None:
    """Using a frame makes it the youngest."""
    memory = FrameMemory(300)
    for key in "abc":
        memory.put(key, HUNDRED_BYTES)
    memory.get("a")
    memory.put("d", HUNDRED_BYTES)
    assert held(memory, "abcd") == "acd"


def test_a_large_frame_drives_out_as_many_as_it_needs() -> None:
    """The bound holds for the sum."""
    memory = FrameMemory(300)
    for key in "abc":
        memory.put(key, HUNDRED_BYTES)
    memory.put("d", Frame({"a": np.zeros(200, np.int8)}))
    assert held(memory, "abcd") == "cd"


def test_a_frame_above_the_bound_is_not_held_and_drives_out_nothing() -> None:
    """It would only empty the memory."""
    memory = FrameMemory(300)
    memory.put("a", HUNDRED_BYTES)
    memory.put("b", Frame({"a": np.zeros(301, np.int8)}))
    assert held(memory, "ab") == "a"


def test_a_frame_put_twice_counts_once() -> None:
    """Else the memory would shrink with every repetition."""
    memory = FrameMemory(300)
    for key in "aaaabc":
        memory.put(key, HUNDRED_BYTES)
    assert held(memory, "abc") == "abc"


def test_a_forgotten_frame_leaves_its_room() -> None:
    """And forgetting one that is not held is no error."""
    memory = FrameMemory(300)
    for key in "abc":
        memory.put(key, HUNDRED_BYTES)
    memory.forget("b")
    memory.forget("b")
    memory.put("d", HUNDRED_BYTES)
    assert held(memory, "abcd") == "acd"
