"""Pressure sensor: a fluid-filled line rings and damps, so it cannot carry dP/dt.

Natural frequencies above 40 Hz are needed for dP/dt within 10 % (Falsetti 1974, Circulation 49:165, read in abstract); a fluid-filled
line rarely reaches that and never by declaration alone.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import SLOW_PRESSURE
from checks.subject import AcquisitionSubject


def is_fluid_filled(subject: AcquisitionSubject) -> Measured:
    """Return 1 for a declared fluid-filled line, 0 for another sensor, NaN when none is declared; shape ()."""
    kind = subject.facts.pressure_kind
    return single(np.nan if kind is None else kind == "fluid-filled")


CHECK = Check(
    name="pressure-sensor",
    title="Pressure sensor fit for dP/dt",
    level=Level.ACQUISITION,
    measure=is_fluid_filled,
    unit="1",
    limits=Limits(fail_above=0.5, basis="a fact; Falsetti 1974"),
    reason="pressure was recorded through a fluid-filled line, which does not carry rates of pressure change",
    remedy="use a tip manometer where the protocol needs dP/dt or relaxation",
    spoils=SLOW_PRESSURE,
    is_fact=True,
)
