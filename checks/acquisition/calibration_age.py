"""Calibration age: gain and parallel volume belong to one placement of one catheter in one state of the blood.

Both change with position, haematocrit and temperature (Baan 1984, Circulation 70:812, read in abstract, has both constant only within a
study). A calibration of the same session is hours old at most; one of another day was made with another placement. An instant after the
run counts like one before it. What an old calibration no longer tells depends on what was measured anew: saline runs in the package show
the parallel volume of this placement (`saline-agreement` holds it against the declared one), so that only the gain is of another day.
"""

from __future__ import annotations

import numpy as np

from checks.acquisition.saline_agreement import saline_shift_ml
from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import VOLUME_GAIN, VOLUME_OFFSET
from checks.subject import AcquisitionSubject


def calibration_age_hours(subject: AcquisitionSubject) -> Measured:
    """Return the longest time between a raw run and its volume calibration, hours, shape (); NaN without both clocks.

    >>> from metrics.signals.facts import AcquisitionFacts
    >>> float(calibration_age_hours(AcquisitionSubject(AcquisitionFacts())).value)
    nan
    """
    used = [run.facts.volume for run in subject.runs if run.facts.kind != "saline" and not run.facts.volume.calibrated]
    ages = [abs(volume.age_hours) for volume in used if volume.age_hours is not None]
    return single(max(ages) if ages else np.nan)


def parallel_volume_age_hours(subject: AcquisitionSubject) -> Measured:
    """Return the same where no saline run of the acquisition shows the parallel volume, shape (); NaN where one does."""
    if saline_shift_ml(subject) is not None:
        return single(np.nan)
    return calibration_age_hours(subject)


LIMITS = Limits(suspect_above=4.0, fail_above=12.0, basis="house default; one catheterisation lasts hours, not days")
CHECK = Check(
    name="calibration-age",
    title="Volume gain is of the session",
    level=Level.ACQUISITION,
    measure=calibration_age_hours,
    unit="h",
    limits=LIMITS,
    reason="the volume gain was found {value:.1f} hours from a run that uses it (limit {limit:g} h)",
    remedy="calibrate in the same session and send calibration.volume.at, or confirm the date",
    spoils=VOLUME_GAIN,
)
PARALLEL = Check(
    name="parallel-volume-age",
    title="Parallel volume is of the session",
    level=Level.ACQUISITION,
    measure=parallel_volume_age_hours,
    unit="h",
    limits=LIMITS,
    reason="the parallel volume was found {value:.1f} hours from a run that uses it (limit {limit:g} h)",
    remedy="send the session's saline runs, or calibrate in the same session and send calibration.volume.at",
    spoils=VOLUME_OFFSET,
)
