"""Heart rate agreement: the beats come as often as the site's own monitor said.

A second witness for the time base: a rate that is wrong by a factor shows here even when no clock times were sent. Heart rate wanders
by some 10 % in health, so only gross differences count. In declared atrial fibrillation the few beats around an occlusion may come a
fifth more or less often than the monitor's mean (one in six simulated runs), so there it is suspect at most.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured
from checks.spoils import TIME_SCALE
from checks.subject import RunSubject

LEAST_BEATS = 3


def heart_rate_ratio(subject: RunSubject) -> float:
    """Return measured over declared heart rate; NaN undeclared or with fewer than three beats.

    By the accepted beats where there are three of them: beside a gap or a held piece a beat may be missed, and the one before be too long.
    """
    declared = subject.facts.heart_rate_per_min
    rr_s = subject.known_beats().rr_s
    if subject.accepted is not None and int(subject.accepted.sum()) >= LEAST_BEATS:
        rr_s = rr_s[subject.accepted]
    if declared is None or declared <= 0.0 or rr_s.size < LEAST_BEATS:
        return float("nan")
    return 60.0 / float(np.median(rr_s)) / declared


def heart_rate_gap(subject: RunSubject) -> Measured:
    """Return |measured / declared - 1| of heart rate, shape (); NaN undeclared or with fewer than three beats.

    Borne out but in a preload-reduction run of a fibrillating heart.
    """
    is_steady = subject.facts.rhythm != "atrial-fibrillation" or subject.facts.kind != "preload-reduction"
    return Measured(np.array(abs(heart_rate_ratio(subject) - 1.0)), corroborated=np.array(is_steady))


CHECK = Check(
    name="heart-rate-agreement",
    title="Heart rate against the declared one",
    level=Level.RUN,
    measure=heart_rate_gap,
    unit="1",
    limits=Limits(suspect_above=0.10, fail_above=0.20, basis="house default"),
    reason="the beats' rate differs from the declared heart rate by {value:.0%} (limit {limit:.0%})",
    remedy="confirm the heart rate and the sampling rate of this run",
    spoils=TIME_SCALE,
    after_beats=True,
    revision=2,
)
