"""Pressure zero: readings of zero before and after the runs tie the pressure scale to atmosphere.

Without any reading an offset of unknown size stands in every pressure; with one, drift cannot be seen.
"""

from __future__ import annotations

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import PRESSURE_OFFSET
from checks.subject import AcquisitionSubject


def zero_readings(subject: AcquisitionSubject) -> Measured:
    """Return the smallest number of zero readings any run is calibrated with, shape ().

    >>> from metrics.signals.facts import AcquisitionFacts
    >>> float(zero_readings(AcquisitionSubject(AcquisitionFacts())).value)
    0.0
    """
    return single(min(len(calibration.zeros) for calibration in subject.pressure_calibrations()))


CHECK = Check(
    name="pressure-zero",
    title="Pressure zero is known",
    level=Level.ACQUISITION,
    measure=zero_readings,
    unit="1",
    limits=Limits(suspect_below=2.0, fail_below=1.0, basis="house default; a zero before and after is common practice, no source"),
    reason="zero readings sent: {value:.0f}; the pressure offset is not known as well as it should be (limit {limit:.0f})",
    remedy="send the zero readings taken before and after the recording, with their times",
    spoils=PRESSURE_OFFSET,
)
