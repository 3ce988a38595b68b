"""Rhythm as declared: in sinus rhythm the beats come evenly, but for breathing.

Fibrillation undeclared turns on gates that sinus rhythm has and fibrillation has not. Sinus arrhythmia may vary cycle length by 15 % in
health, but with the breath; so the best sine at a rate of breathing is taken out first, as is a trend, and the spread of what is left is
robust, so that a few premature beats do not count.

It asks and never fails: fibrillation leaves 0.07 to 0.13 over 18 s, and deep uneven breathing in sinus rhythm up to 0.2 (computed).
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.subject import RunSubject
from metrics.arrays import robust_sd, running_median
from metrics.stats.trends import is_swing, swing

RATES_HZ = np.linspace(0.1, 0.5, 41)
LEAST_BEATS = 12
NEIGHBOURS = 9
PREMATURE_SHARE = 0.20
"""A cycle that far from its neighbours' median does not tell of breathing: 20 % is customary for premature beats (from memory)."""

MOST_ARE_USUAL = 0.75
"""A rhythm with more odd cycles than that has no usual one to leave them out of; house default."""


def irregularity(subject: RunSubject) -> Measured:
    """Return the robust spread of cycle length that breathing does not explain, over its median; shape ().

    NaN unless sinus rhythm is declared.
    """
    if subject.facts.rhythm != "sinus":
        return single(np.nan)
    rr_s = subject.known_beats().rr_s
    known = np.isfinite(rr_s)
    if known.sum() < LEAST_BEATS:
        return single(np.nan)
    rr_s = rr_s[known]
    around_s = running_median(rr_s, NEIGHBOURS)
    usual = np.abs(rr_s / around_s - 1.0) < PREMATURE_SHARE
    few_are_not = usual.mean() > MOST_ARE_USUAL
    _, explained, left = swing(subject.start_s()[known], rr_s, RATES_HZ, usual if few_are_not else None)
    breathes = is_swing(explained, int(usual.sum()) if few_are_not else rr_s.size)
    return single(robust_sd(left[int(np.argmax(explained))] if breathes else rr_s - around_s) / float(np.median(rr_s)))


CHECK = Check(
    name="rhythm-as-declared",
    title="Rhythm as declared",
    level=Level.RUN,
    measure=irregularity,
    unit="1",
    limits=Limits(
        suspect_above=0.08,
        basis="in sinus rhythm cycle length varies by 50 ms, in the fittest by 100 ms in a second (Nunan 2010, Pacing Clin Electrophysiol"
        " 33:1407), in fibrillation by about 0.2 (both from memory)",
    ),
    reason="cycle length varies irregularly by {value:.0%}, while sinus rhythm was declared (limit {limit:.0%})",
    remedy="confirm the rhythm in acquisition.json",
)
