"""Sampling rate: the declared rate is the one the time stamps show."""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import TIME_SCALE
from checks.subject import RunSubject
from metrics.signals.calibrate import observed_rate_hz


def rate_error(subject: RunSubject) -> Measured:
    """Return |declared / shown - 1| for the pressure channel, shape (); NaN without time stamps."""
    channel = subject.channel("pressure")
    if channel.time_s is None:
        return single(np.nan)
    return single(abs(channel.sampling_rate_hz / observed_rate_hz(channel) - 1.0))


CHECK = Check(
    name="sampling-rate",
    title="Declared sampling rate against time stamps",
    level=Level.RUN,
    measure=rate_error,
    unit="1",
    limits=Limits(suspect_above=0.005, fail_above=0.02, basis="house default; a recorder's clock is far better than 0.5 %"),
    reason="the declared sampling rate differs from the time stamps by {value:.1%} (limit {limit:.1%})",
    remedy="confirm the recorder's sampling rate and send it in runs[].sampling_rate_hz",
    spoils=TIME_SCALE,
)
