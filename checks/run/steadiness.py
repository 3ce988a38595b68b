"""Steadiness: a run called steady stays where it is.

A median over a run that wanders is the state of no moment: it is off by half of what changed. Breathing is not a trend: the best sine at
a rate of breathing is taken out first, the change is the median of slopes (Theil-Sen), and it counts only where the means of blocks as
long as a slow breath trend as well. Mann-Kendall on beats gives 24-34 % false alarms, because beats are correlated, and flags half a
millilitre (computed). In an uneven rhythm each beat fills for as long as the cycle before it lasts; what that explains is taken out too.
End-diastolic pressure and stroke work are looked at by themselves as well: they change two or three times as much as the volume they
change with.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import END_DIASTOLE, STEADY_STATE, STROKE_WORK
from checks.stakes import edp_at_stake_mmhg
from checks.subject import RunSubject, once_a_run
from metrics.arrays import FloatArray, median_of_known, robust_sd
from metrics.stats.trends import is_trend_by_blocks, trend_per_s, without_swing

BREATH_S = 5.0
BREATHS_HZ = np.linspace(0.1, 0.5, 41)
"""A run of twenty seconds holds no whole number of breaths, and what is left over looks like a trend: 4 % of EDV (computed)."""

IRREGULAR = 0.10
"""Of cycle length: beyond that filling varies so much from beat to beat that a trend is suspect at most; house default."""

LEAST_BREATHS_IRREGULAR = 8
"""In such a rhythm four breaths tell of no trend: three of 28 sound hearts changed by 4 to 8 % in 18 s (computed)."""


@once_a_run
def change_of_preload(subject: RunSubject) -> Measured:
    """Return by how much EDV changes over the run, over its median; 0 where breaths do not bear it out, NaN below four; shape ()."""
    edv_ml = subject.known_beats().edv_ml
    return _change_over(subject, edv_ml, median_of_known(edv_ml))


def change_of_edp(subject: RunSubject) -> Measured:
    """Return how far a change over the run puts the median of EDP off, over it; 0 where EDV does not change with it; shape ()."""
    return _off_with_preload(subject, subject.known_beats().edp_mmhg, edp_at_stake_mmhg(subject))


def change_of_work(subject: RunSubject) -> Measured:
    """Return how far a change over the run puts the median of stroke work off, over it; 0 where EDV does not change with it; shape ()."""
    work_mmhg_ml = subject.known_beats().sw_mmhg_ml
    return _off_with_preload(subject, work_mmhg_ml, median_of_known(work_mmhg_ml))


def _off_with_preload(subject: RunSubject, values: FloatArray, size: float) -> Measured:
    """Return half the change of the values, by which their median is off, 0 where end-diastolic volume shows no trend."""
    preload, found = change_of_preload(subject), _change_over(subject, values, size)
    return Measured(np.where(preload.value == 0.0, 0.0, 0.5 * found.value), corroborated=found.corroborated)


def _change_over(subject: RunSubject, values: FloatArray, size: float) -> Measured:
    beats = subject.known_beats()
    filling_s = np.concatenate([[np.nan], beats.rr_s[:-1]])
    chosen = np.isfinite(values + filling_s) & (True if subject.accepted is None else subject.accepted)
    time_s = subject.start_s()[chosen]
    values = without_swing(time_s, _evened(values[chosen], filling_s[chosen]), BREATHS_HZ)
    is_regular = robust_sd(beats.rr_s) < IRREGULAR * median_of_known(beats.rr_s)
    if not is_regular and time_s.size and float(np.ptp(time_s)) < LEAST_BREATHS_IRREGULAR * BREATH_S:
        return single(np.nan)
    # a run of twenty seconds holds four breaths only as long as its beats do
    trends = is_trend_by_blocks(time_s, values, min(BREATH_S, float(np.ptp(time_s)) / 4.0) if time_s.size >= 12 else BREATH_S)
    if trends is None:
        return single(np.nan)
    change = abs(trend_per_s(time_s, values)) * float(np.ptp(time_s)) / size if trends else 0.0
    return Measured(np.array(change), corroborated=np.array(is_regular))


def _evened(values: FloatArray, filling_s: FloatArray) -> FloatArray:
    """Return the values without what the cycle before explains, by the steps from beat to beat, which hold no trend; same shape.

    >>> filling = np.array([0.8, 1.0, 0.8, 1.2, 0.9])
    >>> np.round(_evened(100.0 + 10.0 * filling, filling), 6).tolist()
    [109.0, 109.0, 109.0, 109.0, 109.0]
    """
    if values.size < 2:
        return values
    steps, cycles = np.diff(values), np.diff(filling_s)
    squares = float(np.sum(cycles**2))
    per_s = float(np.sum(steps * cycles)) / squares if squares > 0.0 else 0.0
    return np.asarray(values - per_s * (filling_s - float(np.median(filling_s))), dtype=np.float64)


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
_LIMITS = Limits(suspect_above=0.035, fail_above=0.05, basis="house default: no index may be off by more than 5 %")
EDP = Check(
    name="edp-steadiness",
    title="End-diastolic pressure is steady in a steady run",
    level=Level.RUN,
    measure=change_of_edp,
    unit="1",
    limits=_LIMITS,
    reason="a change of preload over a run called steady puts end-diastolic pressure off by {value:.0%} (limit {limit:.0%})",
    remedy="send a stretch in which the patient was stable, or name the manoeuvre that was under way",
    spoils=END_DIASTOLE,
    run_kinds=("steady",),
    after_beats=True,
)
WORK = Check(
    name="work-steadiness",
    title="Stroke work is steady in a steady run",
    level=Level.RUN,
    measure=change_of_work,
    unit="1",
    limits=_LIMITS,
    reason="a change of preload over a run called steady puts stroke work off by {value:.0%} (limit {limit:.0%})",
    remedy="send a stretch in which the patient was stable, or name the manoeuvre that was under way",
    spoils=STROKE_WORK,
    run_kinds=("steady",),
    after_beats=True,
)
