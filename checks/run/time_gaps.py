"""Time gaps: how much of the run the file holds no value for."""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import EVERYTHING
from checks.subject import RunSubject


def missing_share(subject: RunSubject) -> Measured:
    """Return the share of missing samples, and when the first stretch begins; shape ()."""
    signals = subject.known_signals()
    at_s = float(np.argmax(signals.missing)) / signals.sampling_rate_hz if signals.missing.any() else np.nan
    return single(signals.missing.mean(), at_s)


CHECK = Check(
    name="time-gaps",
    title="Missing samples of the whole run",
    level=Level.RUN,
    measure=missing_share,
    unit="1",
    limits=Limits(suspect_above=0.01, fail_above=0.25, basis="house default; beats that hold a gap are rejected one by one"),
    reason="{value:.1%} of the run's samples are missing (limit {limit:.0%})",
    remedy="export the run again; look for lost packets between recorder and disk",
    spoils=EVERYTHING,
)
