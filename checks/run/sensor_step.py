"""Sensor step: pressure or volume jumps and stays.

A catheter that slips, an amplifier whose zero was touched or a lead that gives way shifts one channel at once: diastolic and peak
pressure together while volumes and dP/dt stay, or end-diastolic and end-systolic volume together while pressures stay. A heart can
only move along its own end-systolic and end-diastolic relations, so a step is what carries the beats off both; how it is found
stands in `metrics.signals.shifts`. Premature beats are not among the accepted ones, breathing and occlusions move along the relations.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import PRESSURE_MOVED, VOLUME_MOVED
from checks.subject import RunSubject


def pressure_step(subject: RunSubject) -> Measured:
    """Return by how much pressure jumps, mmHg, 0 for a jump that cannot be told from none or comes after the window; shape ()."""
    course = subject.course
    return single(_before_the_end(subject, abs(course.pressure_step_mmhg), course.pressure_step_s), course.pressure_step_s)


def volume_step(subject: RunSubject) -> Measured:
    """Return by how much volume jumps, over end-diastolic volume or the window's range of end-systolic volume; shape ()."""
    course = subject.course
    share = abs(course.volume_step_ml) / subject.volume_at_stake_ml()
    return single(_before_the_end(subject, share, course.volume_step_s), course.volume_step_s)


def _before_the_end(subject: RunSubject, size: float, at_s: float) -> float:
    """Return the size, 0 where nothing that is published comes after the jump."""
    if subject.window is None or np.isnan(at_s):
        return size
    return size if at_s <= subject.start_s()[subject.window.last_at] else 0.0


PRESSURE = Check(
    name="pressure-step",
    title="Pressure does not jump",
    level=Level.RUN,
    measure=pressure_step,
    unit="mm[Hg]",
    limits=Limits(
        suspect_above=1.0, fail_above=2.0, basis="a transducer is good to 1 mmHg (ANSI/AAMI BP22, from memory); house default beyond"
    ),
    limits_rv=Limits(suspect_above=0.7, fail_above=1.0, basis="half of the left side's, whose pressures fall more; house default"),
    reason="pressure jumps by {value:.1f} mmHg and stays, while volumes do not change with it (limit {limit:g} mmHg)",
    remedy="say what happened to the catheter or amplifier; send the parts before and after as runs of their own, each with its zero",
    spoils=PRESSURE_MOVED,
    after_beats=True,
)
VOLUME = Check(
    name="volume-step",
    title="Volume does not jump",
    level=Level.RUN,
    measure=volume_step,
    unit="1",
    limits=Limits(
        suspect_above=0.03, fail_above=0.05, basis="5 % of EDV is what steadiness allows; in a ramp it bends Ees by as much (derived)"
    ),
    reason="volume jumps by {value:.0%} of what is read from it and stays, while pressures do not change with it (limit {limit:.0%})",
    remedy="say what happened to the catheter; send the parts before and after as runs of their own, each with its calibration",
    spoils=VOLUME_MOVED,
    after_beats=True,
)
