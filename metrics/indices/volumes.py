"""Ventricular volumes: EDV, ESV, SV = EDV - ESV and EF = SV / EDV, medians over accepted steady beats.

Definitions common practice, no source. With regurgitation or a shunt SV is total, not forward, stroke volume.
"""

from __future__ import annotations

from metrics.indices.card import Index, Sensitivity, Source, StageBeats, powers
from metrics.indices.steady import median_estimate, median_of

_STEADY = "the accepted beats of the stage's steady runs"


def placed(_stage: StageBeats, value: float) -> Sensitivity:
    """Return the sensitivity of a volume's absolute place: it scales with the gain and goes along with the parallel volume."""
    return Sensitivity(volume_gain=value, volume_ml=1.0)


def _ejection_fraction(stage: StageBeats, value: float) -> Sensitivity:
    return Sensitivity(volume_ml=-value / median_estimate(stage.steady_column("edv_ml")).value)


END_DIASTOLIC_VOLUME = Index(
    name="EDV",
    title="End-diastolic volume",
    unit="mL",
    estimator="upstroke",
    source=Source.STEADY,
    compute=median_of("edv_ml"),
    needs=_STEADY,
    sensitivity=placed,
)
END_SYSTOLIC_VOLUME = Index(
    name="ESV",
    title="End-systolic volume",
    unit="mL",
    estimator="smallest",
    source=Source.STEADY,
    compute=median_of("esv_ml"),
    needs=_STEADY,
    sensitivity=placed,
)
STROKE_VOLUME = Index(
    name="SV",
    title="Stroke volume",
    unit="mL",
    estimator="edv-minus-esv",
    source=Source.STEADY,
    compute=median_of("sv_ml"),
    needs=_STEADY,
    sensitivity=powers(volume_gain=1.0),
)
EJECTION_FRACTION = Index(
    name="EF",
    title="Ejection fraction",
    unit="1",
    estimator="sv-over-edv",
    source=Source.STEADY,
    compute=median_of("ef"),
    needs=_STEADY,
    sensitivity=_ejection_fraction,
)
