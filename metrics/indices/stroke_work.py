"""Stroke work: the area of the pressure-volume loop, -closed integral of P dV.

The polygon sum of `metrics.signals.landmarks.loop_areas`; 1 mmHg mL = 1.33322e-4 J (computed). Beside it, never instead of it, stand
the boxes that are used where only pressures and volumes at end-diastole and end-systole are known: ESP x SV, and less crude
(ESP - EDP) x SV (common practice, no source). The first is 1.04 to 1.27 times the loop in sound left ventricles (computed on simulated
hearts), and says nothing in a right one, whose loop is a triangle.
"""

from __future__ import annotations

from metrics.indices.card import Estimate, Index, Sensitivity, Source, StageBeats, powers
from metrics.indices.steady import median_estimate, median_of


def box(stage: StageBeats) -> Estimate:
    """Return ESP x SV of the accepted steady beats, mmHg mL; raises `Withheld` with fewer than three."""
    return median_estimate(stage.steady_end_systole[0] * stage.steady_column("sv_ml"))


def box_less_filling(stage: StageBeats) -> Estimate:
    """Return (ESP - EDP) x SV of the accepted steady beats, mmHg mL; raises `Withheld` with fewer than three."""
    return median_estimate((stage.steady_end_systole[0] - stage.steady_column("edp_mmhg")) * stage.steady_column("sv_ml"))


def _box_sensitivity(stage: StageBeats, value: float) -> Sensitivity:
    return Sensitivity(pressure_gain=value, pressure_mmhg=median_estimate(stage.steady_column("sv_ml")).value, volume_gain=value)


STROKE_WORK = Index(
    name="SW",
    title="Stroke work",
    unit="mm[Hg].mL",
    estimator="loop",
    source=Source.STEADY,
    compute=median_of("sw_mmhg_ml"),
    needs="the accepted beats of the stage's steady runs",
    sensitivity=powers(pressure_gain=1.0, volume_gain=1.0),
)
BOX = Index(
    name="SW",
    title="Stroke work as a box",
    unit="mm[Hg].mL",
    estimator="box",
    source=Source.STEADY,
    compute=box,
    needs="the accepted beats of the stage's steady runs, and V0 of the stage's end-systolic line where there is one",
    sensitivity=_box_sensitivity,
    primary=False,
    rests_on=frozenset({"ESP", "SV"}),
)
BOX_LESS_FILLING = Index(
    name="SW",
    title="Stroke work as a box less filling",
    unit="mm[Hg].mL",
    estimator="box-less-filling",
    source=Source.STEADY,
    compute=box_less_filling,
    needs="the accepted beats of the stage's steady runs, and V0 of the stage's end-systolic line where there is one",
    sensitivity=powers(pressure_gain=1.0, volume_gain=1.0),
    primary=False,
    rests_on=frozenset({"ESP", "EDP", "SV"}),
)
