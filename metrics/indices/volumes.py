"""Ventricular volumes: EDV, ESV, SV = EDV - ESV and EF = SV / EDV, medians over accepted steady beats.

Definitions common practice, no source. With regurgitation or a shunt SV is total, not forward, stroke volume.
"""

from __future__ import annotations

from metrics.indices.card import Index, Source
from metrics.indices.steady import median_of

_STEADY = "the accepted beats of the stage's steady runs"

END_DIASTOLIC_VOLUME = Index(
    name="EDV",
    title="End-diastolic volume",
    unit="mL",
    estimator="upstroke",
    source=Source.STEADY,
    compute=median_of("edv_ml"),
    needs=_STEADY,
)
END_SYSTOLIC_VOLUME = Index(
    name="ESV",
    title="End-systolic volume",
    unit="mL",
    estimator="smallest",
    source=Source.STEADY,
    compute=median_of("esv_ml"),
    needs=_STEADY,
)
STROKE_VOLUME = Index(
    name="SV",
    title="Stroke volume",
    unit="mL",
    estimator="edv-minus-esv",
    source=Source.STEADY,
    compute=median_of("sv_ml"),
    needs=_STEADY,
)
EJECTION_FRACTION = Index(
    name="EF",
    title="Ejection fraction",
    unit="1",
    estimator="sv-over-edv",
    source=Source.STEADY,
    compute=median_of("ef"),
    needs=_STEADY,
)
