"""Hum: the mains in a channel, as a narrow line at 50 or 60 Hz that stands out from the frequencies beside it.

What matters is how much of it passes the common low-pass (half of 50 Hz, a third of 60 Hz). A line of amplitude A raises whatever is
read at an extreme by up to A, and steers instants that are found by a threshold: end-diastole above all. The loop's area and the heart
rate average over it. A recorder slower than twice the mains shows the line elsewhere, at its alias; where that falls among the heart's
own frequencies nothing can be said.

The line is measured in stretches of 2 s, at most 8 of them, spread over the run; the median stretch counts.
"""

from __future__ import annotations

import functools

import numpy as np
from numpy.typing import NDArray

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import END_DIASTOLE, PRESSURE_EXTREMES, STEEPEST, VOLUME_SHAPE
from checks.subject import RunSubject
from metrics.arrays import FloatArray, span
from metrics.signals.filters import slope_per_s, zero_phase
from metrics.signals.recording import Channel

ComplexArray = NDArray[np.complex128]

MAINS_HZ = (50.0, 60.0)
STRETCH_S = 2.0
MOST_STRETCHES = 8
NEIGHBOURS_HZ = np.array([-5.0, -4.0, -3.0, -2.0, 2.0, 3.0, 4.0, 5.0])
LINE_HZ = np.array([-0.25, 0.0, 0.25])
"""Mains keep their frequency within a fifth of a hertz; common practice, no source."""

STANDS_OUT = 4.0
"""A line counts from so many times its neighbours' amplitude: white noise reaches that once in 10,000 (Rayleigh); house default."""

SLOWEST_HZ = 20.0
"""Below that a ventricle has frequencies of its own; house default."""


def shown_at_hz(mains_hz: float, sampling_rate_hz: float) -> float:
    """Return where a recorder of that rate shows the mains; NaN where it cannot be told from the heart or from the rate itself.

    >>> shown_at_hz(50.0, 250.0), shown_at_hz(60.0, 100.0), shown_at_hz(50.0, 100.0)
    (50.0, 40.0, nan)
    """
    alias = abs(mains_hz - sampling_rate_hz * round(mains_hz / sampling_rate_hz))
    return alias if SLOWEST_HZ <= alias <= 0.5 * sampling_rate_hz - 6.0 else float("nan")


def stretches(samples: FloatArray, sampling_rate_hz: float) -> FloatArray:
    """Return stretches of 2 s without a missing sample, evenly spread over the run; shape (n, length)."""
    length = round(STRETCH_S * sampling_rate_hz)
    count = samples.size // length if length else 0
    pieces = samples[: count * length].reshape(count, length) if count else np.empty((0, max(length, 1)))
    # three times as many as wanted, so that some may hold a gap; the others are not even looked at
    pieces = pieces[:: max(1, pieces.shape[0] // (3 * MOST_STRETCHES))]
    pieces = pieces[np.isfinite(pieces).all(axis=1)]
    return pieces[:: max(1, -(-pieces.shape[0] // MOST_STRETCHES))]


@functools.lru_cache(maxsize=16)
def turning(length: int, sampling_rate_hz: float, hz: float) -> ComplexArray:
    """Return what takes the amplitudes at ``hz`` and beside it out of a stretch: the line's columns first, shape (length, n)."""
    window = np.hanning(length)
    at_hz = hz + np.concatenate([LINE_HZ, NEIGHBOURS_HZ])
    turned = np.exp(-2j * np.pi * np.outer(np.arange(length) / sampling_rate_hz, at_hz)) * window[:, None]
    return np.asarray(turned * 2.0 / window.sum(), dtype=np.complex128)


def line_amplitude(pieces: FloatArray, sampling_rate_hz: float, hz: float) -> float:
    """Return the amplitude of a line at ``hz``, the median over stretches, in the samples' unit.

    0 where none stands out from its neighbours, NaN without a stretch.

    >>> time_s = np.arange(2000) / 250.0
    >>> wave = stretches(3.0 * np.sin(2.0 * np.pi * 50.0 * time_s) + 40.0 * np.sin(2.0 * np.pi * 1.3 * time_s), 250.0)
    >>> round(line_amplitude(wave, 250.0, 50.0), 2), round(line_amplitude(wave, 250.0, 60.0), 2)
    (3.0, 0.0)
    """
    if pieces.shape[0] == 0 or not np.isfinite(hz):
        return float("nan")
    found = np.abs((pieces - pieces.mean(axis=1, keepdims=True)) @ turning(pieces.shape[1], sampling_rate_hz, hz))
    line = found[:, : LINE_HZ.size].max(axis=1)
    beside = np.sqrt(np.mean(found[:, LINE_HZ.size :] ** 2, axis=1))
    return float(np.median(np.where(line > STANDS_OUT * beside, line, 0.0)))


@functools.lru_cache(maxsize=16)
def passed(hz: float, sampling_rate_hz: float, chamber: str) -> tuple[float, float]:
    """Return what the common filter leaves of a sine of amplitude 1, and the amplitude of its slope per second."""
    smooth = zero_phase(np.sin(2.0 * np.pi * hz * np.arange(round(2.0 * sampling_rate_hz)) / sampling_rate_hz), sampling_rate_hz)
    middle = slice(smooth.size // 4, -(smooth.size // 4))
    return float(np.abs(smooth[middle]).max()), float(np.abs(slope_per_s(smooth, sampling_rate_hz, chamber)[middle]).max())


def hum(channel: Channel, chamber: str) -> tuple[float, float]:
    """Return how much hum is left in a filtered channel, and in its slope per second, as shares of the channel's span."""
    rate_hz, pieces = channel.sampling_rate_hz, stretches(channel.samples, channel.sampling_rate_hz)
    left, steep = [], []
    for mains_hz in MAINS_HZ:
        hz = shown_at_hz(mains_hz, rate_hz)
        if np.isfinite(hz) and pieces.shape[0]:
            amplitude = line_amplitude(pieces, rate_hz, hz)
            through, slope = passed(hz, rate_hz, chamber) if amplitude > 0.0 else (0.0, 0.0)
            left.append(amplitude * through)
            steep.append(amplitude * slope)
    if not left:
        return float("nan"), float("nan")
    reach = span(channel.samples)
    return max(left) / reach, max(steep) / reach


def pressure_hum(subject: RunSubject) -> Measured:
    """Return the amplitude of the mains in the filtered pressure over what pressure moves by, shape ()."""
    return single(hum(subject.channel("pressure"), subject.facts.chamber)[0])


def dpdt_hum(subject: RunSubject) -> Measured:
    """Return the amplitude of the mains in dP/dt over its median maximum, shape ()."""
    steep = hum(subject.channel("pressure"), subject.facts.chamber)[1]
    reach_mmhg, most = span(subject.known_signals().pressure_mmhg), subject.known_beats().dpdt_max_mmhg_per_s
    return single(steep * reach_mmhg / abs(float(np.nanmedian(most))) if np.isfinite(most).any() else np.nan)


def volume_hum(subject: RunSubject) -> Measured:
    """Return the amplitude of the mains in the filtered volume over what volume moves by, shape ()."""
    return single(hum(subject.channel("volume"), subject.facts.chamber)[0])


DIASTOLE = Check(
    name="edp-hum",
    title="End-diastole is free of the mains",
    level=Level.RUN,
    measure=pressure_hum,
    unit="1",
    limits=Limits(
        suspect_above=0.01,
        fail_above=0.02,
        basis="end-diastole is found by a threshold of dP/dt, so its pressure moves by the amplitude: 2 % of the pulse is a quarter of EDP",
    ),
    reason="mains hum of {value:.1%} of the pulse is left in the filtered pressure and steers end-diastole (limit {limit:.1%})",
    remedy="look for a missing earth or a heating mat; keep the transducer's cable away from mains",
    spoils=END_DIASTOLE,
)
PRESSURE = Check(
    name="pressure-hum",
    title="Pressure is free of the mains",
    level=Level.RUN,
    measure=pressure_hum,
    unit="1",
    limits=Limits(
        suspect_above=0.02, fail_above=0.05, basis="a pressure read at an extreme moves by up to the amplitude; 5 % of the pulse matters"
    ),
    reason="mains hum of {value:.1%} of the pulse is left in the filtered pressure (limit {limit:.1%})",
    remedy="look for a missing earth or a heating mat; keep the transducer's cable away from mains",
    spoils=PRESSURE_EXTREMES,
)
SLOPE = Check(
    name="dpdt-hum",
    title="Slope of pressure free of the mains",
    level=Level.RUN,
    measure=dpdt_hum,
    unit="1",
    limits=Limits(suspect_above=0.025, fail_above=0.05, basis="dP/dt maximum moves by up to the amplitude; 5 % of it matters"),
    reason="mains hum has an amplitude of {value:.1%} of dP/dt maximum (limit {limit:.1%})",
    remedy="look for a missing earth or a heating mat; keep the transducer's cable away from mains",
    spoils=STEEPEST,
)
VOLUME = Check(
    name="volume-hum",
    title="Volume is free of the mains",
    level=Level.RUN,
    measure=volume_hum,
    unit="1",
    limits=Limits(suspect_above=0.02, fail_above=0.05, basis="a volume read at an extreme moves by up to the amplitude; 5 % of it matters"),
    reason="mains hum of {value:.1%} of what volume moves by is left in the filtered volume (limit {limit:.1%})",
    remedy="look for a missing earth; check the conductance unit's shielding",
    spoils=VOLUME_SHAPE,
)
