"""Drift: pressure or volume wanders during the run while the heart does not.

Transducers warm up, parallel conductance changes with the blood and the lungs. A heart that truly empties moves along its own
end-systolic and end-diastolic relations, a channel that drifts carries the beats off both (`metrics.signals.shifts`). In an occlusion
drift and load both go one way; what tells them apart are the beats before the onset and those after the deflation, so a run without
them has a wide error and is rarely told. Contractility that changes, or what presses on the heart from outside, moves one of the two
relations and may look like a drift: then too the relation read from this run is not the heart's.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import PRESSURE_MOVED, VOLUME_MOVED
from checks.subject import RunSubject


def pressure_drift(subject: RunSubject) -> Measured:
    """Return by how much pressure drifts over the run, mmHg, in the window of a preload-reduction run; 0 where it cannot be told."""
    return single(abs(subject.course.pressure_drift_mmhg) * _share_in_use(subject))


def volume_drift(subject: RunSubject) -> Measured:
    """Return by how much volume drifts, over end-diastolic volume or the window's range of end-systolic volume; shape ()."""
    return single(abs(subject.course.volume_drift_ml) * _share_in_use(subject) / subject.volume_at_stake_ml())


def _share_in_use(subject: RunSubject) -> float:
    """Return what share of the time looked at indices are read from: the window of a preload-reduction run, all of a steady one."""
    course, window = subject.course, subject.window
    if window is None or not course.last_s > course.first_s:
        return 1.0
    start_s = subject.start_s()
    return float(np.clip((start_s[window.last_at] - start_s[window.onset_at]) / (course.last_s - course.first_s), 0.0, 1.0))


PRESSURE = Check(
    name="pressure-drift",
    title="Pressure does not drift",
    level=Level.RUN,
    measure=pressure_drift,
    unit="mm[Hg]",
    limits=Limits(
        suspect_above=1.0, fail_above=2.0, basis="a run's mean is off by half: 1 mmHg, what a transducer is good to (BP22, from memory)"
    ),
    limits_rv=Limits(suspect_above=0.7, fail_above=1.0, basis="half of the left side's, whose pressures fall more; house default"),
    reason="pressure drifts by {value:.1f} mmHg during the run, while volumes do not change with it (limit {limit:g} mmHg)",
    remedy="let the transducer warm up; send zeros taken right before and after this run",
    spoils=PRESSURE_MOVED,
    after_beats=True,
)
VOLUME = Check(
    name="volume-drift",
    title="Volume does not drift",
    level=Level.RUN,
    measure=volume_drift,
    unit="1",
    limits=Limits(
        suspect_above=0.03, fail_above=0.05, basis="5 % of EDV is what steadiness allows; in a ramp it bends Ees by as much (derived)"
    ),
    reason="volume drifts by {value:.0%} of what is read from it, while pressures do not change with it (limit {limit:.0%})",
    remedy="repeat the run once the volume signal is stable; calibrate parallel volume right before it",
    spoils=VOLUME_MOVED,
    after_beats=True,
)
