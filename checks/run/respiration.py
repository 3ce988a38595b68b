"""Respiration as declared: while the breath is held, filling does not swing at the rate of breathing.

Values at apnoea and values over breaths are different measurements; medians over whole breaths remain right, so a run that breathes
where a held breath is declared is queried and nothing of it withheld. Adults at rest breathe 12-20 times a minute; 6-30 are looked at.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.subject import RunSubject
from metrics.stats.trends import is_swing, swing

SLOWEST_HZ, FASTEST_HZ = 0.1, 0.5
RATES = 41
LEAST_BEATS = 12
LEAST_BREATHS = 2.0


def undeclared_breathing(subject: RunSubject) -> Measured:
    """Return how far EDV swings from trough to crest over its median, 0 where it does not; shape ().

    NaN unless the breath is declared held, and in declared fibrillation.
    """
    if subject.facts.respiration != "held" or subject.facts.rhythm == "atrial-fibrillation":
        return single(np.nan)
    beats = subject.known_beats()
    chosen = np.isfinite(beats.edv_ml) & (True if subject.accepted is None else subject.accepted)
    time_s, edv_ml = subject.start_s()[chosen], beats.edv_ml[chosen]
    if edv_ml.size < LEAST_BEATS:
        return single(np.nan)
    slowest = max(SLOWEST_HZ, LEAST_BREATHS / float(np.ptp(time_s)))
    fastest = min(FASTEST_HZ, 0.4 / float(np.median(beats.rr_s)))
    if not fastest > slowest:
        return single(np.nan)
    amplitude, explained, _ = swing(time_s, edv_ml, np.linspace(slowest, fastest, RATES))
    largest = 2.0 * float(amplitude[int(np.argmax(explained))]) / float(np.median(edv_ml))
    return single(largest if is_swing(explained, edv_ml.size) else 0.0)


CHECK = Check(
    name="respiration-as-declared",
    title="Respiration as declared",
    level=Level.RUN,
    measure=undeclared_breathing,
    unit="1",
    limits=Limits(suspect_above=0.03, fail_above=0.06, basis="house default; end-expiratory and mean values then differ by 3 % and more"),
    reason="end-diastolic volume swings by {value:.0%} as with breathing, while the breath was declared held (limit {limit:.0%})",
    remedy="confirm whether the breath was held in this run",
    run_kinds=("steady",),
    after_beats=True,
)
