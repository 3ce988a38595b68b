"""End-systolic relations that bend: a parabola or a logarithm through end-systolic points, and whether they fit better than the line.

Kass 1989, Circulation 79:167 (read in abstract): ``P = a (V - V0')^2 + b (V - V0')`` with a < 0 where contractility is high; from
``P = c2 V^2 + c1 V + c0`` V0' is the root on the rising branch, a = c2, b = 2 c2 V0' + c1 (derived). Noda 1993, Am J Physiol 265:H910
(from memory): ``P = a + b ln V``. End-systole is iterated with the curve's own V0 as the line's is with the line's. Only pressure is
taken to be noisy: noise in volume flattens a curve a little, as it would a line of least squares.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import stats

from metrics.arrays import FloatArray
from metrics.indices.card import RunBeats, StageBeats
from metrics.indices.end_systole import MOST_STEPS, TOLERANCE_ML
from metrics.stats.bends import Curve, least_squares_curve, logarithm, parabola, straight
from metrics.stats.lines import Line

DECISIVE = 4.0
"""By how much AICc must fall before one form is preferred to another; house default."""

LEAST_CHANGE = 0.1
"""A slope that changes by less than this share of itself over the data is straight for all that V0 is used for; house default."""


@dataclass(frozen=True, slots=True)
class Relation:
    """A curved end-systolic relation: its curve about ``centre_ml``, its form's name, and the points it goes through."""

    form: str
    curve: Curve
    centre_ml: float
    volume_ml: FloatArray
    pressure_mmhg: FloatArray

    def reading(self, pressure_mmhg: float) -> Line:
        """Return the relation at a pressure: its slope there with its interval, and where it meets the volume axis with that interval.

        Raises ValueError where the curve never has that pressure, or never meets the axis.
        """
        slope, _, by_slope, _ = self._read(pressure_mmhg)
        _, v0_ml, _, by_v0 = self._read(0.0)
        half, v0_half = self.curve.half_width(by_slope), self.curve.half_width(by_v0)
        low, high = v0_ml - v0_half, v0_ml + v0_half
        if self.form == "logarithmic":  # in ln V the interval is even
            low, high = v0_ml * float(np.exp(-v0_half / v0_ml)), v0_ml * float(np.exp(v0_half / v0_ml))
        points = self.curve.points
        error = half / float(stats.t.ppf(0.975, points - 2))
        return Line(slope, v0_ml, slope - half, slope + half, low, high, error, (half / slope) ** 2, points)

    def _read(self, pressure_mmhg: float) -> tuple[float, float, FloatArray, FloatArray]:
        """Return slope and volume at a pressure, mmHg/mL and mL, and the derivatives of both by the curve's coefficients."""
        return (_on_parabola if self.form == "quadratic" else _on_logarithm)(self.curve.coefficients, self.centre_ml, pressure_mmhg)

    @property
    def v0_ml(self) -> float:
        """Return where the relation meets the volume axis; raises ValueError where it does not."""
        return self._read(0.0)[1]


def _on_parabola(coefficients: FloatArray, centre_ml: float, pressure_mmhg: float) -> tuple[float, float, FloatArray, FloatArray]:
    constant, linear, square = coefficients
    inner = linear**2 - 4.0 * square * (constant - pressure_mmhg)
    if inner <= 0.0 or linear + np.sqrt(inner) <= 0.0:
        message = f"the parabola does not rise through {pressure_mmhg:g} mmHg"
        raise ValueError(message)
    slope = float(np.sqrt(inner))
    away_ml = -2.0 * (constant - pressure_mmhg) / (linear + slope)
    by_slope = np.array([-2.0 * square, linear, -2.0 * (constant - pressure_mmhg)]) / slope
    return slope, float(centre_ml + away_ml), by_slope, -np.array([1.0, away_ml, away_ml**2]) / slope


def _on_logarithm(coefficients: FloatArray, centre_ml: float, pressure_mmhg: float) -> tuple[float, float, FloatArray, FloatArray]:
    constant, factor = coefficients
    if factor <= 0.0:
        message = "the logarithm does not rise"
        raise ValueError(message)
    folds = (pressure_mmhg - constant) / factor
    volume_ml = float(centre_ml * np.exp(folds))
    return float(factor / volume_ml), volume_ml, np.array([1.0, 1.0 + folds]) / volume_ml, -volume_ml / factor * np.array([1.0, folds])


def relation_through(volume_ml: FloatArray, pressure_mmhg: FloatArray, form: str) -> Relation:
    """Return the curve of a form, "quadratic" or "logarithmic", through end-systolic points of shape (n,).

    Raises ValueError with fewer than six points, without a spread of loads, or for a logarithm of volumes that are not positive.

    >>> v = np.array([20.0, 25.0, 30.0, 35.0, 40.0, 45.0])
    >>> relation = relation_through(v, -0.02 * (v - 10.0) ** 2 + 3.0 * (v - 10.0), "quadratic")
    >>> round(relation.v0_ml, 6), round(relation.reading(72.0).slope, 6)
    (10.0, 1.8)
    """
    centre_ml = float(volume_ml.mean()) if volume_ml.size else 0.0
    if form == "quadratic":
        return Relation(form, least_squares_curve(volume_ml - centre_ml, pressure_mmhg, parabola), centre_ml, volume_ml, pressure_mmhg)
    logarithm(volume_ml)
    return Relation(form, least_squares_curve(volume_ml / centre_ml, pressure_mmhg, logarithm), centre_ml, volume_ml, pressure_mmhg)


def _iterated(run: RunBeats, form: str) -> Relation:
    """Return the relation whose own V0 finds the points it goes through; raises ValueError when the beats carry none."""
    v0_ml = run.end_systolic_line.line.axis_intercept
    for step in range(MOST_STEPS):
        points = run.end_systole(v0_ml)
        usable = run.chosen & np.isfinite(points.esp_mmhg) & np.isfinite(points.volume_ml)
        relation = relation_through(points.volume_ml[usable], points.esp_mmhg[usable], form)
        moved = relation.v0_ml - v0_ml
        if abs(moved) < TOLERANCE_ML:
            break
        v0_ml += moved if step == 0 else 0.5 * moved  # half steps end a swing between neighbouring samples
    return relation


def quadratic(run: RunBeats) -> Relation:
    """Return the run's parabola; raises ValueError when its beats carry none."""
    return _iterated(run, "quadratic")


def logarithmic(run: RunBeats) -> Relation:
    """Return the run's logarithm; raises ValueError when its beats carry none."""
    return _iterated(run, "logarithmic")


@dataclass(frozen=True, slots=True)
class Preference:
    """By how much a form's AICc is smaller than the line's through the line's own points, and its change of slope as a share."""

    form: str
    gain: float
    change: float

    @property
    def is_decisive(self) -> bool:
        """Return whether the curve is preferred and bends by as much as matters."""
        return self.gain > DECISIVE and abs(self.change) > LEAST_CHANGE


def preferences(run: RunBeats) -> tuple[Preference, ...]:
    """Return what AICc says of each form against the line; nothing where the run carries no line or has too few points."""
    found = []
    try:
        volume_ml, pressure_mmhg = run.end_systolic_line.volume_ml, run.end_systolic_line.pressure_mmhg
        line = least_squares_curve(volume_ml - volume_ml.mean(), pressure_mmhg, straight)
        found.append(_preference(line, relation_through(volume_ml, pressure_mmhg, "quadratic")))
        found.append(_preference(line, relation_through(volume_ml, pressure_mmhg, "logarithmic")))
    except ValueError:
        pass
    return tuple(found)


def _preference(line: Curve, relation: Relation) -> Preference:
    span_ml = float(np.ptp(relation.volume_ml))
    if relation.form == "quadratic":
        change = 2.0 * relation.curve.coefficients[2] * span_ml / line.coefficients[1]
    else:
        change = -relation.curve.coefficients[1] * span_ml / relation.volume_ml.min() / relation.volume_ml.max() / line.coefficients[1]
    return Preference(relation.form, line.criterion - relation.curve.criterion, float(change))


def curvature_note(stage: StageBeats) -> tuple[str, ...]:
    """Return what a reader of a line's V0 must know: for each run whose end-systolic points bend, that they do."""
    notes = []
    for run in stage.preload:
        curved = [preference for preference in run.once(preferences) if preference.is_decisive]
        if curved:
            best = max(curved, key=lambda preference: preference.gain)
            notes.append(
                f"the end-systolic relation of run {run.run} is curved ({best.form}, AICc smaller by {best.gain:.1f}, slope changing by "
                f"{abs(best.change):.0%}): where a straight line meets the volume axis means little"
            )
    return tuple(notes)
