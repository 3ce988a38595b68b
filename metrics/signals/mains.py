"""The mains in a channel: a narrow line at 50 or 60 Hz that stands out from the frequencies beside it.

A recorder slower than twice the mains shows the line elsewhere, at its alias; where that falls among the heart's own frequencies nothing
can be said. The line is measured in stretches of 2 s, at most 8 of them, spread over the run; the median stretch counts.
"""

from __future__ import annotations

import functools
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from metrics.arrays import FloatArray, span
from metrics.signals.filters import slope_per_s, steadied, zero_phase

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


@dataclass(frozen=True, slots=True)
class Mains:
    """Amplitudes of the mains as shares of what the channel moves by, the larger of both kinds; NaN where nothing can be told.

    ``left`` after the common filter, ``at_landmarks`` where a landmark reads the steadied channel, ``slope`` per second. ``recorded``
    holds, for each frequency shown, the share as recorded and what the filter passes of it.
    """

    left: float
    at_landmarks: float
    slope: float
    recorded: tuple[tuple[float, float], ...]


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
def passed(hz: float, sampling_rate_hz: float, chamber: str) -> tuple[float, float, float]:
    """Return what the common filter leaves of a sine of amplitude 1, what `steadied` leaves then, and its slope's amplitude per second."""
    smooth = zero_phase(np.sin(2.0 * np.pi * hz * np.arange(round(2.0 * sampling_rate_hz)) / sampling_rate_hz), sampling_rate_hz)
    middle = slice(smooth.size // 4, -(smooth.size // 4))
    ways = (smooth, steadied(smooth, sampling_rate_hz), slope_per_s(smooth, sampling_rate_hz, chamber))
    left, at_landmarks, slope = (float(np.abs(one[middle]).max()) for one in ways)
    return left, at_landmarks, slope


def mains(samples: FloatArray, sampling_rate_hz: float, chamber: str) -> Mains:
    """Return how much of the mains a channel holds, as recorded and where it is read."""
    pieces, reach = stretches(samples, sampling_rate_hz), span(samples)
    amounts, recorded = [], []
    for mains_hz in MAINS_HZ:
        hz = shown_at_hz(mains_hz, sampling_rate_hz)
        amplitude = line_amplitude(pieces, sampling_rate_hz, hz) / reach
        if np.isfinite(amplitude):
            ways = passed(hz, sampling_rate_hz, chamber) if amplitude > 0.0 else (0.0, 0.0, 0.0)
            amounts.append([amplitude * way for way in ways])
            recorded.append((amplitude, ways[0]))
    if not amounts:
        return Mains(float("nan"), float("nan"), float("nan"), ())
    left, at_landmarks, slope = np.max(amounts, axis=0).tolist()
    return Mains(left, at_landmarks, slope, tuple(recorded))
