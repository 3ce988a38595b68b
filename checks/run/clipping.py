"""Clipping: an amplifier or converter that ran out of range draws the same flat top beat after beat.

Quantised plateaus are flat in health too, so a rail needs three signs: a stretch at the channel's extreme of at least 12 ms and three
samples, reached by a jump of several quanta instead of a rounded approach, in three beats or more.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import PRESSURE_SHAPE, VOLUME_SHAPE
from checks.subject import RunSubject
from metrics.arrays import FloatArray, IntArray, smallest_step

LEAST_FLAT_S = 0.012
LEAST_FLAT_SAMPLES = 3
JUMP_QUANTA = 3.0


def flat_tops(samples: FloatArray, sampling_rate_hz: float) -> IntArray:
    """Return the first sample of every stretch at the channel's largest value that was reached by a jump.

    >>> wave = np.minimum(np.sin(np.arange(400) / 8.0), 0.5)
    >>> flat_tops(wave, 250.0).size
    8
    """
    finite = samples[np.isfinite(samples)]
    if finite.size < LEAST_FLAT_SAMPLES:
        return np.empty(0, dtype=np.int64)
    top = finite.max()
    at_top = np.concatenate([[False], samples == top, [False]])
    edges = np.flatnonzero(np.diff(at_top.astype(np.int8)))
    first, stop = edges[::2], edges[1::2]
    least = max(LEAST_FLAT_SAMPLES, int(np.ceil(LEAST_FLAT_S * sampling_rate_hz)))
    arrival = top - samples[np.maximum(first - 1, 0)]
    # a converter of more than 1,000 levels rounds finer than noise; below that the approach itself is coarse
    jumped = arrival > JUMP_QUANTA * max(smallest_step(samples), 1e-9 * abs(top))
    railed: IntArray = first[(stop - first >= least) & (first > 0) & jumped]
    return railed


def clipped_beats(subject: RunSubject, name: str) -> Measured:
    """Return how many beats touch a rail of the named channel (0 when fewer than three do), and when the first does; shape ()."""
    channel, signals = subject.channel(name), subject.known_signals()
    most, at_s = 0, np.nan
    for samples in (channel.samples, -channel.samples):
        grid = signals.recorded_at[name][flat_tops(samples, channel.sampling_rate_hz)]
        owner = subject.beat_of_sample(grid)
        touched = np.unique(owner[owner >= 0]).size
        if touched > most:
            most, at_s = touched, float(grid[owner >= 0][0]) / signals.sampling_rate_hz
    return single(most, at_s)


def clipped_pressure(subject: RunSubject) -> Measured:
    """Return how many beats touch a rail of the pressure channel, and when the first does; shape ()."""
    return clipped_beats(subject, "pressure")


def clipped_volume(subject: RunSubject) -> Measured:
    """Return how many beats touch a rail of the volume channel, and when the first does; shape ()."""
    return clipped_beats(subject, "volume")


_LIMITS = Limits(fail_above=2.0, basis="three beats or more, after simulated quantised hearts")

PRESSURE = Check(
    name="pressure-clipping",
    title="Pressure stays off the recorder's rails",
    level=Level.RUN,
    measure=clipped_pressure,
    unit="1",
    limits=_LIMITS,
    reason="pressure is cut off flat at the recorder's limit in {value:.0f} beats",
    remedy="widen the pressure channel's range and record again",
    spoils=PRESSURE_SHAPE,
)
VOLUME = Check(
    name="volume-clipping",
    title="Volume stays off the recorder's rails",
    level=Level.RUN,
    measure=clipped_volume,
    unit="1",
    limits=_LIMITS,
    reason="volume is cut off flat at the recorder's limit in {value:.0f} beats",
    remedy="widen the volume channel's range and record again",
    spoils=VOLUME_SHAPE,
)
