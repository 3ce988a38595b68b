"""Units: pressure moves by what a ventricle develops in mmHg, volume by what it ejects in mL.

A unit declared wrongly scales a channel: kPa sent as mmHg divides pressure by 7.5, litres sent as mL divide volume by 1,000. What a
channel moves by over the run (its 2nd to 98th percentile) is free of any offset, so a wrong zero or parallel volume cannot show here.
A factor of 1.36 (cmH2O) lies inside what healthy ventricles do and cannot be told from pressure alone: this check says nothing of it.
A channel that does not move at all is not evaluated; that is another check's.
"""

from __future__ import annotations

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import PRESSURE_GAIN, PRESSURE_OFFSET, VOLUME_SHAPE
from checks.subject import RunSubject


def pressure_span(subject: RunSubject) -> Measured:
    """Return how far the calibrated pressure moves over the run, mmHg, shape ()."""
    return single(subject.known_signals().pressure_reach_mmhg)


def volume_span(subject: RunSubject) -> Measured:
    """Return how far the calibrated volume moves over the run, mL, shape ()."""
    return single(subject.known_signals().volume_reach_ml)


PRESSURE = Check(
    name="pressure-units",
    title="Pressure is in mmHg",
    level=Level.RUN,
    measure=pressure_span,
    unit="mm[Hg]",
    limits=Limits(
        suspect_below=40.0,
        fail_below=30.0,
        fail_above=350.0,
        basis="house default: a left ventricle in shock develops 50 mmHg, one at 225 mmHg shows 30 when kPa are taken for mmHg",
    ),
    limits_rv=Limits(
        suspect_below=13.0,
        fail_below=10.0,
        fail_above=160.0,
        basis="house default: a right ventricle develops 15 mmHg and more, one at 75 mmHg shows 10 when kPa are taken for mmHg",
    ),
    reason="pressure moves by {value:.3g} mmHg over the run, as if it were sent in another unit (limit {limit:g} mmHg)",
    remedy="confirm the unit of the pressure channel (kPa, mm[Hg] or cm[H2O]) and send the package again",
    spoils=PRESSURE_GAIN | PRESSURE_OFFSET,
)
VOLUME = Check(
    name="volume-units",
    title="Volume is in mL",
    level=Level.RUN,
    measure=volume_span,
    unit="mL",
    limits=Limits(
        fail_below=2.0,
        fail_above=600.0,
        basis="house default: no human ventricle ejects less than 2 mL or holds more than 600 mL; animals need a protocol of their own",
    ),
    reason="volume moves by {value:.3g} mL over the run, as if it were sent in another unit (limit {limit:g} mL)",
    remedy="confirm the unit of the volume channel (L, mL or uL) and send the package again",
    spoils=VOLUME_SHAPE,
)
