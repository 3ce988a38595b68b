"""Ventriculo-arterial coupling: Ees / Ea, in this direction (many papers print its inverse).

Sunagawa 1985, Circ Res 56:586 (read): stroke work is largest at Ea = Ees. The volume gain cancels; a pressure offset does not.
"""

from __future__ import annotations

import numpy as np

from metrics.indices.arterial_elastance import arterial_elastance
from metrics.indices.card import Estimate, Index, Sensitivity, Source, StageBeats
from metrics.indices.end_systolic_elastance import ESTIMATOR, end_systolic_elastance
from metrics.indices.pressures import end_systolic_pressure


def coupling(stage: StageBeats) -> Estimate:
    """Return Ees / Ea, dimensionless; raises `Withheld` when either cannot be had.

    The interval joins both relative half widths in quadrature (first order, independent errors; derived).
    """
    ees, ea = end_systolic_elastance(stage), arterial_elastance(stage)
    ratio = ees.value / ea.value
    low, high = ratio, ratio
    if ees.fit_low is not None and ees.fit_high is not None:
        ea_half = 0.0 if ea.fit_low is None or ea.fit_high is None else (ea.fit_high - ea.fit_low) / 2.0
        half = ratio * float(np.hypot((ees.fit_high - ees.fit_low) / 2.0 / ees.value, ea_half / ea.value))
        low, high = ratio - half, ratio + half
    return Estimate(ratio, low, high, ees.beats, ees.runs, ees.left_out)


def _sensitivity(stage: StageBeats, value: float) -> Sensitivity:
    return Sensitivity(pressure_mmhg=-value / end_systolic_pressure(stage).value)


COUPLING = Index(
    name="Ees_Ea",
    title="Ventriculo-arterial coupling ratio",
    unit="1",
    estimator=ESTIMATOR,
    source=Source.BOTH,
    compute=coupling,
    needs="what Ees needs, and at least 3 accepted steady beats",
    sensitivity=_sensitivity,
)
