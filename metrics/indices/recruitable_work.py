"""Preload-recruitable stroke work: the slope of stroke work on end-diastolic volume, SW = Mw * (EDV - Vw).

Glower 1985, Circulation 71:994 (from memory). Independent of volume gain and offset (derived), so it survives faults Ees does not.

Stroke work need not follow load in a straight line. In every simulated heart, whose arteries resist and store, it bends: its slope at the
largest loads is nearly twice that at the smallest, so the line over a 30 % fall of EDV is 10 to 15 % steeper than over a 50 % fall, and Vw,
where the line meets the axis, moves with it (computed). A slope is that of its own window, and its interval speaks of no other. Beside it
stands the slope of a parabola at one load, a quarter of the stroke volume below the largest EDV: there it stays within 2 % whatever the
fall (computed on simulated hearts without noise). Compare stages by it where their occlusions did not reach equally deep.
"""

from __future__ import annotations

import numpy as np
from scipy import stats

from metrics.indices.card import Estimate, Index, RunBeats, Source, StageBeats, powers
from metrics.indices.slopes import intercept_estimate, pooled_lines, slope_estimate
from metrics.indices.volumes import placed
from metrics.signals.landmarks import landmark_noise_ml
from metrics.stats.bends import least_squares_curve, parabola
from metrics.stats.lines import Line, unattenuated_line

NEAR_REST = 0.25
"""How far below the largest load the parabola's slope is taken, in stroke volumes; house default."""

_NEEDS = "at least 5 accepted beats in the usable window of a preload-reduction run, and a slope that can be told from zero"


def recruitable_work_line(run: RunBeats) -> Line:
    """Return the line of stroke work on end-diastolic volume over the chosen beats; raises ValueError when they carry none.

    End-diastole comes before the beat's own force, so what scatters work beyond noise (curvature, force) is no error of the load.
    """
    return unattenuated_line(run.column("edv_ml"), run.column("sw_mmhg_ml"), landmark_noise_ml(run.signals) ** 2)


def recruitable_work(stage: StageBeats) -> Estimate:
    """Return the slope Mw, mmHg (mmHg mL per mL); raises `Withheld` when no run carries a line."""
    return slope_estimate(pooled_lines(stage, recruitable_work_line))


def work_intercept(stage: StageBeats) -> Estimate:
    """Return Vw, where the lines meet the volume axis, mL; raises `Withheld` when no run carries a line."""
    return intercept_estimate(pooled_lines(stage, recruitable_work_line))


def tangent_near_rest(run: RunBeats) -> Line:
    """Return the tangent to a run's parabola of stroke work on EDV at a quarter of the stroke volume below its largest EDV.

    Raises ValueError when its beats carry none.
    """
    edv_ml, work_mmhg_ml = run.column("edv_ml"), run.column("sw_mmhg_ml")
    fullest = int(np.argmax(edv_ml))
    at_ml = edv_ml[fullest] - NEAR_REST * run.column("sv_ml")[fullest]
    curve = least_squares_curve(edv_ml - at_ml, work_mmhg_ml, parabola)
    constant, slope = float(curve.coefficients[0]), float(curve.coefficients[1])
    half = curve.half_width(np.array([0.0, 1.0, 0.0]))
    meets_ml = float(at_ml - constant / slope)
    error = half / float(stats.t.ppf(0.975, curve.points - 2))
    unbounded = float("inf")
    return Line(slope, meets_ml, slope - half, slope + half, -unbounded, unbounded, error, (half / slope) ** 2, curve.points)


def recruitable_work_near_rest(stage: StageBeats) -> Estimate:
    """Return the parabolas' slope near the resting load, mmHg; raises `Withheld` when no run carries one."""
    return slope_estimate(pooled_lines(stage, tangent_near_rest))


RECRUITABLE_WORK = Index(
    name="PRSW",
    title="Preload-recruitable stroke work",
    unit="mm[Hg]",
    estimator="multi-beat:unattenuated",
    source=Source.PRELOAD,
    compute=recruitable_work,
    needs=_NEEDS,
    sensitivity=powers(pressure_gain=1.0),
)
RECRUITABLE_WORK_NEAR_REST = Index(
    name="PRSW",
    title="Slope of stroke work on end-diastolic volume near the resting load",
    unit="mm[Hg]",
    estimator="multi-beat:quadratic-near-rest",
    source=Source.PRELOAD,
    compute=recruitable_work_near_rest,
    needs="at least 6 accepted beats in the usable window of a preload-reduction run, and a slope that can be told from zero",
    sensitivity=powers(pressure_gain=1.0),
    primary=False,
)
WORK_INTERCEPT = Index(
    name="Vw",
    title="Volume-axis intercept of stroke work on end-diastolic volume",
    unit="mL",
    estimator="multi-beat:unattenuated",
    source=Source.PRELOAD,
    compute=work_intercept,
    needs=_NEEDS,
    sensitivity=placed,
)
