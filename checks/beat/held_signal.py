"""Held signal: a channel that repeats its last value in the midst of a beat, and goes on from another.

A transmitter out of reach or a lost packet leaves a piece of a held value. It is no plateau: a heart, whatever the converter, arrives at
one and leaves it gently, so a piece counts only from 0.1 s on and where it begins or ends with a jump of more than three steps of the
converter and 3 % of what the channel moves by, lies at an edge of the run, or outlasts any diastole. Where it lies decides what it moves,
an end-systolic pressure by tens of mmHg, so the beat goes.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured
from checks.subject import RunSubject


def held_seconds(subject: RunSubject) -> Measured:
    """Return the longest piece of each beat that holds one pressure or volume, seconds, and when it begins; shape (n_beats,)."""
    (pressure_s, pressure_at_s), (volume_s, volume_at_s) = (subject.longest_standing(name) for name in ("pressure", "volume"))
    return Measured(np.maximum(pressure_s, volume_s), np.where(volume_s > pressure_s, volume_at_s, pressure_at_s))


CHECK = Check(
    name="held-signal",
    title="No piece of a held value inside the beat",
    level=Level.BEAT,
    measure=held_seconds,
    unit="s",
    limits=Limits(fail_above=0.020, basis="house default, as for missing samples: about what dP/dt is read over"),
    reason="pressure or volume repeats its last value for {value:.3f} s inside the beat (limit {limit:.3f} s)",
    remedy="none for the beat; look for a loose contact or lost packets",
)
