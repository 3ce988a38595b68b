"""Sensor step: pressure or volume jumps and stays.

A catheter that slips, an amplifier whose zero was touched or a lead that gives way shifts one channel at once: diastolic and peak
pressure together while volumes and dP/dt stay, or end-diastolic and end-systolic volume together while pressures stay. A heart can
only move along its own end-systolic and end-diastolic relations, so a step is what carries the beats off both; how it is found
stands in `metrics.signals.shifts`. Premature beats are not among the accepted ones, breathing and occlusions move along the relations.

What a step reaches depends on what it is compared with: 5 mmHg are half of an end-diastolic pressure and a twentieth of an end-systolic
one. So each is held against what is read: at rest the pressures and volumes themselves, in an occlusion their range in the window.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import END_DIASTOLE, END_SYSTOLIC_VOLUME, PRESSURE_MOVED, VOLUME_MOVED
from checks.stakes import RESOLVED_MMHG, edp_at_stake_mmhg, esv_at_stake_ml, pressure_at_stake_mmhg, volume_at_stake_ml
from checks.subject import RunSubject

LIMITS = Limits(
    suspect_above=0.02, fail_above=0.035, basis="house default: of two such errors in one ratio, 5 % remain (root of the sum of squares)"
)


def pressure_step(subject: RunSubject) -> Measured:
    """Return by how much pressure jumps, over peak pressure or its range in the window; shape ()."""
    return _pressure_over(subject, pressure_at_stake_mmhg(subject))


def edp_step(subject: RunSubject) -> Measured:
    """Return by how much pressure jumps, over end-diastolic pressure at rest, 0 below what a transducer is good to; shape ()."""
    if abs(subject.course.pressure_step_mmhg) < RESOLVED_MMHG:
        return single(0.0)
    return _pressure_over(subject, edp_at_stake_mmhg(subject))


def volume_step(subject: RunSubject) -> Measured:
    """Return by how much volume jumps, over end-diastolic volume or the window's range of end-systolic volume; shape ()."""
    return _volume_over(subject, volume_at_stake_ml(subject))


def esv_step(subject: RunSubject) -> Measured:
    """Return by how much volume jumps, over end-systolic volume at rest; shape ()."""
    return _volume_over(subject, esv_at_stake_ml(subject))


def _pressure_over(subject: RunSubject, stake_mmhg: float) -> Measured:
    course = subject.course
    return _before_the_end(subject, abs(course.pressure_step_mmhg) / stake_mmhg, course.pressure_step_s)


def _volume_over(subject: RunSubject, stake_ml: float) -> Measured:
    course = subject.course
    return _before_the_end(subject, abs(course.volume_step_ml) / stake_ml, course.volume_step_s)


def _before_the_end(subject: RunSubject, size: float, at_s: float) -> Measured:
    """Return the size, 0 where nothing that is published comes after the jump."""
    if subject.window is not None and at_s > subject.start_s()[subject.window.last_at]:
        return single(0.0, at_s)
    return single(size, at_s if size > 0.0 else np.nan)


PRESSURE = Check(
    name="pressure-step",
    title="Pressure does not jump",
    level=Level.RUN,
    measure=pressure_step,
    unit="1",
    limits=LIMITS,
    reason="pressure jumps by {value:.0%} of what is read from it and stays, while volumes do not change with it (limit {limit:.0%})",
    remedy="say what happened to the catheter or amplifier; send the parts before and after as runs of their own, each with its zero",
    spoils=PRESSURE_MOVED,
    after_beats=True,
)
EDP = Check(
    name="edp-step",
    title="End-diastolic pressure does not jump",
    level=Level.RUN,
    measure=edp_step,
    unit="1",
    limits=LIMITS,
    reason="pressure jumps by {value:.0%} of end-diastolic pressure and stays, while volumes do not change with it (limit {limit:.0%})",
    remedy="say what happened to the catheter or amplifier; send the parts before and after as runs of their own, each with its zero",
    spoils=END_DIASTOLE,
    run_kinds=("steady",),
    after_beats=True,
)
VOLUME = Check(
    name="volume-step",
    title="Volume does not jump",
    level=Level.RUN,
    measure=volume_step,
    unit="1",
    limits=LIMITS,
    reason="volume jumps by {value:.0%} of what is read from it and stays, while pressures do not change with it (limit {limit:.0%})",
    remedy="say what happened to the catheter; send the parts before and after as runs of their own, each with its calibration",
    spoils=VOLUME_MOVED,
    after_beats=True,
)
ESV = Check(
    name="esv-step",
    title="End-systolic volume does not jump",
    level=Level.RUN,
    measure=esv_step,
    unit="1",
    limits=LIMITS,
    reason="volume jumps by {value:.0%} of end-systolic volume and stays, while pressures do not change with it (limit {limit:.0%})",
    remedy="say what happened to the catheter; send the parts before and after as runs of their own, each with its calibration",
    spoils=END_SYSTOLIC_VOLUME,
    after_beats=True,
)
