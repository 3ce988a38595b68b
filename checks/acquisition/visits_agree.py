"""Visits agree: what one subject's heart shows at several visits differs no more than a heart can change.

A heart remodels by some tens of per cent over months, and one calibration differs from the next by a tenth or two; half as large again is
more than that, twice as large is another subject's heart, or another calibration. An acquisition is held against all earlier ones of the
same subject and ventricle, in a stage both have, and counts as near as to the nearest of them: so one that was odd accuses none after it.
Nothing is withheld: which of them is wrong cannot be known from two numbers, but the site can say. Pressure and heart rate change with
state, so their bounds are wider. Judged at the end of a night, when the subject's other acquisitions are known.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.subject import AcquisitionSubject

_BASIS = "house default; what a heart changes by between visits, with what calibrations differ by"


def nearest_ratio(index: str) -> Callable[[AcquisitionSubject], Measured]:
    """Return a measure: by what factor an index differs from that of the nearest earlier acquisition."""

    def measured(subject: AcquisitionSubject) -> Measured:
        apart = [
            abs(float(np.log(value / before[index, stage])))
            for (name, stage), value in subject.rested.items()
            for before in subject.earlier
            if name == index and value > 0.0 and before.get((index, stage), 0.0) > 0.0
        ]
        return single(float(np.exp(min(apart))) if apart else np.nan)

    measured.__doc__ = f"Return by what factor {index} differs from that of the nearest earlier acquisition, shape (); NaN without any."
    return measured


def _visits(name: str, index: str, title: str, limits: tuple[float, float]) -> Check:
    return Check(
        name=f"visits-agree-{name}",
        title=f"{title} of one subject at several visits",
        level=Level.ACQUISITION,
        measure=nearest_ratio(index),
        unit="1",
        limits=Limits(suspect_above=limits[0], fail_above=limits[1], basis=_BASIS),
        reason=f"{title[0].lower()}{title[1:]} differs by a factor of {{value:.2f}} from every earlier acquisition of this subject "
        "(limit {limit:g}): it may be another subject's, or another calibration",
        remedy="confirm whose acquisition this is, and how pressure and volume were calibrated at each visit",
    )


VOLUME = _visits("volume", "EDV", "End-diastolic volume", (1.5, 2.0))
PRESSURE = _visits("pressure", "Pmax", "Peak pressure", (1.6, 2.5))
HEART_RATE = _visits("heart-rate", "HR", "Heart rate", (1.8, 3.0))
ALL = (VOLUME, PRESSURE, HEART_RATE)
