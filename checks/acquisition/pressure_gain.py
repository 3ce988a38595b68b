"""Pressure gain: what the recorder showed for two applied pressures.

A gain that two points show is undone by their line; it is flagged because the sensor or recorder needs service. A gain far from 1 is
more likely a wrong unit or a wrong entry than a sensor, and then the line cannot be trusted either.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import PRESSURE_GAIN
from checks.subject import AcquisitionSubject
from metrics.signals.calibrate import two_point_line
from metrics.signals.facts import PressureCalibration

LEAST_SPAN_MMHG = 50.0
"""Two points closer than this do not fix a gain; house default (0 and 100 mmHg are customary, from memory)."""


def gain_error(calibration: PressureCalibration) -> float:
    """Return |k - 1| of the two-point line; NaN when the points span less than 50 mmHg.

    >>> round(gain_error(PressureCalibration(points=((0.0, 0.0), (100.0, 108.0)))), 6)
    0.08
    """
    applied = [point[0] for point in calibration.points]
    if not applied or max(applied) - min(applied) < LEAST_SPAN_MMHG:
        return float("nan")
    return abs(two_point_line(calibration.points)[0] - 1.0)


def pressure_gain(subject: AcquisitionSubject) -> Measured:
    """Return the largest gain error any run is calibrated with, as a fraction, shape ()."""
    errors = [gain_error(calibration) for calibration in subject.pressure_calibrations()]
    known = [error for error in errors if np.isfinite(error)]
    return single(max(known) if known else np.nan)


CHECK = Check(
    name="pressure-gain",
    title="Pressure gain by two points",
    level=Level.ACQUISITION,
    measure=pressure_gain,
    unit="1",
    limits=Limits(suspect_above=0.03, fail_above=0.20, basis="house default; 3 % is the customary transducer tolerance (from memory)"),
    reason="the recorder's pressure gain is off by {value:.1%} (limit {limit:.0%})",
    remedy="have the pressure channel calibrated; confirm the applied pressures and their unit",
    spoils=PRESSURE_GAIN,
    corrected=True,
)
