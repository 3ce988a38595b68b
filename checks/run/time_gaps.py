"""Time gaps: how much of the run the file holds no value for.

Beats that hold a gap are rejected one by one, and what is left is no worse for it: samples go missing by when, not by what they show. So
the run fails only where fewer beats than make a median are free of gaps.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured
from checks.run.beats_accepted import LEAST_BEATS
from checks.spoils import EVERYTHING
from checks.subject import RunSubject


def missing_share(subject: RunSubject) -> Measured:
    """Return the share of missing samples, and when the first stretch begins; shape (). Borne out where too few whole beats are left."""
    signals = subject.known_signals()
    at_s = float(np.argmax(signals.missing)) / signals.sampling_rate_hz if signals.missing.any() else np.nan
    left = int(np.sum(~subject.gaps))
    return Measured(np.array(signals.missing.mean()), np.array(at_s), np.array(left < LEAST_BEATS))


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
    revision=2,
)
