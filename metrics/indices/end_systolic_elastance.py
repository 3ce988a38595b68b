"""End-systolic elastance and its volume-axis intercept: ESP = Ees * (V - V0).

Suga and Sagawa 1974, Circ Res 35:117 (from memory), end-systole iterated with V0 (Kono 1984), a line with noise in both axes. A
negative V0 follows from a curved relation (Kass 1989, Circulation 79:167, read in abstract) and is never a reason to withhold; where
the points do bend, V0's reason says so.
"""

from __future__ import annotations

from dataclasses import replace

from metrics.indices.card import Estimate, Index, RunBeats, Sensitivity, Source, StageBeats, powers
from metrics.indices.end_systolic_curve import curvature_note
from metrics.indices.slopes import intercept_estimate, pooled_lines, slope_estimate
from metrics.stats.lines import Line

ESTIMATOR = "multi-beat:two-axis-iterated"
NEEDS = "at least 5 accepted beats in the usable window of a preload-reduction run, and a slope that can be told from zero"


def end_systolic_line_of(run: RunBeats) -> Line:
    """Return the run's end-systolic line; raises ValueError when its beats carry none."""
    return run.end_systolic_line.line


def end_systolic_elastance(stage: StageBeats) -> Estimate:
    """Return Ees, mmHg/mL; raises `Withheld` when no run carries a line."""
    return slope_estimate(pooled_lines(stage, end_systolic_line_of))


def volume_intercept(stage: StageBeats) -> Estimate:
    """Return V0, mL; raises `Withheld` when no run carries a line."""
    found = intercept_estimate(pooled_lines(stage, end_systolic_line_of))
    return replace(found, notes=(*found.notes, *curvature_note(stage)))


def _intercept_sensitivity(stage: StageBeats, value: float) -> Sensitivity:
    return Sensitivity(pressure_mmhg=-1.0 / end_systolic_elastance(stage).value, volume_gain=value, volume_ml=1.0)


END_SYSTOLIC_ELASTANCE = Index(
    name="Ees",
    title="End-systolic elastance",
    unit="mm[Hg]/mL",
    estimator=ESTIMATOR,
    source=Source.PRELOAD,
    compute=end_systolic_elastance,
    needs=NEEDS,
    sensitivity=powers(pressure_gain=1.0, volume_gain=-1.0),
)
VOLUME_INTERCEPT = Index(
    name="V0",
    title="Volume-axis intercept of the end-systolic line",
    unit="mL",
    estimator=ESTIMATOR,
    source=Source.PRELOAD,
    compute=volume_intercept,
    needs=NEEDS,
    sensitivity=_intercept_sensitivity,
)
