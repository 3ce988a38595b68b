"""Wiring: pressure and volume are what their names say, the right way up.

A ventricle that does work on the blood runs through its loop counter-clockwise; that is the definition of external work. A loop that
runs the other way has pressure and volume exchanged, or one of them upside down. Which of these it is, the electrogram tells: after the
R wave pressure rises. Where it rises, volume is upside down; where the volume channel rises instead, the two are exchanged; where
pressure falls, it is upside down. Without R waves only a pressure that is mostly below zero is surely upside down.

The direction needs no beats: it is the work over the run as a share of what it would be if no part of it ran backwards. Simulated hearts
in all conditions have 0.92 and more, with one channel 60 ms late still 0.85 (computed), white noise alone has 0.
"""

from __future__ import annotations

from enum import Enum

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import EVERYTHING, VOLUME_SHAPE
from checks.subject import RunSubject
from metrics.arrays import FloatArray, IntArray, span
from metrics.signals.calibrate import Signals
from metrics.signals.r_waves import r_waves

LONGEST_S = 60.0
"""A wire is not exchanged within a run: its first minute shows it."""

BACKWARDS = -0.3
LEAST_R_WAVES = 5
R_HALF_S = 0.020
SYSTOLE = (0.15, 0.30)
"""The part of a cycle, from its R wave, in which every ventricle's pressure is high; house default."""

RISES = 0.25
"""How much of its span a pressure rises by from the R wave to that part, at least, or falls when upside down; house default."""


class Fault(Enum):
    """What is wrong with a run whose loops run backwards."""

    SWAPPED = "swapped"
    PRESSURE_INVERTED = "pressure inverted"
    VOLUME_INVERTED = "volume inverted"
    UNKNOWN = "unknown"


def loop_direction(pressure_mmhg: FloatArray, volume_ml: FloatArray) -> float:
    """Return the net work of a run over the sum of its parts' sizes: 1 all counter-clockwise, -1 all clockwise; NaN where nothing moves.

    >>> turn = np.linspace(0.0, 20.0 * np.pi, 2000)
    >>> round(loop_direction(np.sin(turn), np.cos(turn)), 3), round(loop_direction(np.cos(turn), np.sin(turn)), 3)
    (1.0, -1.0)
    """
    if pressure_mmhg.size < 2:
        return float("nan")
    middle = 0.5 * (pressure_mmhg[1:] + pressure_mmhg[:-1]) - float(np.mean(pressure_mmhg))
    work = -middle * np.diff(volume_ml)
    whole = float(np.sum(np.abs(work)))
    return float(np.sum(work)) / whole if whole > 0.0 else float("nan")


def rise_after_r(samples: FloatArray, r_at: IntArray, sampling_rate_hz: float) -> float:
    """Return by how much of its span a channel rises from the R wave to systole, the median over cycles; NaN without enough R waves."""
    half, reach = max(1, round(R_HALF_S * sampling_rate_hz)), span(samples)
    r_at, cycle = r_at[:-1], np.diff(r_at)
    inside = (r_at >= half) & (cycle > 4 * half)
    r_at, cycle = r_at[inside], cycle[inside]
    if r_at.size < LEAST_R_WAVES - 1 or not np.isfinite(reach):
        return float("nan")
    summed = np.concatenate([[0.0], np.cumsum(samples)])
    first, stop = (r_at + (share * cycle).astype(np.int64) for share in SYSTOLE)
    at_r = (summed[r_at + half] - summed[r_at - half]) / (2 * half)
    return float(np.median((summed[stop] - summed[first]) / (stop - first) - at_r)) / reach


def wiring(signals: Signals) -> tuple[float, Fault | None]:
    """Return the loops' direction, and what is wrong where they run backwards."""
    length = min(signals.pressure_mmhg.size, round(LONGEST_S * signals.sampling_rate_hz))
    pressure, volume = signals.pressure_mmhg[:length], signals.volume_ml[:length]
    direction = loop_direction(pressure, volume)
    if not direction < 0.0:
        return direction, None
    r_at = np.empty(0, dtype=np.int64) if signals.ecg_mv is None else r_waves(signals.ecg_mv[:length], signals.sampling_rate_hz)
    pressure_rise, volume_rise = (rise_after_r(samples, r_at, signals.sampling_rate_hz) for samples in (pressure, volume))
    if pressure_rise > RISES:
        return direction, Fault.VOLUME_INVERTED
    if volume_rise > RISES:
        return direction, Fault.SWAPPED
    if pressure_rise < -RISES or float(np.sum(np.percentile(pressure, (2.0, 98.0)))) < 0.0:
        return direction, Fault.PRESSURE_INVERTED
    return direction, Fault.UNKNOWN


def direction_if(subject: RunSubject, fault: Fault) -> Measured:
    """Return the loops' direction, shape (); NaN where they run backwards for another reason than ``fault``."""
    direction, found = wiring(subject.known_signals())
    return single(direction if found in {None, fault} else np.nan)


def direction_if_swapped(subject: RunSubject) -> Measured:
    """Return which way loops run, 1 to -1, shape (); NaN where that is backwards and not for exchanged channels."""
    return direction_if(subject, Fault.SWAPPED)


def direction_if_pressure(subject: RunSubject) -> Measured:
    """Return which way loops run, 1 to -1, shape (); NaN where that is backwards and not for pressure upside down."""
    return direction_if(subject, Fault.PRESSURE_INVERTED)


def direction_if_volume(subject: RunSubject) -> Measured:
    """Return which way loops run, 1 to -1, shape (); NaN where that is backwards and not for volume upside down."""
    return direction_if(subject, Fault.VOLUME_INVERTED)


def direction_if_unknown(subject: RunSubject) -> Measured:
    """Return which way loops run, 1 to -1, shape (); NaN where that is backwards and it is known why."""
    return direction_if(subject, Fault.UNKNOWN)


_LIMITS = Limits(fail_below=BACKWARDS, basis="external work is counter-clockwise by definition; white noise alone gives 0 (computed)")

SWAPPED = Check(
    name="swapped-channels",
    title="Pressure and volume are not exchanged",
    level=Level.RUN,
    measure=direction_if_swapped,
    unit="1",
    limits=_LIMITS,
    reason="loops run clockwise ({value:.2f}, limit {limit:g}) and volume rises after the R wave as pressure should: the two are exchanged",
    remedy="name the columns of pressure and volume the other way round and send the package again",
    spoils=EVERYTHING,
)
PRESSURE_INVERTED = Check(
    name="pressure-inverted",
    title="Pressure is the right way up",
    level=Level.RUN,
    measure=direction_if_pressure,
    unit="1",
    limits=_LIMITS,
    reason="loops run clockwise ({value:.2f}, limit {limit:g}) and pressure falls when the ventricle contracts: pressure is upside down",
    remedy="check the polarity of the pressure channel and export the run again",
    spoils=EVERYTHING,
)
VOLUME_INVERTED = Check(
    name="volume-inverted",
    title="Volume is the right way up",
    level=Level.RUN,
    measure=direction_if_volume,
    unit="1",
    limits=_LIMITS,
    reason="loops run clockwise ({value:.2f}, limit {limit:g}) while pressure rises after the R wave: volume is upside down",
    remedy="check the polarity of the volume channel and export the run again",
    spoils=VOLUME_SHAPE,
)
DIRECTION = Check(
    name="loop-direction",
    title="Loops run counter-clockwise",
    level=Level.RUN,
    measure=direction_if_unknown,
    unit="1",
    limits=_LIMITS,
    reason="loops run clockwise ({value:.2f}, limit {limit:g}): two channels are exchanged or one is upside down, no R wave tells which",
    remedy="check the columns and the polarity of pressure and volume, and send the electrogram with them",
    spoils=EVERYTHING,
)
