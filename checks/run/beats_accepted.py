"""Beats accepted: enough of a run's beats are sound for it to speak for the heart.

A beat is rejected for itself, but where most of them are, what is left was chosen by chance: with white noise of 30 mmHg some three
beats in ten slip through every check, and none of their numbers is right (computed). The median of a minority is no median of the run.
Beats that were lost with their samples, or while a channel stood still, say nothing against the others, so they do not count.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import EVERYTHING
from checks.subject import RunSubject

LEAST_BEATS = 5
"""As many as a breath holds at rest: the fewest whose median stands for a heart that breathes; house default."""


def accepted_share(subject: RunSubject) -> Measured:
    """Return the share of a run's beats that were accepted, shape (); beats rejected while samples are missing or held do not count.

    NaN where no beat counts.
    """
    if subject.accepted is None or subject.accepted.size == 0:
        return single(np.nan)
    held = [subject.longest_standing(name)[0] > 0.0 for name in ("pressure", "volume")]
    counts = subject.accepted | ~(subject.gaps | held[0] | held[1])
    return single(float(np.mean(subject.accepted[counts])) if counts.any() else np.nan)


CHECK = Check(
    name="beats-accepted",
    title="Most beats are sound",
    level=Level.RUN,
    measure=accepted_share,
    unit="1",
    limits=Limits(suspect_below=0.5, fail_below=1.0 / 3.0, basis="house default: a third"),
    reason="only {value:.0%} of the run's beats are sound (limit {limit:.0%})",
    remedy="record the run again; the beats' own reasons say what was wrong",
    spoils=EVERYTHING,
    after_beats=True,
)
