"""Drift: pressure or volume wanders during the run while the heart does not.

Transducers warm up, parallel conductance changes with the blood and the lungs. A heart that truly empties moves along its own
end-systolic and end-diastolic relations, a channel that drifts carries the beats off both (`metrics.signals.shifts`). In an occlusion
drift and load both go one way; what tells them apart are the beats before the onset and those after the deflation, so a run without
them has a wide error and is rarely told. Contractility that changes, or what presses on the heart from outside, moves one of the two
relations and may look like a drift: then too the relation read from this run is not the heart's.

A median over a run at rest is off by half of what drifted; a slope bends by what drifts within its window. Each is held against what is
read, as for a step.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import END_DIASTOLE, END_SYSTOLIC_VOLUME, PRESSURE_MOVED, VOLUME_MOVED
from checks.stakes import RESOLVED_MMHG, edp_at_stake_mmhg, esv_at_stake_ml, pressure_at_stake_mmhg, volume_at_stake_ml
from checks.subject import RunSubject

OF_A_MEDIAN = 0.5
LIMITS = Limits(
    suspect_above=0.02, fail_above=0.035, basis="house default: of two such errors in one ratio, 5 % remain (root of the sum of squares)"
)


def pressure_drift(subject: RunSubject) -> Measured:
    """Return how far drift puts pressures off, over peak pressure or its range in the window; 0 where it cannot be told, shape ()."""
    return _over(subject, subject.course.pressure_drift_mmhg, pressure_at_stake_mmhg(subject))


def edp_drift(subject: RunSubject) -> Measured:
    """Return how far drift puts end-diastolic pressure off, over that at rest; 0 where it is too small to be told, shape ()."""
    if abs(subject.course.pressure_drift_mmhg) < RESOLVED_MMHG:
        return single(0.0)
    return _over(subject, subject.course.pressure_drift_mmhg, edp_at_stake_mmhg(subject))


def volume_drift(subject: RunSubject) -> Measured:
    """Return how far drift puts volumes off, over end-diastolic volume or the window's range of end-systolic volume; shape ()."""
    return _over(subject, subject.course.volume_drift_ml, volume_at_stake_ml(subject))


def esv_drift(subject: RunSubject) -> Measured:
    """Return how far drift puts end-systolic volume off, over that at rest; 0 where it cannot be told, shape ()."""
    return _over(subject, subject.course.volume_drift_ml, esv_at_stake_ml(subject))


def _over(subject: RunSubject, drift: float, stake: float) -> Measured:
    return single(abs(drift) * _share_in_use(subject) / stake)


def _share_in_use(subject: RunSubject) -> float:
    """Return what share of the drift reaches what is read: half at rest, what falls into the window of a preload-reduction run."""
    course, window = subject.course, subject.window
    if window is None or not course.last_s > course.first_s:
        return OF_A_MEDIAN
    start_s = subject.start_s()
    return float(np.clip((start_s[window.last_at] - start_s[window.onset_at]) / (course.last_s - course.first_s), 0.0, 1.0))


PRESSURE = Check(
    name="pressure-drift",
    title="Pressure does not drift",
    level=Level.RUN,
    measure=pressure_drift,
    unit="1",
    limits=LIMITS,
    reason="pressure drifts so that what is read from it is off by {value:.0%}, while volumes do not change with it (limit {limit:.0%})",
    remedy="let the transducer warm up; send zeros taken right before and after this run",
    spoils=PRESSURE_MOVED,
    after_beats=True,
)
EDP = Check(
    name="edp-drift",
    title="End-diastolic pressure does not drift",
    level=Level.RUN,
    measure=edp_drift,
    unit="1",
    limits=LIMITS,
    reason="pressure drifts so that end-diastolic pressure is off by {value:.0%}, while volumes do not change with it (limit {limit:.0%})",
    remedy="let the transducer warm up; send zeros taken right before and after this run",
    spoils=END_DIASTOLE,
    run_kinds=("steady",),
    after_beats=True,
)
VOLUME = Check(
    name="volume-drift",
    title="Volume does not drift",
    level=Level.RUN,
    measure=volume_drift,
    unit="1",
    limits=LIMITS,
    reason="volume drifts so that what is read from it is off by {value:.0%}, while pressures do not change with it (limit {limit:.0%})",
    remedy="repeat the run once the volume signal is stable; calibrate parallel volume right before it",
    spoils=VOLUME_MOVED,
    after_beats=True,
)
ESV = Check(
    name="esv-drift",
    title="End-systolic volume does not drift",
    level=Level.RUN,
    measure=esv_drift,
    unit="1",
    limits=LIMITS,
    reason="volume drifts so that end-systolic volume is off by {value:.0%}, while pressures do not change with it (limit {limit:.0%})",
    remedy="repeat the run once the volume signal is stable; calibrate parallel volume right before it",
    spoils=END_SYSTOLIC_VOLUME,
    after_beats=True,
)
