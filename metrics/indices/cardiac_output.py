"""Cardiac output: stroke volume times heart rate, formed beat by beat.

Common practice, no source. With regurgitation or a shunt it is total, not forward, output.
"""

from __future__ import annotations

from metrics.indices.card import Estimate, Index, Source, StageBeats, powers
from metrics.indices.steady import median_estimate

ML_PER_L = 1000.0


def cardiac_output(stage: StageBeats) -> Estimate:
    """Return the output of the accepted steady beats, L/min; raises `Withheld` with fewer than three."""
    return median_estimate(stage.steady_column("sv_ml") * 60.0 / stage.steady_column("rr_s") / ML_PER_L)


CARDIAC_OUTPUT = Index(
    name="CO",
    title="Cardiac output",
    unit="L/min",
    estimator="sv-times-hr",
    source=Source.STEADY,
    compute=cardiac_output,
    needs="the accepted beats of the stage's steady runs",
    sensitivity=powers(volume_gain=1.0),
)
