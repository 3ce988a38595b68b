"""Steadiness: a run called steady stays where it is.

A median over a run that wanders is the state of no moment: it is off by half of what changed. Breathing is not a trend, so the change is
the median of slopes (Theil-Sen) and counts only where the means of blocks as long as a slow breath trend as well. Mann-Kendall on beats
gives 24-34 % false alarms, because beats are correlated, and flags half a millilitre (computed).
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import STEADY_STATE
from checks.subject import RunSubject
from metrics.arrays import robust_sd
from metrics.stats.trends import is_trend_by_blocks, trend_per_s

BREATH_S = 5.0
IRREGULAR = 0.10
"""Of cycle length: beyond that filling varies so much from beat to beat that a trend in four breaths is suspect at most; house default."""


def change_of_preload(subject: RunSubject) -> Measured:
    """Return by how much EDV changes over the run, over its median; 0 where breaths do not bear it out, NaN below four; shape ()."""
    beats = subject.known_beats()
    chosen = np.isfinite(beats.edv_ml) & (True if subject.accepted is None else subject.accepted)
    time_s, edv_ml = subject.start_s()[chosen], beats.edv_ml[chosen]
    # a run of twenty seconds holds four breaths only as long as its beats do
    trends = is_trend_by_blocks(time_s, edv_ml, min(BREATH_S, float(np.ptp(time_s)) / 4.0) if time_s.size >= 12 else BREATH_S)
    if trends is None:
        return single(np.nan)
    change = abs(trend_per_s(time_s, edv_ml)) * float(np.ptp(time_s)) / float(np.median(edv_ml))
    is_regular = robust_sd(beats.rr_s) < IRREGULAR * float(np.nanmedian(beats.rr_s))
    return Measured(np.array(change if trends else 0.0), corroborated=np.array(is_regular))


CHECK = Check(
    name="steadiness",
    title="A steady run is steady",
    level=Level.RUN,
    measure=change_of_preload,
    unit="1",
    limits=Limits(suspect_above=0.03, fail_above=0.05, basis="house default; stroke work and EDP change twice as much as EDV, so 5 % off"),
    reason="end-diastolic volume changes by {value:.0%} over a run called steady (limit {limit:.0%})",
    remedy="send a stretch in which the patient was stable, or name the manoeuvre that was under way",
    spoils=STEADY_STATE,
    run_kinds=("steady",),
    after_beats=True,
)
