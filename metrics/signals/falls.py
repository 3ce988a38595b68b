"""The fall of pressure in each beat, from its steepest on, and the time constant of each fall by four published curves.

Where the fall begins and ends, and whose curves these are, stands with the indices in `metrics.indices.relaxation`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from metrics.arrays import BoolArray, FloatArray, IntArray, spans, taken
from metrics.signals.beats import Beats
from metrics.signals.calibrate import Signals
from metrics.stats.curves import exponential, least_squares_curves, logistic

Words = NDArray[np.object_]

RELAXED_ABOVE_EDP_MMHG = 5.0
FEWEST_SAMPLES, SHORTEST_S, LONGEST_S = 5, 0.020, 0.300
"""The first two are customary (from memory); a fall that lasts longer than the third is no relaxation; house default."""

MOST_MISFIT_SHARE = 0.05
"""Largest root of the mean squared misfit, as a share of the fall: sound falls leave up to 0.015 (computed); house default."""

LONGEST_TAU_SHARE = 4.0
"""A fall seen for less than a quarter of its time constant cannot be told from a straight line; house default."""

TOO_SHORT = f"the fall lasts less than {1e3 * SHORTEST_S:.0f} ms or {FEWEST_SAMPLES} samples"
TOO_LONG = f"pressure takes longer than {1e3 * LONGEST_S:.0f} ms to come near the next end-diastolic pressure"
MISSING = "samples are missing in the fall"
MISFIT = f"the curve misses the fall by more than {100.0 * MOST_MISFIT_SHARE:.0f} % of it"
STRAIGHT = "the fall cannot be told from a straight line"
NOT_POSITIVE = "pressure is not above 0 throughout the fall"
NO_HALF = "pressure does not fall to half before the ventricle fills"


@dataclass(frozen=True, slots=True)
class Falls:
    """The relaxation of every beat, a row each, from dP/dt minimum on.

    ``time_s``, ``pressure_mmhg`` and ``inside`` have shape (n_beats, longest); outside a fall, time and pressure are 0. ``trouble``,
    shape (n_beats,), says of each beat that has no usable fall why, else nothing; its row is then empty.
    """

    time_s: FloatArray
    pressure_mmhg: FloatArray
    inside: BoolArray
    trouble: Words

    @property
    def drop_mmhg(self) -> FloatArray:
        """Return how far pressure falls in each row, shape (n_beats,)."""
        last = np.maximum(self.inside.sum(axis=1) - 1, 0)
        drop: FloatArray = self.pressure_mmhg[:, 0] - self.pressure_mmhg[np.arange(last.size), last]
        return drop

    @property
    def duration_s(self) -> FloatArray:
        """Return how long each fall lasts, shape (n_beats,)."""
        return np.asarray(self.time_s.max(axis=1, initial=0.0), dtype=np.float64)


@dataclass(frozen=True, slots=True)
class TimeConstants:
    """One time constant a beat, shape (n_beats,), in seconds: NaN without one, infinite where the fall is as good as straight.

    ``trouble`` says why; ``asymptote_mmhg`` is NaN or minus infinity with it. ``misfit_mmhg`` is the root of the mean squared misfit.
    ``per_mmhg`` is by how many seconds the time constant moves with 1 mmHg added to pressure.
    """

    tau_s: FloatArray
    asymptote_mmhg: FloatArray
    misfit_mmhg: FloatArray
    per_mmhg: FloatArray
    trouble: Words


def falls(signals: Signals, beats: Beats) -> Falls:
    """Return the relaxation of every beat of a run."""
    first, rate = beats.dpdt_min_at, signals.sampling_rate_hz
    begin = np.where(first >= 0, first, beats.end)
    longest = round(LONGEST_S * rate) + 1
    stop = _relaxed_at(signals.pressure_mmhg, begin, np.minimum(beats.end, begin + longest + 1), beats.end)
    trouble = np.full(len(beats), "", dtype=object)
    missing = np.concatenate([[0], np.cumsum(signals.missing)])
    trouble[missing[stop] - missing[np.minimum(begin, stop)] > 0] = MISSING
    trouble[stop - begin > longest] = TOO_LONG
    trouble[stop - begin < max(FEWEST_SAMPLES, round(SHORTEST_S * rate) + 1)] = TOO_SHORT
    length = np.where(trouble == "", stop - begin, 0)
    place = np.arange(int(length.max(initial=1)))
    inside = place < length[:, None]
    at = np.where(inside, begin[:, None] + place, 0)
    pressure = signals.pressure_mmhg[at] if signals.pressure_mmhg.size else np.zeros(at.shape)
    return Falls(np.where(inside, place / rate, 0.0), np.where(inside, pressure, 0.0), inside, trouble)


def _relaxed_at(pressure_mmhg: FloatArray, begin: IntArray, latest: IntArray, end: IntArray) -> IntArray:
    """Return the first sample of each span below the pressure at the beat's ``end`` plus 5 mmHg, ``latest`` without one."""
    positions, owner = spans(begin, latest)
    below = pressure_mmhg[positions] < (taken(pressure_mmhg, end) + RELAXED_ABOVE_EDP_MMHG)[owner]
    stop = latest.copy()
    np.minimum.at(stop, owner[below], positions[below])
    return stop


def raff_glantz(falling: Falls) -> TimeConstants:
    """Return time constants and asymptotes of exponentials whose asymptote is free."""
    drop, duration = _safe(falling.drop_mmhg), _safe(falling.duration_s)
    # an asymptote 30 % of the drop below its end, and the slope such a curve begins with
    bend = -np.log(1.3 / 0.3) / duration
    start = np.column_stack([falling.pressure_mmhg[:, 0], 1.3 * drop * bend, bend])
    fits = least_squares_curves(exponential, falling.time_s, falling.pressure_mmhg, start, falling.inside)
    height, slope, rate = fits.parameters.T
    with np.errstate(divide="ignore", invalid="ignore"):
        return _judged(falling, -1.0 / rate, height - slope / rate, _misfit(fits.squares_left, falling), np.zeros(rate.size))


def weiss(falling: Falls) -> TimeConstants:
    """Return time constants of exponentials towards 0, by the straight line of ln P on t."""
    positive = np.asarray((~falling.inside | (falling.pressure_mmhg > 0.0)).all(axis=1), dtype=bool)
    inside = falling.inside & positive[:, None]
    count = np.maximum(inside.sum(axis=1), 1)
    pressure = np.where(inside, falling.pressure_mmhg, 1.0)
    height = np.log(pressure)
    centred = np.where(inside, falling.time_s - (falling.time_s.sum(axis=1) / count)[:, None], 0.0)
    with np.errstate(divide="ignore", invalid="ignore"):
        weight = centred / np.sum(centred**2, axis=1, keepdims=True)
        slope = np.sum(weight * height, axis=1)
        middle = np.sum(height, axis=1) / count
        left = np.where(inside, falling.pressure_mmhg - np.exp(middle[:, None] + slope[:, None] * centred), 0.0)
        per_mmhg = np.sum(weight / pressure, axis=1) / slope**2
        found = _judged(falling, -1.0 / slope, np.zeros(slope.size), _misfit(np.sum(left**2, axis=1), falling), per_mmhg)
    return _without(found, ~positive, NOT_POSITIVE)


def matsubara(falling: Falls) -> TimeConstants:
    """Return time constants of logistic curves and what these fall towards."""
    drop, duration = _safe(falling.drop_mmhg), _safe(falling.duration_s)
    start = np.column_stack([2.6 * drop, 2.0 / duration, falling.pressure_mmhg[:, 0] - 1.3 * drop])
    fits = least_squares_curves(logistic, falling.time_s, falling.pressure_mmhg, start, falling.inside)
    rate, floor = fits.parameters[:, 1], fits.parameters[:, 2]
    with np.errstate(divide="ignore", invalid="ignore"):
        return _judged(falling, 1.0 / rate, floor, _misfit(fits.squares_left, falling), np.zeros(rate.size))


def half_time(falling: Falls) -> TimeConstants:
    """Return the time in which pressure falls to half, by a straight line between samples, over ln 2."""
    half = 0.5 * falling.pressure_mmhg[:, 0]
    under = falling.inside & (falling.pressure_mmhg <= half[:, None])
    found = under.any(axis=1) & (half > 0.0)
    after = np.where(found, under.argmax(axis=1), 1)
    rows = np.arange(after.size)
    if falling.pressure_mmhg.shape[1] < FEWEST_SAMPLES:
        return _nothing(falling)
    before_mmhg, after_mmhg = falling.pressure_mmhg[rows, after - 1], falling.pressure_mmhg[rows, after]
    step_s = falling.time_s[rows, after] - falling.time_s[rows, after - 1]
    with np.errstate(divide="ignore", invalid="ignore"):
        slope = (after_mmhg - before_mmhg) / step_s
        tau_s = (falling.time_s[rows, after - 1] + (half - before_mmhg) / slope) / np.log(2.0)
        per_mmhg = -0.5 / slope / np.log(2.0)
        constants = TimeConstants(tau_s, np.zeros(rows.size), np.zeros(rows.size), per_mmhg, falling.trouble.copy())
    return _without(constants, ~found, NO_HALF)


def _safe(values: FloatArray) -> FloatArray:
    return np.where(values > 0.0, values, 1.0)


def _misfit(squares: FloatArray, falling: Falls) -> FloatArray:
    misfit: FloatArray = np.sqrt(squares / np.maximum(falling.inside.sum(axis=1), 1))
    return misfit


def _judged(falling: Falls, tau_s: FloatArray, asymptote_mmhg: FloatArray, misfit_mmhg: FloatArray, per_mmhg: FloatArray) -> TimeConstants:
    """Return the time constants without those whose curve misses the fall; one as good as straight is infinite."""
    trouble = falling.trouble.copy()
    usable = trouble == ""
    straight = usable & ~((tau_s > 0.0) & (tau_s <= LONGEST_TAU_SHARE * falling.duration_s))
    missed = usable & ~straight & ~(misfit_mmhg <= MOST_MISFIT_SHARE * falling.drop_mmhg)
    trouble[straight], trouble[missed] = STRAIGHT, MISFIT
    sound = usable & ~straight & ~missed
    return TimeConstants(
        np.where(straight, np.inf, np.where(sound, tau_s, np.nan)),
        np.where(straight, -np.inf, np.where(sound, asymptote_mmhg, np.nan)),
        np.where(usable, misfit_mmhg, np.nan),
        np.where(sound, per_mmhg, np.nan),
        trouble,
    )


def _without(constants: TimeConstants, lost: BoolArray, why: str) -> TimeConstants:
    """Return the time constants without those of the ``lost`` beats; a beat without a usable fall keeps that trouble."""
    trouble = constants.trouble.copy()
    unusable: BoolArray = np.isin(trouble, [TOO_SHORT, TOO_LONG, MISSING])
    trouble[lost & ~unusable] = why
    bare = lost | unusable
    return TimeConstants(
        np.where(bare, np.nan, constants.tau_s),
        np.where(bare, np.nan, constants.asymptote_mmhg),
        np.where(bare, np.nan, constants.misfit_mmhg),
        np.where(bare, np.nan, constants.per_mmhg),
        trouble,
    )


def _nothing(falling: Falls) -> TimeConstants:
    empty = np.full(falling.trouble.size, np.nan)
    return TimeConstants(empty, empty, empty, empty, falling.trouble)


def tau_ms(signals: Signals, beats: Beats) -> FloatArray:
    """Return every beat's time constant after Raff and Glantz, shape (n_beats,), in ms; NaN where there is none."""
    tau_s = raff_glantz(falls(signals, beats)).tau_s
    return np.where(np.isfinite(tau_s), 1e3 * tau_s, np.nan)
