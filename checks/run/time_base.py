"""Time base: time stamps only ever go forward.

A recorder whose clock stepped back, or two files pasted together, leaves samples whose order nobody knows; no beat can be trusted.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import EVERYTHING
from checks.subject import RunSubject


def backward_steps(subject: RunSubject) -> float:
    """Return how many of the pressure channel's time stamps lie before the one above them.

    0 where the declared rate is the time base, NaN where no pressure was read.
    """
    if subject.recording is None or "pressure" not in subject.recording.channels:
        return float("nan")
    time_s = subject.recording.channels["pressure"].time_s
    return 0.0 if time_s is None else float(np.sum(np.diff(time_s) < 0.0))


def time_backwards(subject: RunSubject) -> Measured:
    """Return the count of backward steps, and when the first occurs; shape ()."""
    steps = backward_steps(subject)
    at_s = np.nan
    if steps > 0.0 and subject.recording is not None:
        time_s = subject.recording.channels["pressure"].time_s
        if time_s is not None:
            at_s = float(time_s[int(np.argmax(np.diff(time_s) < 0.0))])
    return single(steps, at_s)


CHECK = Check(
    name="time-base",
    title="Time runs forward",
    level=Level.RUN,
    measure=time_backwards,
    unit="1",
    limits=Limits(fail_above=0.0, basis="a fact"),
    reason="time runs backwards at {value:.0f} samples",
    remedy="export the run again from the recorder, in the order it was recorded",
    spoils=EVERYTHING,
)
