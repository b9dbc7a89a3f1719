"""Signals, epochs and spectra as the frames of nodes, and back."""

from __future__ import annotations

from fractions import Fraction
from typing import TYPE_CHECKING, Any

import numpy as np

from bandcairn.signal import Run, Signal
from bandcairn.steps.epoch import Epochs
from bandcairn.steps.spectrum import Spectrum
from bandcairn.store.frame import Frame

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from bandcairn.recordings import RawSignal


def raw_to_frame(raw: RawSignal) -> Frame:
    """Return the node of a raw signal: the samples as the file holds them, with their scaling to microvolt."""
    facts = _signal_facts(raw.rate_hz, raw.labels, raw.runs)
    facts |= {"gain_uv": list(raw.gain_uv), "offset_uv": list(raw.offset_uv)}
    return Frame(dict(zip(raw.labels, raw.samples, strict=True)), facts)


def signal_to_frame(signal: Signal, **facts: Any) -> Frame:  # noqa: ANN401 - JSON values
    """Return the node of a signal: one column a channel, in microvolt."""
    columns = dict(zip(signal.channels, signal.samples, strict=True))
    return Frame(columns, {**_signal_facts(signal.rate_hz, signal.channels, signal.runs), **facts})


def frame_to_signal(frame: Frame) -> Signal:
    """Return the signal of a load, resample or filter node."""
    channels = tuple(frame.facts["channels"])
    columns = [frame.numbers(channel) for channel in channels]
    gains = frame.facts.get("gain_uv")
    samples = _rows(columns) if gains is None else _scaled(columns, gains, frame.facts["offset_uv"])
    runs = tuple(Run(first, stop, Fraction(start)) for first, stop, start in frame.facts["runs"])
    return Signal(samples, Fraction(frame.facts["rate_hz"]), channels, runs)


def _rows(columns: Sequence[NDArray[np.float64]]) -> NDArray[np.float64]:
    """Return columns as the rows of one array; no copy if that is what they are, as in a node just made."""
    if len(columns) == 1:
        return columns[0][np.newaxis]
    whole = columns[0].base
    if isinstance(whole, np.ndarray) and whole.ndim == 2 and len(whole) == len(columns):
        places = [row.__array_interface__ for row in whole]
        if places == [column.__array_interface__ for column in columns]:
            return whole
    return np.stack(columns)


def _scaled(
    columns: Sequence[NDArray[Any]], gains: Sequence[float], offsets: Sequence[float]
) -> NDArray[np.float64]:
    """Return the samples of a load node in microvolt, one row a column."""
    samples = np.empty((len(columns), len(columns[0])))
    for row, column, gain, offset in zip(samples, columns, gains, offsets, strict=True):
        np.multiply(column, gain, out=row)
        np.add(row, offset, out=row)
    return samples


def _signal_facts(rate_hz: Fraction, channels: tuple[str, ...], runs: tuple[Run, ...]) -> dict[str, Any]:
    return {
        "rate_hz": str(rate_hz),
        "channels": list(channels),
        "unit": "uV",
        "runs": [[run.first, run.stop, str(run.start_s)] for run in runs],
    }


def epochs_to_frame(
    epochs: Epochs,
    signal: Signal,
    segments: tuple[tuple[str, float], ...],
    **facts: Any,  # noqa: ANN401 - JSON values
) -> Frame:
    """Return the node of epochs: one row a window; for each channel its peak-to-peak and why it is rejected.

    Parameters
    ----------
    epochs : Epochs
        The windows.
    signal : Signal
        The signal they lie in.
    segments : tuple of (str, float)
        Name and start in seconds of every segment, also of those too short for a window.
    **facts
        What else is known of them.
    """
    columns: dict[str, NDArray[Any] | tuple[str | None, ...]] = {
        "first": epochs.first,
        "start_s": epochs.start_s,
        "segment": epochs.segment,
    }
    for channel, peak_to_peak, reason in zip(
        signal.channels, epochs.peak_to_peak_uv, epochs.reason, strict=True
    ):
        columns[f"peak_to_peak_uv/{channel}"] = peak_to_peak
        columns[f"reason/{channel}"] = reason
    if epochs.step_uv is not None:
        columns |= {f"step_uv/{name}": row for name, row in zip(signal.channels, epochs.step_uv, strict=True)}
    facts |= {
        "length": epochs.length,
        "rate_hz": str(signal.rate_hz),
        "channels": list(signal.channels),
        "segments": [list(segment) for segment in segments],
        "no_window": epochs.no_window,
        "largest_shift_s": epochs.largest_shift_s,
    }
    return Frame(columns, facts)


def frame_to_epochs(frame: Frame) -> Epochs:
    """Return the epochs of an epoch node."""
    channels = frame.facts["channels"]
    return Epochs(
        first=frame.numbers("first"),
        start_s=frame.numbers("start_s"),
        segment=tuple(name or "" for name in frame.text("segment")),
        length=frame.facts["length"],
        peak_to_peak_uv=np.stack([frame.numbers(f"peak_to_peak_uv/{channel}") for channel in channels]),
        reason=np.stack([frame.numbers(f"reason/{channel}") for channel in channels]),
        no_window=frame.facts["no_window"],
        largest_shift_s=frame.facts["largest_shift_s"],
    )


def spectra_to_frame(densities: Mapping[str, NDArray[np.float64]], step_hz: Fraction, **facts: Any) -> Frame:  # noqa: ANN401 - JSON values
    """Return the node of spectra: for each channel its densities, row after row.

    Parameters
    ----------
    densities : mapping of str to ndarray, shape (n_rows, n_frequencies)
        One-sided, in unit^2/Hz; a row is an epoch or a segment, and NaN where there is nothing to average.
    step_hz : Fraction
        Distance of the frequencies, which start at zero.
    **facts
        What the rows are.
    """
    n_rows, n_frequencies = next(iter(densities.values())).shape
    columns = {channel: density.reshape(-1) for channel, density in densities.items()}
    facts |= {
        "channels": list(densities),
        "n_rows": n_rows,
        "n_frequencies": n_frequencies,
        "frequency_step_hz": str(step_hz),
    }
    return Frame(columns, facts)


def frame_to_spectra(frame: Frame) -> dict[str, Spectrum]:
    """Return the spectra of a spectrum node by channel, densities of shape (n_rows, n_frequencies)."""
    n_frequencies = frame.facts["n_frequencies"]
    frequencies_hz = np.arange(n_frequencies) * float(Fraction(frame.facts["frequency_step_hz"]))
    return {
        channel: Spectrum(frequencies_hz, frame.numbers(channel).reshape(-1, n_frequencies))
        for channel in frame.facts["channels"]
    }
