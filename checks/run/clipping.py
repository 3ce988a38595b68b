"""Clipping: an amplifier or converter that ran out of range draws the same flat top, or bottom, beat after beat.

Quantised plateaus are flat in health too, so a rail needs three signs: a stretch at the channel's extreme of at least 12 ms and three
samples, reached by a jump of several quanta instead of a rounded approach, in three beats or more. How much is lost there is told by how
steeply the signal went in and came out and how long it stayed: a parabola with those slopes rises by half of what their tangents do
(derived). A lost top of pressure takes its own height off the peak, two thirds of it off stroke work and, once it lasts to end-systole,
that point; dP/dt is touched only where the rail lies below the steepest part. A lost bottom reaches what is read in diastole. Volume has
its end-diastolic values at the top and its end-systolic ones at the bottom.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import END_DIASTOLE, END_SYSTOLE, PEAK, STEEPEST, VOLUME_BOTTOM, VOLUME_TOP, WORK
from checks.subject import RunSubject
from metrics.arrays import FloatArray, IntArray, smallest_step

LEAST_FLAT_S = 0.012
LEAST_FLAT_SAMPLES = 3
LEAST_BEATS = 3
JUMP_QUANTA = 3.0
SLOPE_S = 0.008
BRIDGED_S = 0.008
"""Noise takes single samples off the rail again."""

MOST_SAMPLES = 60_000
"""The converter's step is looked for in so many samples."""


def flat_tops(samples: FloatArray, sampling_rate_hz: float) -> tuple[IntArray, IntArray]:
    """Return the first sample of every stretch at the channel's largest value that was reached by a jump, and the one after its last.

    >>> wave = np.minimum(np.sin(np.arange(400) / 8.0), 0.5)
    >>> [edge.size for edge in flat_tops(wave, 250.0)]
    [8, 8]
    """
    nothing = np.empty(0, dtype=np.int64)
    top = float(np.fmax.reduce(samples)) if samples.size else float("nan")
    at = np.flatnonzero(samples == top)
    least = max(LEAST_FLAT_SAMPLES, int(np.ceil(LEAST_FLAT_S * sampling_rate_hz)))
    if at.size < least:
        return nothing, nothing
    breaks = np.flatnonzero(np.diff(at) > max(1, round(BRIDGED_S * sampling_rate_hz)))
    first, stop = at[np.concatenate([[0], breaks + 1])], at[np.concatenate([breaks, [at.size - 1]])] + 1
    long = (stop - first >= least) & (first > 0)
    first, stop = first[long], stop[long]
    if first.size == 0:
        return nothing, nothing
    # a converter of more than 1,000 levels rounds finer than noise; below that the approach itself is coarse
    quantum = smallest_step(samples[max(0, first[0] - MOST_SAMPLES // 2) : first[0] + MOST_SAMPLES // 2])
    jumped = top - samples[first - 1] > JUMP_QUANTA * max(quantum, 1e-9 * abs(top))
    return first[jumped], stop[jumped]


def lost(samples: FloatArray, first: IntArray, stop: IntArray, sampling_rate_hz: float) -> FloatArray:
    """Return by how much the signal would have risen above each stretch at least, as shares of its whole reach; shape of ``first``.

    Half the height at which the slopes before and behind it meet: a rounded top lies between that and the meeting point (here 0.10).

    >>> wave = 100.0 * np.sin(np.arange(1000) / 40.0)
    >>> lost(np.minimum(wave, 80.0), *flat_tops(np.minimum(wave, 80.0), 250.0), 250.0).round(2).tolist()[:2]
    [0.06, 0.06]
    """
    if first.size == 0:
        return np.empty(0)
    top, step = float(samples[first[0]]), max(1, round(SLOPE_S * sampling_rate_hz))
    before, behind = np.maximum(first - step, 0), np.minimum(stop - 1 + step, samples.size - 1)
    rise = (top - samples[before]) / np.maximum(first - before, 1)
    fall = (top - samples[behind]) / np.maximum(behind - stop + 1, 1)
    both = rise + fall
    height = 0.5 * (stop - first) * rise * fall / np.where(both > 0.0, both, np.inf)
    return np.asarray(np.nan_to_num(height / (top - float(np.fmin.reduce(samples)) + height)))


def loss(subject: RunSubject, name: str, *, low: bool = False) -> Measured:
    """Return what beats lose at the top (or bottom) of a channel, as a share of its reach, and when that begins; shape ().

    The mean of those that touch the rail: in an occlusion these are the fullest, and they decide the slope. 0 where fewer than three do.
    """
    channel, signals = subject.channel(name), subject.known_signals()
    samples = -channel.samples if low else channel.samples
    first, stop = flat_tops(samples, channel.sampling_rate_hz)
    owner = subject.beat_of_sample(signals.recorded_at[name][first])
    inside = owner >= 0
    first, stop, owner = first[inside], stop[inside], owner[inside]
    touched = np.unique(owner)
    if touched.size < LEAST_BEATS:
        return single(0.0)
    of_beat = np.zeros(len(subject.known_beats()))
    np.maximum.at(of_beat, owner, lost(samples, first, stop, channel.sampling_rate_hz))
    return single(float(of_beat[touched].mean()), float(signals.recorded_at[name][first[0]]) / signals.sampling_rate_hz)


def top_of_pressure(subject: RunSubject) -> Measured:
    """Return the share of pressure's reach that is lost at its top, shape ()."""
    return loss(subject, "pressure")


def bottom_of_pressure(subject: RunSubject) -> Measured:
    """Return the share of pressure's reach that is lost at its bottom, shape ()."""
    return loss(subject, "pressure", low=True)


def top_of_volume(subject: RunSubject) -> Measured:
    """Return the share of volume's reach that is lost at its top, shape ()."""
    return loss(subject, "volume")


def bottom_of_volume(subject: RunSubject) -> Measured:
    """Return the share of volume's reach that is lost at its bottom, shape ()."""
    return loss(subject, "volume", low=True)


PRESSURE_REMEDY = "widen the pressure channel's range and record again"
VOLUME_REMEDY = "widen the volume channel's range and record again"

PRESSURE = Check(
    name="pressure-clipping",
    title="Pressure stays off the recorder's upper rail",
    level=Level.RUN,
    measure=top_of_pressure,
    unit="1",
    limits=Limits(suspect_above=0.0, fail_above=0.03, basis="peak pressure is lower by what is lost; 5 % of it matters"),
    reason="pressure is cut off flat at the recorder's limit, by about {value:.0%} of its reach (limit {limit:.0%})",
    remedy=PRESSURE_REMEDY,
    spoils=PEAK,
    revision=2,
)
PRESSURE_WORK = Check(
    name="pressure-clipping-work",
    title="Pressure's lost top is small against the loop",
    level=Level.RUN,
    measure=top_of_pressure,
    unit="1",
    limits=Limits(
        fail_above=0.055,
        basis="a parabola loses two thirds of its height: 7.5 % takes 5 % off stroke work (derived); noise hides some",
    ),
    reason="pressure is cut off flat at the recorder's limit, by about {value:.0%} of its reach (limit {limit:.0%})",
    remedy=PRESSURE_REMEDY,
    spoils=WORK,
)
PRESSURE_END_SYSTOLE = Check(
    name="pressure-clipping-end-systole",
    title="Pressure's lost top ends before systole does",
    level=Level.RUN,
    measure=top_of_pressure,
    unit="1",
    limits=Limits(fail_above=0.075, basis="end-systolic pressure is 85-95 % of the peak (from memory, and on simulated hearts)"),
    reason="pressure is cut off flat at the recorder's limit down to end-systole, by about {value:.0%} of its reach (limit {limit:.0%})",
    remedy=PRESSURE_REMEDY,
    spoils=END_SYSTOLE | {"V0"},
)
PRESSURE_SLOPE = Check(
    name="pressure-clipping-slope",
    title="Pressure's lost top leaves its slopes",
    level=Level.RUN,
    measure=top_of_pressure,
    unit="1",
    limits=Limits(fail_above=0.30, basis="dP/dt has its maximum at half to two thirds of the pulse (from memory)"),
    reason="pressure is cut off flat at the recorder's limit where it is steepest, by about {value:.0%} of its reach (limit {limit:.0%})",
    remedy=PRESSURE_REMEDY,
    spoils=STEEPEST,
)
PRESSURE_LOW = Check(
    name="pressure-clipping-low",
    title="Pressure stays off the recorder's lower rail",
    level=Level.RUN,
    measure=bottom_of_pressure,
    unit="1",
    limits=Limits(suspect_above=0.0, fail_above=0.005, basis="half a per cent of 100 mmHg is 5 % of a usual end-diastolic pressure"),
    reason="pressure is cut off flat at the recorder's lower limit, by about {value:.1%} of its reach (limit {limit:.1%})",
    remedy=PRESSURE_REMEDY,
    spoils=END_DIASTOLE | {"tau", "Pinf"},
)
VOLUME = Check(
    name="volume-clipping",
    title="Volume stays off the recorder's upper rail",
    level=Level.RUN,
    measure=top_of_volume,
    unit="1",
    limits=Limits(suspect_above=0.0, fail_above=0.04, basis="stroke volume is smaller by what is lost; 5 % of it matters"),
    reason="volume is cut off flat at the recorder's limit, by about {value:.0%} of its reach (limit {limit:.0%})",
    remedy=VOLUME_REMEDY,
    spoils=VOLUME_TOP,
    revision=2,
)
VOLUME_LOW = Check(
    name="volume-clipping-low",
    title="Volume stays off the recorder's lower rail",
    level=Level.RUN,
    measure=bottom_of_volume,
    unit="1",
    limits=Limits(suspect_above=0.0, fail_above=0.04, basis="stroke volume is smaller by what is lost; 5 % of it matters"),
    reason="volume is cut off flat at the recorder's lower limit, by about {value:.0%} of its reach (limit {limit:.0%})",
    remedy=VOLUME_REMEDY,
    spoils=VOLUME_BOTTOM,
)
