"""Ees, V0 and PRSW by ordinary least squares, as many papers have them: beside the lines that know of noise in the load, never primary.

Least squares takes the load for exact. Where its noise is not small beside the occlusion's span, it draws the slope down and V0 to the
left: by 7-9 % in small hearts (computed). End-systole is iterated with the V0 of this line (Kono 1984, Circulation 70:1057, from memory).
A slope near that of the primary estimator says that noise in the load does not matter.
"""

from __future__ import annotations

from metrics.indices.card import Estimate, Index, RunBeats, Sensitivity, Source, StageBeats, powers
from metrics.indices.end_systole import end_systolic_line
from metrics.indices.slopes import intercept_estimate, pooled_lines, slope_estimate
from metrics.stats.lines import Line, least_squares_fit, least_squares_line

ESTIMATOR = "multi-beat:least-squares"
_NEEDS = "at least 5 accepted beats in the usable window of a preload-reduction run, and a slope that can be told from zero"


def least_squares_end_systole(run: RunBeats) -> Line:
    """Return the run's iterated end-systolic line of least squares; raises ValueError when its beats carry none."""
    return end_systolic_line(run.signals, run.beats, run.chosen, least_squares_fit()).line


def least_squares_elastance(stage: StageBeats) -> Estimate:
    """Return Ees, mmHg/mL; raises `Withheld` when no run carries a line."""
    return slope_estimate(pooled_lines(stage, _end_systole_once))


def least_squares_intercept(stage: StageBeats) -> Estimate:
    """Return V0, mL; raises `Withheld` when no run carries a line."""
    return intercept_estimate(pooled_lines(stage, _end_systole_once))


def least_squares_work(stage: StageBeats) -> Estimate:
    """Return the slope of stroke work on end-diastolic volume, mmHg; raises `Withheld` when no run carries a line."""
    return slope_estimate(pooled_lines(stage, lambda run: least_squares_line(run.column("edv_ml"), run.column("sw_mmhg_ml"))))


def _end_systole_once(run: RunBeats) -> Line:
    return run.once(least_squares_end_systole)


def _intercept_sensitivity(stage: StageBeats, value: float) -> Sensitivity:
    return Sensitivity(pressure_mmhg=-1.0 / least_squares_elastance(stage).value, volume_gain=value, volume_ml=1.0)


LEAST_SQUARES_ELASTANCE = Index(
    name="Ees",
    title="End-systolic elastance by least squares",
    unit="mm[Hg]/mL",
    estimator=ESTIMATOR,
    source=Source.PRELOAD,
    compute=least_squares_elastance,
    needs=_NEEDS,
    sensitivity=powers(pressure_gain=1.0, volume_gain=-1.0),
    primary=False,
)
LEAST_SQUARES_INTERCEPT = Index(
    name="V0",
    title="Volume-axis intercept of the end-systolic line by least squares",
    unit="mL",
    estimator=ESTIMATOR,
    source=Source.PRELOAD,
    compute=least_squares_intercept,
    needs=_NEEDS,
    sensitivity=_intercept_sensitivity,
    primary=False,
)
LEAST_SQUARES_WORK = Index(
    name="PRSW",
    title="Preload-recruitable stroke work by least squares",
    unit="mm[Hg]",
    estimator=ESTIMATOR,
    source=Source.PRELOAD,
    compute=least_squares_work,
    needs=_NEEDS,
    sensitivity=powers(pressure_gain=1.0),
    primary=False,
)
