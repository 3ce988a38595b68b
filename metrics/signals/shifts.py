"""What moved in the sensors while the heart stayed what it was: steps and drifts of pressure and volume inside one run.

A change of load moves a beat along the heart's own two relations, end-systolic and end-diastolic; a sensor that moves carries every
later point off both. With p the shift of pressure and v that of volume, a point leaves the end-systolic line by v - p / Ees along the
volume axis and the end-diastolic curve by p - k v along the pressure axis, k its slope: two equations for p and v. Contractility that
changes moves the first relation only, what presses on the heart from outside the second. Derived here. Both relations come from the
run's own beats by ordinary least squares, each regressed on the quantity that is the surer: end-systolic pressure and end-diastolic
volume. The errors are widened by the residuals' lag-1 correlation (Zieba 2010, Metrol Meas Syst 17:3, from memory).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy.special import stdtrit

from metrics.arrays import BoolArray, FloatArray, IntArray
from metrics.stats.partial import Off, Relation, off_relation, relation

LEAST_BEATS = 8
BEATS_ASIDE = 20
"""How many beats on each side of an instant a step is looked for in: enough for a breath, few enough for a slow change; house default."""

LEAST_ASIDE = 4
MOST_PLACES = 150
"""Beyond so many beats a step is looked for at every n-th: it is then placed to a few beats of the twenty on each side; house default."""

STILL = 2.0
"""A pressure is taken not to have changed where its change is below this many standard errors; customary."""

FALSE_ALARMS = 0.0003
"""How often a sound run may show a shift of any size; divided by the number of instants tried. House default."""

ADVANTAGE = 0.7
"""A step is told from a drift where it leaves less than this share of the misfit the drift leaves; house default."""


@dataclass(frozen=True, slots=True)
class LoadPoints:
    """End-diastolic and end-systolic points of chosen beats of one run, all of one shape; ``time_s`` is when each beat begins."""

    time_s: FloatArray
    edv_ml: FloatArray
    edp_mmhg: FloatArray
    esv_ml: FloatArray
    esp_mmhg: FloatArray

    def at(self, place: IntArray) -> LoadPoints:
        """Return the points at these positions, arrays of the shape of ``place``."""
        return LoadPoints(self.time_s[place], self.edv_ml[place], self.edp_mmhg[place], self.esv_ml[place], self.esp_mmhg[place])


@dataclass(frozen=True, slots=True)
class Shifts:
    """By how much pressure and volume moved for one unit of each form tried; arrays of shape (n_forms,).

    ``pressure_se_mmhg`` and ``volume_se_ml`` are standard errors with ``freedom`` degrees of freedom. ``misfit`` is what the form
    leaves unexplained of both relations, as the product of the shares: the smallest belongs to the form that fits best. NaN where the
    beats do not tell.
    """

    pressure_mmhg: FloatArray
    pressure_se_mmhg: FloatArray
    volume_ml: FloatArray
    volume_se_ml: FloatArray
    freedom: FloatArray
    misfit: FloatArray


def shifts(beside: LoadPoints, forms: Sequence[FloatArray], weight: FloatArray, *, bent: bool) -> list[Shifts]:
    """Return the shift of each form of change, shape (n_forms,), for several such forms.

    All arrays of ``beside`` have shape (n_forms, n_beside): the beats each form looks at; a form says how far the change has come at
    each, ``weight`` is 1, or 0 for a place that holds no beat. ``bent`` lets both relations bend, as an occlusion's wide range needs.
    """
    by_pressure, by_volume, alone = (relation(x, weight, bent=bent) for x in (beside.esp_mmhg, beside.edv_ml, None))
    return [_shifts(beside, form, by_pressure, by_volume, alone) for form in forms]


def _shifts(beside: LoadPoints, form: FloatArray, by_pressure: Relation, by_volume: Relation, alone: Relation) -> Shifts:
    end_systolic = off_relation(beside.esv_ml, form, by_pressure)
    end_diastolic = off_relation(beside.edp_mmhg, form, by_volume)
    along, rise = end_systolic.slope, end_diastolic.slope
    with np.errstate(divide="ignore", invalid="ignore"):
        # v - along p = off_es and p - rise v = off_ed, ``along`` being 1 / Ees
        share = 1.0 / (1.0 - along * rise)
        pressure = share * (end_diastolic.off + rise * end_systolic.off)
        volume = share * (end_systolic.off + along * end_diastolic.off)
        pressure_se = np.abs(share) * np.hypot(end_diastolic.se, rise * end_systolic.se)
        volume_se = np.abs(share) * np.hypot(end_systolic.se, along * end_diastolic.se)
        # a relation that alone is left tells of the heart: pressure must carry beats off the end-diastolic one, volume off the other
        pressure, pressure_se = _lesser(pressure, end_diastolic.off), np.maximum(pressure_se, end_diastolic.se)
        volume, volume_se = _lesser(volume, end_systolic.off), np.maximum(volume_se, end_systolic.se)
    known = np.isfinite(pressure + volume + pressure_se + volume_se) & (along * rise < 1.0)
    misfit = end_systolic.left * end_diastolic.left
    known = known & np.isfinite(misfit)
    still, volume_still, volume_still_se = _filled_alike(beside, form, alone, end_systolic)
    surer = still & ~(volume_still_se >= volume_se)
    volume, volume_se = np.where(surer, volume_still, volume), np.where(surer, volume_still_se, volume_se)
    found = [np.where(known, value, np.nan) for value in (pressure, pressure_se, volume, volume_se, end_systolic.freedom, misfit)]
    return Shifts(*found)


def _lesser(one: FloatArray, other: FloatArray) -> FloatArray:
    """Return the smaller of two shifts that go the same way, 0 where they do not."""
    smaller = np.sign(one) * np.minimum(np.abs(one), np.abs(other))
    return np.where(np.isnan(one + other), np.nan, np.where(one * other > 0.0, smaller, 0.0))


def _filled_alike(beside: LoadPoints, form: FloatArray, alone: Relation, end_systolic: Off) -> tuple[BoolArray, FloatArray, FloatArray]:
    """Return where end-diastolic pressure does not change with the form, and the shift of volume and its error that follow there.

    An end-diastolic curve whose slope the beats do not show leaves volume open; but a heart filled to one pressure all along has one
    end-diastolic volume. What both volumes show together is the shift, the smaller of the two; nothing where they disagree.
    """
    pressure, volume = off_relation(beside.edp_mmhg, form, alone), off_relation(beside.edv_ml, form, alone)
    still: BoolArray = np.abs(pressure.off) < STILL * pressure.se
    end_systolic_ml = end_systolic.off + end_systolic.slope * pressure.off
    shift = _lesser(volume.off, end_systolic_ml)
    return still, shift, np.maximum(np.hypot(end_systolic.se, end_systolic.slope * pressure.se), volume.se)


def drift(points: LoadPoints, *, bent: bool) -> Shifts:
    """Return what moved evenly from the first to the last of the beats, shape (1,); NaN with fewer than eight."""
    if points.time_s.size < LEAST_BEATS:
        return _nothing()
    beside = points.at(np.arange(points.time_s.size)[None, :])
    return shifts(beside, [_evenly(beside.time_s)], np.ones(beside.time_s.shape), bent=bent)[0]


def steps(points: LoadPoints, *, bent: bool) -> tuple[IntArray, Shifts, Shifts]:
    """Return positions of beats, what moved at once before each of them, and what moved evenly over the same neighbours instead.

    All of shape (n_candidates,); NaN with fewer than eight beats.
    """
    count = points.time_s.size
    if count < LEAST_BEATS:
        return np.zeros(1, dtype=np.int64), _nothing(), _nothing()
    before = np.arange(LEAST_ASIDE, count - LEAST_ASIDE + 1, -(-count // MOST_PLACES))
    place = before[:, None] + np.arange(-min(BEATS_ASIDE, count), min(BEATS_ASIDE, count))
    weight = ((place >= 0) & (place < count)).astype(np.float64)
    beside = points.at(np.clip(place, 0, count - 1))
    at_once = (place >= before[:, None]).astype(np.float64)
    found, instead = shifts(beside, [at_once, _evenly(beside.time_s)], weight, bent=bent)
    return before, found, instead


def _evenly(time_s: FloatArray) -> FloatArray:
    first, last = time_s.min(axis=1, keepdims=True), time_s.max(axis=1, keepdims=True)
    return np.asarray((time_s - first) / (last - first), dtype=np.float64)


@dataclass(frozen=True, slots=True)
class Course:
    """What moved in the sensors during one run; 0 where nothing can be told from zero, NaN where the beats do not tell.

    Steps are those before the first beat at ``pressure_step_s`` and ``volume_step_s`` (NaN for none); drifts run from ``first_s`` to
    ``last_s``, the first and last beat looked at. A step or drift of less than ``*_open`` would not have been told.
    """

    pressure_step_mmhg: float
    pressure_step_s: float
    volume_step_ml: float
    volume_step_s: float
    pressure_drift_mmhg: float
    volume_drift_ml: float
    first_s: float
    last_s: float
    pressure_step_open_mmhg: float
    volume_step_open_ml: float
    pressure_drift_open_mmhg: float
    volume_drift_open_ml: float


def course(points: LoadPoints, *, bent: bool) -> Course:
    """Return what moved in the sensors while the points' beats were recorded: at once, or else evenly."""
    if points.time_s.size < LEAST_BEATS:
        return Course(*(float("nan") for _ in range(12)))
    before, at_once, evenly = steps(points, bent=bent)
    sharp = at_once.misfit < ADVANTAGE * evenly.misfit
    pressure_step, pressure_at = _sharpest(at_once.pressure_mmhg, at_once.pressure_se_mmhg, at_once, sharp)
    volume_step, volume_at = _sharpest(at_once.volume_ml, at_once.volume_se_ml, at_once, sharp)
    whole = drift(points, bent=bent)
    return Course(
        pressure_step_mmhg=pressure_step,
        pressure_step_s=float(points.time_s[before[pressure_at]]) if pressure_step else float("nan"),
        volume_step_ml=volume_step,
        volume_step_s=float(points.time_s[before[volume_at]]) if volume_step else float("nan"),
        pressure_drift_mmhg=0.0 if pressure_step else _told(whole.pressure_mmhg, whole.pressure_se_mmhg, whole.freedom),
        volume_drift_ml=0.0 if volume_step else _told(whole.volume_ml, whole.volume_se_ml, whole.freedom),
        first_s=float(points.time_s[0]),
        last_s=float(points.time_s[-1]),
        pressure_step_open_mmhg=_least_told(at_once.pressure_se_mmhg, at_once.freedom),
        volume_step_open_ml=_least_told(at_once.volume_se_ml, at_once.freedom),
        pressure_drift_open_mmhg=_least_told(whole.pressure_se_mmhg, whole.freedom),
        volume_drift_open_ml=_least_told(whole.volume_se_ml, whole.freedom),
    )


def _sharpest(shift: FloatArray, error: FloatArray, found: Shifts, sharp: BoolArray) -> tuple[float, int]:
    """Return the step that leaves least unexplained among those told from zero, and its place; 0 for none, NaN where none can be told."""
    if np.isnan(shift).all():
        return float("nan"), 0
    told = is_told_from_zero(shift, error, found.freedom) & sharp
    if not told.any():
        return 0.0, 0
    best = int(np.argmin(np.where(told, found.misfit, np.inf)))
    return float(shift[best]), best


def _told(shift: FloatArray, error: FloatArray, freedom: FloatArray) -> float:
    if np.isnan(shift[0]):
        return float("nan")
    return float(shift[0]) if is_told_from_zero(shift, error, freedom)[0] else 0.0


def is_told_from_zero(shift: FloatArray, error: FloatArray, freedom: FloatArray) -> BoolArray:
    """Return which shifts differ from zero beyond what `FALSE_ALARMS` allows for so many; shape of ``shift``."""
    told: BoolArray = np.isfinite(shift) & (np.abs(shift) > _most_errors(freedom) * error)
    return told


def _most_errors(freedom: FloatArray) -> FloatArray:
    """Return how many standard errors chance may reach; shape of ``freedom``."""
    return np.asarray(stdtrit(np.maximum(freedom, 1.0), 1.0 - 0.5 * FALSE_ALARMS / max(freedom.size, 1)), dtype=np.float64)


def _least_told(error: FloatArray, freedom: FloatArray) -> float:
    """Return the smallest shift that would surely be told at most of the places looked at, infinite where none would."""
    least = (_most_errors(freedom) + STILL) * error
    return float(np.median(np.where(np.isfinite(least), least, np.inf)))


def _nothing() -> Shifts:
    return Shifts(*(np.full(1, np.nan) for _ in range(6)))
