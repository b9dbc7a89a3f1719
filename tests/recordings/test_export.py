"""Writers for the demo and the tests: deterministic, readable by others, exact to half a step."""

from __future__ import annotations

from typing import TYPE_CHECKING

import edfio
import numpy as np
import pytest

from bandcairn.recordings import Declared, inspect, read
from bandcairn.recordings.export import ExportChannel, Person, write_bdf, write_delimited, write_edf
from bandcairn.signal import Annotation

if TYPE_CHECKING:
    from collections.abc import Callable
    from pathlib import Path


def channels() -> list[ExportChannel]:
    """Three rates and two units."""
    rng = np.random.default_rng(4)
    return [
        ExportChannel("Cz", "uV", 256, rng.normal(0, 40, 1024), (-500, 500)),
        ExportChannel("ECG", "mV", 500, rng.normal(0, 0.5, 2000), (-5, 5)),
        ExportChannel("EMG", "uV", 2000, rng.normal(0, 100, 8000), (-1000, 1000)),
    ]


@pytest.mark.parametrize(
    ("write", "name", "steps"), [(write_edf, "one.edf", 2**16), (write_bdf, "one.bdf", 2**24)]
)
def test_each_channel_comes_back_at_its_own_rate_to_half_a_step(
    tmp_path: Path, write: Callable[..., None], name: str, steps: int
) -> None:
    """Written once, read once: the only loss is the rounding to a step."""
    path = tmp_path / name
    write(path, channels(), (Annotation(1.0, 2.0, "eyes closed"),))
    for channel in channels():
        signal = read(path, (channel.label,), Declared(), None, None).to_signal()
        factor = 1e3 if channel.unit == "mV" else 1.0
        low, high = channel.physical_range
        assert signal.rate_hz == channel.rate_hz
        np.testing.assert_allclose(
            signal.samples[0],
            channel.samples * factor,
            rtol=0,
            atol=0.5001 * factor * (high - low) / (steps - 1),
        )


@pytest.mark.parametrize(("write", "name"), [(write_edf, "one.edf"), (write_bdf, "one.bdf")])
def test_bytes_depend_on_the_arguments_alone(tmp_path: Path, write: Callable[..., None], name: str) -> None:
    """No date of today, no random name."""
    written = []
    for number in range(2):
        path = tmp_path / f"{number}{name}"
        write(path, channels(), (Annotation(1.0, 0.0, "x"),), Person("P1", "X"))
        written.append(path.read_bytes())
    assert written[0] == written[1]


def test_without_annotations_the_file_is_plain_edf(tmp_path: Path) -> None:
    """None writes no annotation channel; an empty tuple writes EDF+ without annotations."""
    plain, plus = tmp_path / "plain.edf", tmp_path / "plus.edf"
    write_edf(plain, channels(), None)
    write_edf(plus, channels())
    assert edfio.read_edf(plain).reserved == ""
    assert edfio.read_edf(plus).reserved == "EDF+C"
    assert inspect(plain).channels == inspect(plus).channels


def test_duration_of_records_is_as_asked_for(tmp_path: Path) -> None:
    """Half-second records for a file that no whole second divides."""
    path = tmp_path / "one.edf"
    write_edf(path, [ExportChannel("Cz", "uV", 10, np.zeros(15), (-1, 1))], record_s=0.5)
    assert edfio.read_edf(path).num_data_records == 3
    assert inspect(path).channels[0].n_samples == 15


@pytest.mark.parametrize(("name", "separator"), [("one.csv", ","), ("one.tsv", "\t")])
def test_delimited_text_has_a_header_and_one_row_a_sample(tmp_path: Path, name: str, separator: str) -> None:
    """Decimal point, line feed, as many digits as asked for."""
    path = tmp_path / name
    write_delimited(path, ["time_s", "Cz"], [np.array([0, 0.5]), np.array([1.25, -2])], decimals=2)
    assert path.read_bytes().decode() == f"time_s{separator}Cz\n0.00{separator}1.25\n0.50{separator}-2.00\n"
