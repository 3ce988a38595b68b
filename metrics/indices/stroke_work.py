"""Stroke work: the area of the pressure-volume loop, -closed integral of P dV.

The polygon sum of `metrics.signals.landmarks.loop_areas`; 1 mmHg mL = 1.33322e-4 J (computed).
"""

from __future__ import annotations

from metrics.indices.card import Index, Source, powers
from metrics.indices.steady import median_of

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
