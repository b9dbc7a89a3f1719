"""Nodes from samples to features: beats, spectrum, features."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import TYPE_CHECKING, Any

import numpy as np

from bandcairn.execution.epoch_nodes import epoch_counts, note_of_average, why_missing
from bandcairn.execution.frames import (
    frame_to_epochs,
    frame_to_signal,
    frame_to_spectra,
    spectra_to_frame,
)
from bandcairn.steps.beats import find_r_peaks
from bandcairn.steps.eeg import eeg_features
from bandcairn.steps.emg import EmgEpochs, emg_features, rms
from bandcairn.steps.epoch import epoch_view
from bandcairn.steps.features import stack_channels
from bandcairn.steps.heart import NO_TACHOGRAM, heart_band_features, heart_features, tachogram
from bandcairn.steps.rejection import KEPT
from bandcairn.steps.spectrum import power_density
from bandcairn.steps.stop_bands import note_stop_bands
from bandcairn.store.frame import Frame

if TYPE_CHECKING:
    from collections.abc import Mapping

    from numpy.typing import NDArray

    from bandcairn.signal import Signal
    from bandcairn.steps.epoch import Epochs
    from bandcairn.steps.features import FeatureValue
    from bandcairn.store.frame import Column


def beats_node(_: Mapping[str, Any], parents: Mapping[str, Frame]) -> Frame:
    """Find the R peaks: one row a beat, times in seconds from the start of the file."""
    signal = frame_to_signal(parents["signal"])
    found = [
        (channel, float(run.start_s), find_r_peaks(samples[index], float(signal.rate_hz)))
        for run, samples in signal.each_run()
        for index, channel in enumerate(signal.channels)
    ]
    columns: dict[str, Column] = {
        "channel": tuple(channel for channel, _, beats in found for _ in beats.times_s),
        "time_s": np.concatenate([start_s + beats.times_s for _, start_s, beats in found]),
        "amplitude_uv": np.concatenate([beats.amplitude_uv for _, _, beats in found]),
    }
    inverted = sorted({channel for channel, _, beats in found if beats.inverted})
    return Frame(columns, {"channels": list(signal.channels), "inverted": inverted})


def spectrum_node(parameters: Mapping[str, Any], parents: Mapping[str, Frame]) -> Frame:
    """Estimate spectra: of EEG averaged over the kept epochs of a segment, of EMG and beats one an epoch."""
    options = {name: value for name, value in parameters.items() if name not in ("kind", "interpolation_hz")}
    if options["method"] == "periodogram":
        del options["overlap"]
    if parameters["kind"] == "ecg":
        return _beat_spectra(parents, options, parameters["interpolation_hz"])
    return _eeg_spectra(parents, options) if parameters["kind"] == "eeg" else _emg_spectra(parents, options)


def _eeg_spectra(parents: Mapping[str, Frame], options: Mapping[str, Any]) -> Frame:
    signal, epochs = frame_to_signal(parents["signal"]), frame_to_epochs(parents["epochs"])
    segments = [name for name, _ in parents["epochs"].facts["segments"]]
    density, step_hz = _epoch_spectra(signal, epochs, options)
    of_segment = np.array([[name == segment for name in epochs.segment] for segment in segments], dtype=bool)
    means = {
        channel: np.stack([_mean_density(density[row], epochs.kept[row] & here) for here in of_segment])
        for row, channel in enumerate(signal.channels)
    }
    # What the filter stops is no matter of the spectrum, but of those who read it.
    stopped = {name: fact for name, fact in parents["signal"].facts.items() if name == "stop_bands_hz"}
    return spectra_to_frame(means, step_hz, rows="segments", **stopped)


def _mean_density(density: NDArray[np.float64], used: NDArray[np.bool_]) -> NDArray[np.float64]:
    """Average the used epochs, shape (n_epochs, n_frequencies); NaN where there is none."""
    if not used.any():
        return np.full(density.shape[-1], np.nan)
    mean: NDArray[np.float64] = density[used].mean(axis=0)
    return mean


def _emg_spectra(parents: Mapping[str, Frame], options: Mapping[str, Any]) -> Frame:
    signal, epochs = frame_to_signal(parents["signal"]), frame_to_epochs(parents["epochs"])
    density, step_hz = _epoch_spectra(signal, epochs, options)
    return spectra_to_frame(dict(zip(signal.channels, density, strict=True)), step_hz, rows="epochs")


def _epoch_spectra(
    signal: Signal, epochs: Epochs, options: Mapping[str, Any]
) -> tuple[NDArray[np.float64], Fraction]:
    """Return densities of shape (n_channels, n_epochs, n_frequencies), and the distance of the frequencies."""
    windows = epoch_view(signal.samples, epochs)
    density = power_density(windows, float(signal.rate_hz), **options).density
    return density, signal.rate_hz / _segment_samples(epochs.length, signal.rate_hz, options)


def _segment_samples(epoch_samples: int, rate_hz: Fraction, options: Mapping[str, Any]) -> int:
    segment_s = options.get("segment_s")
    return epoch_samples if segment_s is None else round(Fraction(str(segment_s)) * rate_hz)


def _beat_spectra(parents: Mapping[str, Frame], options: Mapping[str, Any], interpolation_hz: float) -> Frame:
    """Return the spectra of the interpolated beat intervals; NaN for an epoch without a tachogram."""
    epochs = frame_to_epochs(parents["epochs"])
    length_s = _length_s(parents["epochs"])
    rate_hz = Fraction(str(interpolation_hz))
    segment = _segment_samples(0, rate_hz, options)
    densities: dict[str, NDArray[np.float64]] = {}
    refused: dict[str, list[str]] = {}
    for channel in parents["beats"].facts["channels"]:
        times_s = _beat_times(parents["beats"], channel)
        rows = np.full((len(epochs.start_s), segment // 2 + 1), np.nan)
        for row, start_s in zip(rows, epochs.start_s, strict=True):
            series = tachogram(times_s, start_s, start_s + length_s, interpolation_hz)
            if len(series.nn_ms) >= segment:
                row[:] = power_density(series.nn_ms, interpolation_hz, **options).density
            else:
                told = (
                    series.note
                    or f"its intervals last {len(series.nn_ms) / rate_hz:g} s, less than segment_s"
                )
                refused.setdefault(channel, []).append(told)
        densities[channel] = rows
    return spectra_to_frame(densities, rate_hz / segment, rows="epochs", refused=refused)


def features_node(parameters: Mapping[str, Any], parents: Mapping[str, Frame]) -> Frame:
    """Compute the features: one row a channel, segment, feature and band."""
    epochs = frame_to_epochs(parents["epochs"])
    measure = {"eeg": _eeg_values, "ecg": _ecg_values, "emg": _emg_values}[parameters["kind"]]
    rows: list[dict[str, Any]] = []
    for index, (name, start_s) in enumerate(parents["epochs"].facts["segments"]):
        here = np.array([segment == name for segment in epochs.segment], dtype=bool)
        values = measure(_Segment(index, start_s, here), parameters, parents)
        for row, channel in enumerate(parents["epochs"].facts["channels"]):
            reason = epochs.reason[row, here]
            counts = epoch_counts(reason, epochs.no_window.get(name, 0))
            missing = why_missing(
                channel, int(np.count_nonzero(reason == KEPT)), parameters, parents["epochs"]
            )
            note = note_of_average(channel, parents["epochs"])
            told = {"channel": channel, "segment": name or None, **counts}
            rows += [{**told, **_feature(value, row, reason, (missing, note))} for value in values]
    return Frame({name: _column([row[name] for row in rows]) for name in rows[0]})


@dataclass(frozen=True, slots=True)
class _Segment:
    """One segment: its place among the segments, its start, and which of the epochs lie in it."""

    index: int
    start_s: float
    here: NDArray[np.bool_]


def _eeg_values(
    segment: _Segment, parameters: Mapping[str, Any], parents: Mapping[str, Frame]
) -> tuple[FeatureValue, ...]:
    spectra = frame_to_spectra(parents["spectrum"])
    frequencies_hz = next(iter(spectra.values())).frequencies_hz
    density = np.stack([spectrum.density[segment.index] for spectrum in spectra.values()])
    bands_hz = {name: tuple(edges) for name, edges in parameters["bands_hz"].items()}
    total_hz = _total_hz(parameters)
    values = eeg_features(frequencies_hz, density, bands_hz, total_hz)
    stopped = tuple(
        (low_hz, high_hz) for low_hz, high_hz in parents["spectrum"].facts.get("stop_bands_hz", [])
    )
    return note_stop_bands(values, bands_hz, total_hz, stopped)


def _total_hz(parameters: Mapping[str, Any]) -> tuple[float, float]:
    """Return the range of the total power: as declared, or from the lowest to the highest band edge."""
    if "total_hz" in parameters:
        low_hz, high_hz = parameters["total_hz"]
        return low_hz, high_hz
    edges = list(parameters["bands_hz"].values())
    return min(low for low, _ in edges), max(high for _, high in edges)


def _ecg_values(
    segment: _Segment, parameters: Mapping[str, Any], parents: Mapping[str, Frame]
) -> tuple[FeatureValue, ...]:
    epochs, length_s = frame_to_epochs(parents["epochs"]), _length_s(parents["epochs"])
    bands_hz = {name: tuple(edges) for name, edges in parameters["bands_hz"].items()}
    channels = []
    for row, (channel, spectrum) in enumerate(frame_to_spectra(parents["spectrum"]).items()):
        used = epochs.kept[row] & segment.here
        in_time = heart_features(_beat_times(parents["beats"], channel), epochs.start_s[used], length_s)
        with_spectrum = used & np.isfinite(spectrum.density[:, 0])
        density = _mean_density(spectrum.density, with_spectrum)
        in_bands = heart_band_features(spectrum.frequencies_hz, density[None], bands_hz, length_s)
        refused = parents["spectrum"].facts["refused"].get(channel, [])
        channels.append((*in_time, *(_with_reason(value, refused) for value in in_bands)))
    return stack_channels(channels)


def _with_reason(value: FeatureValue, refused: list[str]) -> FeatureValue:
    """Say why there is no spectrum where a value is missing for want of one."""
    if value.note != (NO_TACHOGRAM,) or not refused:
        return value
    return replace(value, note=(f"{NO_TACHOGRAM}: {refused[0]}",))


def _emg_values(
    segment: _Segment, _: Mapping[str, Any], parents: Mapping[str, Frame]
) -> tuple[FeatureValue, ...]:
    signal, epochs = frame_to_signal(parents["signal"]), frame_to_epochs(parents["epochs"])
    spectra, here = frame_to_spectra(parents["spectrum"]), segment.here
    return emg_features(
        EmgEpochs(
            start_s=epochs.start_s[here] - segment.start_s,
            length_s=_length_s(parents["epochs"]),
            kept=epochs.kept[:, here],
            rms_uv=rms(epoch_view(signal.samples, epochs)[:, here]),
            frequencies_hz=next(iter(spectra.values())).frequencies_hz,
            density=np.stack([spectrum.density[here] for spectrum in spectra.values()]),
        )
    )


def _beat_times(beats: Frame, channel: str) -> NDArray[np.float64]:
    of_channel = np.array([name == channel for name in beats.text("channel")], dtype=bool)
    times_s: NDArray[np.float64] = beats.numbers("time_s")[of_channel]
    return times_s


def _length_s(epochs: Frame) -> float:
    return float(epochs.facts["length"] / Fraction(epochs.facts["rate_hz"]))


def _feature(
    value: FeatureValue, row: int, reason: NDArray[np.int8], told: tuple[str | None, str | None]
) -> dict[str, Any]:
    """Return one feature of one channel; `told` is why it has no value whatever, and what else is to be noted."""
    missing, note = told
    return {
        "feature": value.feature,
        "band": value.band or None,
        "value": math.nan if missing else float(value.values[row]),
        "unit": value.unit,
        "epochs_used": int(np.count_nonzero(reason == KEPT)),
        "epochs_total": len(reason),
        "note": missing or "; ".join(filter(None, (value.note[row], note))) or None,
    }


def _column(values: list[Any]) -> NDArray[Any] | tuple[str | None, ...]:
    """Return values as a column: numbers as an array, text as a tuple."""
    if all(isinstance(value, (int, float)) for value in values):
        return np.array(values)
    return tuple(values)
