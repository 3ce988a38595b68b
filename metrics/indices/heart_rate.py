"""Heart rate: 60 over the median beat length, from R wave to R wave where there is an ECG.

Common practice, no source.
"""

from __future__ import annotations

from metrics.indices.card import Estimate, Index, Source, StageBeats, powers
from metrics.indices.steady import median_estimate


def heart_rate(stage: StageBeats) -> Estimate:
    """Return the heart rate of the accepted steady beats, per minute; raises `Withheld` with fewer than three."""
    return median_estimate(60.0 / stage.steady_column("rr_s"))


HEART_RATE = Index(
    name="HR",
    title="Heart rate",
    unit="/min",
    estimator="median-rr",
    source=Source.STEADY,
    compute=heart_rate,
    needs="the accepted beats of the stage's steady runs",
    sensitivity=powers(),
)
