"""Landmarks: a beat has its end-diastole, dP/dt maximum, end-systolic volume and dP/dt minimum, in that order."""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured
from checks.subject import RunSubject


def misplaced_landmarks(subject: RunSubject) -> Measured:
    """Return how many neighbouring landmarks stand in the wrong order, shape (n_beats,); NaN where one is missing.

    The right ventricle ejects past dP/dt minimum, so its end-systolic volume only has to follow dP/dt maximum.
    """
    beats = subject.known_beats()
    steps = [beats.start < beats.dpdt_max_at, beats.dpdt_max_at < beats.dpdt_min_at, beats.dpdt_min_at < beats.end]
    steps.append(beats.start <= beats.esv_at)
    if subject.facts.chamber != "RV":
        steps.append(beats.esv_at <= beats.dpdt_min_at)
    missing = (beats.dpdt_max_at < 0) | (beats.dpdt_min_at < 0) | (beats.esv_at < 0)
    wrong = len(steps) - np.sum(steps, axis=0, dtype=np.float64) if len(beats) else np.empty(0)
    return Measured(np.where(missing, np.nan, wrong), subject.start_s())


CHECK = Check(
    name="landmarks",
    title="Landmarks in order",
    level=Level.BEAT,
    measure=misplaced_landmarks,
    unit="1",
    limits=Limits(fail_above=0.0, basis="a beat's own order"),
    reason="{value:.0f} of the beat's landmarks stand in the wrong order",
    remedy="none; the beat is left out",
    required=True,
)
