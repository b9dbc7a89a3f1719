"""What the samples of the first files tell."""

from __future__ import annotations

from typing import TYPE_CHECKING

import pytest

from bandcairn.drafting.draft import draft_study
from bandcairn.recordings.export import write_delimited

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path

    import numpy as np
    from numpy.typing import NDArray


@pytest.mark.parametrize("mains_hz", [50, 60])
def test_hum_tells_the_mains(tmp_path: Path, put_edf: Callable[..., None], mains_hz: int) -> None:
    """A line that stands 6 dB out at one frequency alone is a guess, and marked as one."""
    put_edf(tmp_path / "p1.edf", {"Fz": 256, "Cz": 256}, hum_hz=mains_hz, hum=8.0)
    draft = draft_study(tmp_path)
    assert draft.mains_hz == mains_hz
    assert any("hum" in mark.text for mark in draft.guesses)


def test_without_hum_the_mains_stay_blank(tmp_path: Path, put_edf: Callable[..., None]) -> None:
    """Noise alone decides nothing: a person must fill it in."""
    put_edf(tmp_path / "p1.edf", {"Fz": 256, "Cz": 256})
    draft = draft_study(tmp_path)
    assert draft.mains_hz is None
    assert any(mark.text.startswith("mains_hz:") for mark in draft.blanks)


def test_files_too_slow_leave_the_mains_blank(tmp_path: Path, put_edf: Callable[..., None]) -> None:
    """Below 140 Hz nothing can be seen around 60 Hz."""
    put_edf(tmp_path / "p1.edf", {"Fz": 100})
    assert draft_study(tmp_path).mains_hz is None


@pytest.mark.parametrize(("factor", "unit"), [(1.0, "uV"), (1e-3, "mV"), (1e-6, "V")])
def test_the_spread_of_numbers_tells_the_unit(
    tmp_path: Path, noise: Callable[..., NDArray[np.float64]], factor: float, unit: str
) -> None:
    """20 uV of EEG is 0.02 in mV: a guess, and marked as one."""
    samples = [noise(250, seed=seed) * factor for seed in (1, 2)]
    write_delimited(tmp_path / "p1.csv", ["Fz", "Cz"], samples, decimals=9)
    draft = draft_study(tmp_path)
    assert any(f"unit: {unit} " in mark.text for mark in draft.guesses)


def test_numbers_of_no_usual_size_leave_the_unit_blank(
    tmp_path: Path, noise: Callable[..., NDArray[np.float64]]
) -> None:
    """A scale that fits nothing is not guessed."""
    write_delimited(tmp_path / "p1.csv", ["Fz"], [noise(250, spread=0.8)], decimals=6)
    assert any(mark.text.startswith("unit:") for mark in draft_study(tmp_path).blanks)
