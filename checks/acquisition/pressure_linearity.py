"""Pressure linearity: three or more applied pressures must lie on the straight line that calibrates them.

Two points always fit a line; a third can contradict it, and then the pressures between the points are wrong whatever the line. 1 to 2 mmHg
are customary for a 5-point check (from memory). Zero readings pull the scale back to 0 at atmosphere, so with them departures are counted
from the one at 0.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import PRESSURE_GAIN, PRESSURE_OFFSET
from checks.subject import AcquisitionSubject
from metrics.signals.calibrate import two_point_line
from metrics.signals.facts import PressureCalibration

LEAST_PRESSURES = 3


def departure_mmhg(calibration: PressureCalibration) -> float:
    """Return the largest error that the calibrated pressure has at an applied one, mmHg; NaN with fewer than three applied pressures.

    >>> round(departure_mmhg(PressureCalibration(points=((0.0, 0.0), (50.0, 53.0), (100.0, 100.0)))), 6)
    2.0
    """
    applied = np.array([point[0] for point in calibration.points])
    read = np.array([point[1] for point in calibration.points])
    if np.unique(applied).size < LEAST_PRESSURES:
        return float("nan")
    k, b = two_point_line(calibration.points)
    error = (read - b) / k - applied
    if calibration.zeros:
        order = np.argsort(applied, kind="stable")
        error = error - float(np.interp(0.0, applied[order], error[order]))
    return float(np.max(np.abs(error)))


def pressure_linearity(subject: AcquisitionSubject) -> Measured:
    """Return the largest departure from the line any run is calibrated with, mmHg, shape ()."""
    departures = [departure_mmhg(run.facts.pressure) for run in subject.runs] or [departure_mmhg(subject.facts.pressure)]
    known = [departure for departure in departures if np.isfinite(departure)]
    return single(max(known) if known else np.nan)


CHECK = Check(
    name="pressure-linearity",
    title="Pressure points on one line",
    level=Level.ACQUISITION,
    measure=pressure_linearity,
    unit="mm[Hg]",
    limits=Limits(suspect_above=1.0, fail_above=2.0, basis="linearity within 1-2 mmHg is customary (from memory)"),
    reason="the calibration points stray by {value:.1f} mmHg from their straight line (limit {limit:g} mmHg)",
    remedy="repeat the calibration points; have the sensor serviced if they bend again, or correct a mistyped one",
    spoils=PRESSURE_GAIN | PRESSURE_OFFSET,
)
