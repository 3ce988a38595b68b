"""Pressures read at landmarks: EDP at the upstroke, ESP at end-systole, Pmax, and the extremes of dP/dt.

End-systole is max P / (V - V0) with V0 of the stage's line, else max P/V (Kono 1984, Circulation 70:1057, from memory). Rules for EDP
differ by 1-4 mmHg (from memory), so the rule stands in the estimator's name. dP/dt depends on the filter (`metrics.signals.filters`).
"""

from __future__ import annotations

from metrics.indices.card import Estimate, Index, Sensitivity, Source, StageBeats, powers
from metrics.indices.steady import median_estimate, median_of

_STEADY = "the accepted beats of the stage's steady runs"


def end_systolic_pressure(stage: StageBeats) -> Estimate:
    """Return end-systolic pressure of the accepted steady beats, mmHg; raises `Withheld` with fewer than three."""
    return median_estimate(stage.steady_end_systole[0])


def read_from_zero(_stage: StageBeats, value: float) -> Sensitivity:
    """Return the sensitivity of a pressure: it scales with the gain and goes along with the zero."""
    return Sensitivity(pressure_gain=value, pressure_mmhg=1.0)


END_DIASTOLIC_PRESSURE = Index(
    name="EDP",
    title="End-diastolic pressure",
    unit="mm[Hg]",
    estimator="upstroke",
    source=Source.STEADY,
    compute=median_of("edp_mmhg"),
    needs=_STEADY,
    sensitivity=read_from_zero,
)
END_SYSTOLIC_PRESSURE = Index(
    name="ESP",
    title="End-systolic pressure",
    unit="mm[Hg]",
    estimator="max-elastance",
    source=Source.STEADY,
    compute=end_systolic_pressure,
    needs=f"{_STEADY}, and V0 of the stage's end-systolic line where there is one",
    sensitivity=read_from_zero,
)
PEAK_PRESSURE = Index(
    name="Pmax",
    title="Peak pressure",
    unit="mm[Hg]",
    estimator="largest",
    source=Source.STEADY,
    compute=median_of("pmax_mmhg"),
    needs=_STEADY,
    sensitivity=read_from_zero,
)
STEEPEST_RISE = Index(
    name="dPdt_max",
    title="Largest rate of pressure rise",
    unit="mm[Hg]/s",
    estimator="local-polynomial",
    source=Source.STEADY,
    compute=median_of("dpdt_max_mmhg_per_s"),
    needs=_STEADY,
    sensitivity=powers(pressure_gain=1.0),
)
STEEPEST_FALL = Index(
    name="dPdt_min",
    title="Largest rate of pressure fall",
    unit="mm[Hg]/s",
    estimator="local-polynomial",
    source=Source.STEADY,
    compute=median_of("dpdt_min_mmhg_per_s"),
    needs=_STEADY,
    sensitivity=powers(pressure_gain=1.0),
)
