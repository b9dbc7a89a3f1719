"""Nodes of quality: what is measured of a signal as recorded, and what the study's limits make of it.

The quality node knows no limit and no band: it keeps the measures of every channel and the density of its spectrum,
and the verdict judges them, so that a limit or a band may change without measuring anew.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING, Any, Literal

import numpy as np

from bandcairn.execution.frames import frame_to_signal
from bandcairn.execution.group_nodes import rows_to_frame
from bandcairn.steps.quality import assess
from bandcairn.steps.quantisation import margin_db, noise_density, rmssd_floor_ms
from bandcairn.steps.recorder import loss_db, read_prefilter, share_beyond, strictest
from bandcairn.steps.spectrum import Spectrum
from bandcairn.store.frame import Frame

if TYPE_CHECKING:
    from collections.abc import Iterator, Mapping

    from bandcairn.signal import Signal
    from bandcairn.steps.clipping import Stretches
    from bandcairn.steps.quality import ChannelQuality, Quality
    from bandcairn.steps.recorder import RecorderBand

    Side = Literal["most", "least", "within"]

# Every measure, in the order of the results, and its unit.
UNITS = {
    "clipped_share": "1",
    "clipped_longest_s": "s",
    "flat_share": "1",
    "flat_longest_s": "s",
    "missing_share": "1",
    "gap_count": "1",
    "longest_gap_s": "s",
    "peak_to_peak_uv": "uV",
    "rms_uv": "uV",
    "typical_peak_to_peak_uv": "uV",
    "typical_rms_uv": "uV",
    "identical_channels": "1",
    "mains_db": "dB",
    "mains_rms_uv": "uV",
    "mains_frequency_hz": "Hz",
    "lsb_uv": "uV",
    "smallest_step_uv": "uV",
    "recorder_highpass_hz": "Hz",
    "recorder_lowpass_hz": "Hz",
    "prefilter_unclear": "1",
    "quantisation_margin_db": "dB",
    "beyond_recorder_share": "1",
    "recorder_loss_db": "dB",
    "beats_rate_hz": "Hz",
    "rmssd_floor_ms": "ms",
}
DENSITY = "density"
_SIDES: dict[str, Side] = {
    "quantisation_margin_db": "least",
    "beats_rate_hz": "least",
    "typical_rms_uv": "within",
    "typical_peak_to_peak_uv": "within",
    "rms_uv": "within",
}
# Stretches kept of each channel and kind, the longest ones; all of them are counted.
MOST_STRETCHES = 100

VERDICT_COLUMNS = {
    "recording": "text",
    "signal": "text",
    "channel": "text",
    "measure": "text",
    "value": "number",
    "unit": "text",
    "limit": "number",
    "passed": "text",
    "node": "text",
}
# What the table must know besides: which features a failure is about (``channel``, ``band``, ``whole range``,
# ``intervals``), which band, and the failure in words; of what passes the words are absent.
JUDGED_COLUMNS = VERDICT_COLUMNS | {"about": "text", "band": "text", "told": "text"}


def quality_node(parameters: Mapping[str, Any], parents: Mapping[str, Frame]) -> Frame:
    """Measure the signal as it was recorded.

    The columns are the frequencies and the density of each channel; the facts hold the measures of each channel, and
    its clipped and flat stretches in seconds from the start of the file.
    """
    frame = parents["signal"]
    signal = frame_to_signal(frame)
    texts = parameters.get("prefilter", [""] * len(signal.channels))
    recorder = [read_prefilter(text) for text in texts]
    range_uv = parameters.get("range_uv")
    quality = assess(
        signal,
        parameters["mains_hz"],
        None if range_uv is None else (float(range_uv[0]), float(range_uv[1])),
        accept_other_mains="accept_other_mains" in parameters
        or any(_takes_out(band, parameters["mains_hz"]) for band in recorder),
    )
    measures = {
        channel: {
            **_measures(quality, index),
            **_steps(frame, channel, quality.channels[index]),
            **_recorder(recorder[index], parameters),
        }
        for index, channel in enumerate(signal.channels)
    }
    return _frame(signal, quality, measures)


def _takes_out(band: RecorderBand, mains_hz: float) -> bool:
    """Tell whether the recorder has a notch at the mains: then nothing need be seen of it."""
    return any(abs(notch_hz - mains_hz) <= 1 for notch_hz in band.notch_hz)


def _measures(quality: Quality, index: int) -> dict[str, float | None]:
    channel, gaps = quality.channels[index], quality.gaps
    lines = channel.mains
    line = lines.fundamental if lines is not None else None
    return {
        "clipped_share": channel.clipped_share,
        "clipped_longest_s": channel.clipped_longest_s,
        "flat_share": channel.flat_share,
        "flat_longest_s": channel.flat_longest_s,
        "missing_share": gaps.missing_share,
        "gap_count": gaps.count,
        "longest_gap_s": gaps.longest_s,
        "peak_to_peak_uv": channel.peak_to_peak_uv,
        "rms_uv": channel.rms_uv,
        "typical_peak_to_peak_uv": channel.typical_peak_to_peak_uv,
        "typical_rms_uv": channel.typical_rms_uv,
        "identical_channels": len(channel.identical),
        "mains_db": None if line is None else line.level_db,
        "mains_rms_uv": None if lines is None or line is None else lines.rms_uv,
        "mains_frequency_hz": channel.mains_frequency_hz,
    }


def _steps(frame: Frame, channel: str, quality: ChannelQuality) -> dict[str, float | None]:
    """Return the step by the file's scaling, where it holds integers, and as it is seen in the samples."""
    lsb_uv = None
    if "gain_uv" in frame.facts and frame.numbers(channel).dtype.kind == "i":
        lsb_uv = abs(frame.facts["gain_uv"][frame.facts["channels"].index(channel)])
    return {"lsb_uv": lsb_uv, "smallest_step_uv": quality.smallest_step_uv}


def _recorder(header: RecorderBand, declared: Mapping[str, Any]) -> dict[str, float | None]:
    highpass_hz, lowpass_hz = strictest(header, declared.get("highpass_hz"), declared.get("lowpass_hz"))
    return {
        "recorder_highpass_hz": highpass_hz,
        "recorder_lowpass_hz": lowpass_hz,
        "prefilter_unclear": len(header.unclear) or None,
    }


def _frame(signal: Signal, quality: Quality, measures: Mapping[str, Mapping[str, float | None]]) -> Frame:
    spectrum = quality.spectrum or Spectrum(np.empty(0), np.empty((len(signal.channels), 0)))
    densities = zip(signal.channels, spectrum.density, strict=True)
    found = list(zip(signal.channels, quality.channels, strict=True))
    facts = {
        "rate_hz": str(signal.rate_hz),
        "channels": list(signal.channels),
        "measures": {
            channel: {name: value for name, value in measured.items() if value is not None}
            for channel, measured in measures.items()
        },
        "identical": {
            channel: [signal.channels[other] for other in one.identical]
            for channel, one in found
            if one.identical
        },
        "stretches": {
            channel: {"clipped": _places(one.clipped, signal), "flat": _places(one.flat, signal)}
            for channel, one in found
        },
    }
    columns = {f"{DENSITY}/{channel}": density for channel, density in densities}
    return Frame({"frequency_hz": spectrum.frequencies_hz, **columns}, facts)


def _places(stretches: Stretches, signal: Signal) -> dict[str, Any]:
    """Return the number of stretches, and when the longest start and stop, in the order of time.

    Times are seconds from the start of the file, gaps included.
    """
    rate_hz = float(signal.rate_hz)
    kept = np.sort(np.argsort(-stretches.n_samples, kind="stable")[:MOST_STRETCHES])
    first, stop = stretches.first[kept], stretches.stop[kept]
    run_first = np.array([run.first for run in signal.runs])
    run_start_s = np.array([float(run.start_s) for run in signal.runs])
    run = np.searchsorted(run_first, first, side="right") - 1
    return {
        "count": len(stretches.first),
        "start_s": (run_start_s[run] + (first - run_first[run]) / rate_hz).tolist(),
        "stop_s": (run_start_s[run] + (stop - run_first[run]) / rate_hz).tolist(),
    }


@dataclass(frozen=True, slots=True)
class _Measured:
    """One value that may be judged.

    Attributes
    ----------
    measure : str
        Its name, which is also that of its limit.
    value : float
    band : str or None
        The band it is of; None for a channel as a whole.
    about : str
        Which features a failure concerns.
    detail : str
        Put in brackets behind the failure.
    """

    measure: str
    value: float
    band: str | None = None
    about: str = "channel"
    detail: str = ""

    @property
    def name(self) -> str:
        """Measure and band, as the results write them."""
        return f"{self.measure}/{self.band}" if self.band else self.measure


def verdict_node(
    parameters: Mapping[str, Any], parents: Mapping[str, Frame], keys: Mapping[str, str]
) -> Frame:
    """Hold every measured quality against the study's limits: one row a recording, channel and measure."""
    rows = [
        {
            "recording": role.removeprefix("quality/"),
            "signal": parameters["signal"],
            "channel": channel,
            "measure": one.name,
            "value": one.value,
            "unit": UNITS[one.measure],
            "node": keys[role],
            "about": one.about,
            "band": one.band,
            **_judge(one, parameters["limits"].get(one.measure)),
        }
        for role, frame in parents.items()
        for channel in frame.facts["channels"]
        for one in _all_measured(frame, channel, parameters)
    ]
    return rows_to_frame(rows, JUDGED_COLUMNS)


def _judge(one: _Measured, limit: float | list[float] | None) -> dict[str, Any]:
    """Return the limit that counts, whether it is kept, and the failure in words.

    Of two limits that one counts which is broken, else that which is nearer by ratio.
    """
    if limit is None:
        return {"limit": None, "passed": None, "told": None}
    side = _SIDES.get(one.measure, "most")
    if isinstance(limit, list):
        low, high = limit
        side = (
            "least"
            if one.value < low or (one.value <= high and one.value * one.value < low * high)
            else "most"
        )
        limit = low if side == "least" else high
    if one.value >= limit if side == "least" else one.value <= limit:
        return {"limit": limit, "passed": "yes", "told": None}
    told = f"{one.name} {one.value:.3g} is {'below' if side == 'least' else 'above'} {limit:g}"
    return {"limit": limit, "passed": "no", "told": f"{told} ({one.detail})" if one.detail else told}


def _all_measured(frame: Frame, channel: str, parameters: Mapping[str, Any]) -> Iterator[_Measured]:
    """Yield what the quality node holds of a channel, then what follows for the bands that the study asks for."""
    held = frame.facts["measures"][channel]
    others = frame.facts["identical"].get(channel, [])
    for name, value in held.items():
        detail = f"the same samples as {', '.join(others)}" if name == "identical_channels" and others else ""
        yield _Measured(name, value, detail=detail)
    rate_hz = float(Fraction(frame.facts["rate_hz"]))
    used_hz = min(rate_hz, parameters.get("resample_hz", rate_hz))
    spectrum = Spectrum(frame.numbers("frequency_hz"), frame.numbers(f"{DENSITY}/{channel}"))
    for band, low_hz, high_hz in parameters["bands_hz"]:
        upper_hz = min(used_hz / 2, rate_hz / 2 if high_hz is None else high_hz)
        if low_hz < upper_hz:
            about = "channel" if parameters["kind"] != "eeg" else "band" if band else "whole range"
            # A range without an upper end takes what the recorder gives, as one from 0 Hz does.
            edges = held.get("recorder_highpass_hz"), held.get("recorder_lowpass_hz") if high_hz else None
            band_of = (band or None, low_hz, upper_hz, about)
            yield from _margins(band_of, held, spectrum, rate_hz)
            yield from _beyond_recorder(band_of, edges)
    if parameters["kind"] == "ecg":
        floor_ms = rmssd_floor_ms(used_hz)
        detail = f"times of peaks on its grid alone add {floor_ms:.3g} ms to rmssd, in quadrature"
        yield _Measured("beats_rate_hz", used_hz, about="intervals", detail=detail)
        yield _Measured("rmssd_floor_ms", floor_ms, about="intervals")


def _margins(
    band: tuple[str | None, float, float, str], held: Mapping[str, float], spectrum: Spectrum, rate_hz: float
) -> Iterator[_Measured]:
    """Yield how far a band lies above the noise of the recorder's steps."""
    name, low_hz, high_hz, about = band
    # A channel that never moves has no step of its own: it is flat, and has no margin to speak of.
    seen_uv = held.get("smallest_step_uv")
    if seen_uv is None or not spectrum.density.size:
        return
    step_uv = max(held.get("lsb_uv", 0.0), seen_uv)
    margin = margin_db(spectrum, low_hz, high_hz, step_uv, rate_hz)
    if margin is not None:
        detail = f"steps of {step_uv:.3g} uV leave {noise_density(step_uv, rate_hz):.3g} uV^2/Hz"
        yield _Measured("quantisation_margin_db", margin, name, about, detail)


def _beyond_recorder(
    band: tuple[str | None, float, float, str], edges_hz: tuple[float | None, float | None]
) -> Iterator[_Measured]:
    """Yield how much of a band the recorder has not passed."""
    name, low_hz, high_hz, about = band
    if edges_hz == (None, None):
        return
    loss = loss_db(low_hz, high_hz, *edges_hz)
    upper = "no limit" if edges_hz[1] is None else f"{edges_hz[1]:.3g} Hz"
    detail = f"the recorder passes {edges_hz[0] or 0:.3g} Hz to {upper}: a loss of {loss:.2g} dB or more"
    yield _Measured("beyond_recorder_share", share_beyond(low_hz, high_hz, *edges_hz), name, about, detail)
    yield _Measured("recorder_loss_db", loss, name, about)
