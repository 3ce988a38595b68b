"""Effective arterial elastance: Ea = ESP / SV.

Sunagawa 1983, Am J Physiol 245:H773 (from memory). It is close to resistance over cycle length, not a stiffness (Chirinos 2014, read).
"""

from __future__ import annotations

from metrics.indices.card import Estimate, Index, Sensitivity, Source, StageBeats
from metrics.indices.steady import median_estimate


def arterial_elastance(stage: StageBeats) -> Estimate:
    """Return Ea of the accepted steady beats, mmHg/mL; raises `Withheld` with fewer than three."""
    return median_estimate(stage.steady_end_systole[1])


def _sensitivity(stage: StageBeats, value: float) -> Sensitivity:
    stroke_ml = median_estimate(stage.steady_column("sv_ml")).value
    return Sensitivity(pressure_gain=value, pressure_mmhg=1.0 / stroke_ml, volume_gain=-value)


ARTERIAL_ELASTANCE = Index(
    name="Ea",
    title="Effective arterial elastance",
    unit="mm[Hg]/mL",
    estimator="esp-over-sv",
    source=Source.STEADY,
    compute=arterial_elastance,
    needs="the accepted beats of the stage's steady runs, and V0 of the stage's end-systolic line where there is one",
    sensitivity=_sensitivity,
)
