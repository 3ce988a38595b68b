"""Sampling rate: the declared rate is the one the time stamps show.

Where they differ the time stamps are believed. Duration and heart rate bear witness: where they are near enough to what the stamps say, as
far as they can tell the two apart at all, the stamps are right, and only the declaration wants correcting. A difference of 5 % is what
matters for an index.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.run.clock_agreement import WANDER
from checks.run.duration import WHOLE_SECOND_S, duration_ratio
from checks.run.heart_rate_agreement import heart_rate_ratio
from checks.spoils import TIME_SCALE
from checks.subject import RunSubject
from metrics.signals.calibrate import observed_rate_hz


def rate_error(subject: RunSubject) -> Measured:
    """Return |declared / shown - 1| for the pressure channel, shape (); NaN without time stamps.

    Borne out unless duration or heart rate can tell and say that the stamps are right.
    """
    channel = subject.channel("pressure")
    if channel.time_s is None:
        return single(np.nan)
    shown_hz = observed_rate_hz(channel) if subject.signals is None else subject.signals.sampling_rate_hz
    ratio = channel.sampling_rate_hz / shown_hz
    return Measured(np.array(abs(ratio - 1.0)), corroborated=np.array(not are_stamps_right(subject, float(ratio))))


def are_stamps_right(subject: RunSubject, ratio: float) -> bool:
    """Return whether a witness that can tell 1 from ``ratio`` is nearer to 1, and none is nearer to the other."""
    apart = abs(float(np.log(ratio)))
    heard = []
    if subject.facts.duration_s:
        heard.append((duration_ratio(subject), WHOLE_SECOND_S / subject.facts.duration_s))
    if subject.facts.heart_rate_per_min and subject.beats is not None:
        heard.append((heart_rate_ratio(subject), WANDER))
    said = [abs(float(np.log(told))) < 0.5 * apart for told, spread in heard if told > 0.0 and spread < apart]
    return bool(said) and all(said)


CHECK = Check(
    name="sampling-rate",
    title="Declared sampling rate against time stamps",
    level=Level.RUN,
    measure=rate_error,
    unit="1",
    limits=Limits(
        suspect_above=0.005, fail_above=0.05, basis="5 % is what matters for an index; a recorder's clock is far better than 0.5 %"
    ),
    reason="the declared sampling rate differs from the time stamps by {value:.1%} (limit {limit:.1%})",
    remedy="confirm the recorder's sampling rate and send it in runs[].sampling_rate_hz",
    spoils=TIME_SCALE,
    revision=2,
)
