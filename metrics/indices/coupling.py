"""Ventriculo-arterial coupling: Ees / Ea, in this direction (many papers print its inverse).

Sunagawa 1985, Circ Res 56:586 (read): stroke work is largest at Ea = Ees. The volume gain cancels; a pressure offset does not.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from metrics.indices.arterial_elastance import arterial_elastance
from metrics.indices.card import Estimate, Index, Sensitivity, Source, StageBeats
from metrics.indices.end_systolic_elastance import ESTIMATOR, end_systolic_elastance
from metrics.indices.pressures import end_systolic_pressure


def coupling(stage: StageBeats) -> Estimate:
    """Return Ees / Ea, dimensionless; raises `Withheld` when either cannot be had.

    Each side of the interval joins the relative half widths that move the ratio that way, in quadrature (first order, independent errors;
    derived): a larger Ea makes it smaller. It has none where Ees or Ea has none.
    """
    ees, ea = end_systolic_elastance(stage), arterial_elastance(stage)
    ratio = ees.value / ea.value
    found = replace(ees, value=ratio, fit_low=None, fit_high=None)
    known = (ees.fit_low, ees.fit_high, ea.fit_low, ea.fit_high)
    if None in known:
        return found
    ees_low, ees_high, ea_low, ea_high = (float(bound) for bound in known if bound is not None)
    down = np.hypot((ees.value - ees_low) / ees.value, (ea_high - ea.value) / ea.value)
    up = np.hypot((ees_high - ees.value) / ees.value, (ea.value - ea_low) / ea.value)
    return replace(found, fit_low=float(ratio * (1.0 - down)), fit_high=float(ratio * (1.0 + up)))


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
