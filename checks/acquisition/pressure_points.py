"""Pressure points: how many applied pressures tie the pressure's gain to a manometer.

Without two of them, 50 mmHg apart, the gain is the recorder's own and nobody has checked it: a wrong one moves every pressure, slope and
work by as much, and nothing in the signals tells. Zero readings say nothing of a gain. Many sites check a transducer before the study
and send no points, so that is only suspect; a protocol may demand them: ``[limits.pressure-points] fail_below = 2``. Common practice, no
source.
"""

from __future__ import annotations

from checks.acquisition.pressure_gain import LEAST_SPAN_MMHG
from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import PRESSURE_GAIN
from checks.subject import AcquisitionSubject
from metrics.signals.facts import PressureCalibration


def points_that_span(calibration: PressureCalibration) -> int:
    """Return how many different pressures were applied, 0 where they lie within less than 50 mmHg.

    >>> points_that_span(PressureCalibration(points=((0.0, 0.2), (100.0, 101.0), (100.0, 101.1))))
    2
    >>> points_that_span(PressureCalibration(points=((0.0, 0.2), (20.0, 20.1))))
    0
    """
    applied = {point[0] for point in calibration.points}
    return len(applied) if applied and max(applied) - min(applied) >= LEAST_SPAN_MMHG else 0


def pressure_points(subject: AcquisitionSubject) -> Measured:
    """Return the smallest number of points any run's pressure is calibrated by, shape ()."""
    runs = [run.facts.pressure for run in subject.runs if run.facts.kind != "saline"]
    return single(min(points_that_span(calibration) for calibration in runs or subject.pressure_calibrations()))


CHECK = Check(
    name="pressure-points",
    title="Pressure gain was checked",
    level=Level.ACQUISITION,
    measure=pressure_points,
    unit="1",
    limits=Limits(suspect_below=2.0, fail_below=0.0, basis="house default; a protocol may demand points with fail_below"),
    reason="applied pressures that tell the gain: {value:.0f}; nobody checked the recorder's own (limit {limit:.0f})",
    remedy="send what the recorder showed for 0 and 100 mmHg applied to the transducer",
    spoils=PRESSURE_GAIN,
)
