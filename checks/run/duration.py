"""Duration: the run lasts as long as its clock times say.

Rate and time column can agree and both be wrong; only a second clock shows it. Clock times are often written in whole seconds, so one
second is taken out first.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import TIME_SCALE
from checks.subject import RunSubject

WHOLE_SECOND_S = 1.0


def duration_ratio(subject: RunSubject) -> float:
    """Return declared over recorded duration, above 1 where the samples' clock is too fast; NaN undeclared."""
    declared_s = subject.facts.duration_s
    if declared_s is None or declared_s <= 0.0:
        return float("nan")
    signals = subject.known_signals()
    return declared_s * signals.sampling_rate_hz / signals.pressure_mmhg.size


def duration_error(subject: RunSubject) -> Measured:
    """Return how much recorded and declared duration differ beyond one second, over the declared one; shape (); NaN undeclared."""
    departure = abs(1.0 / duration_ratio(subject) - 1.0)
    return single(np.nan if np.isnan(departure) else max(departure - WHOLE_SECOND_S / float(subject.facts.duration_s or np.nan), 0.0))


CHECK = Check(
    name="duration",
    title="Recorded against declared duration",
    level=Level.RUN,
    measure=duration_error,
    unit="1",
    limits=Limits(suspect_above=0.02, fail_above=0.05, basis="house default"),
    reason="the run is {value:.0%} longer or shorter than started_at and ended_at say (limit {limit:.0%})",
    remedy="confirm the sampling rate, the clock times, and that the whole run was exported",
    spoils=TIME_SCALE,
)
