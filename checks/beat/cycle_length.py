"""Cycle length: a premature beat, and the one after it.

A premature beat fills less and contracts differently; the one after it is potentiated. RR alone is only suspect, because breathing
moves it in health: a fail needs a second sign, a pause after the beat or a dP/dt maximum weak beside its neighbours'. In declared
atrial fibrillation no beat fails by RR. The beat *before* a premature one is cut short but its systole is sound, so it stays.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured
from checks.subject import RunSubject
from metrics.arrays import BoolArray, FloatArray, median_before, median_of_known, running_median

NEIGHBOURS = 8
PAUSE = 1.20
WEAK_DPDT = 0.80
"""A second sign: a pause 20 % longer than usual, or dP/dt maximum 20 % below its neighbours' median (house default)."""


def preceding_ratio(rr_s: FloatArray) -> FloatArray:
    """Return the interval before each beat over the median of the 8 intervals before that one; NaN for the first; shape (n_beats,).

    Near the beginning, where fewer than three lie before it, the median of the run stands in.

    >>> preceding_ratio(np.array([1.0, 1.0, 1.0, 1.0, 0.6, 1.4])).round(2).tolist()
    [nan, 1.0, 1.0, 1.0, 1.0, 0.6]
    """
    if rr_s.size == 0:
        return np.empty(0)
    usual = median_before(rr_s, NEIGHBOURS)
    usual[:3] = median_of_known(rr_s)
    ratio = rr_s / usual
    return np.concatenate([[np.nan], ratio[:-1]])


def has_second_sign(subject: RunSubject) -> BoolArray:
    """Return where a pause follows the beat or its dP/dt maximum is weak, shape (n_beats,); nowhere in atrial fibrillation."""
    beats = subject.known_beats()
    if subject.facts.rhythm == "atrial-fibrillation" or len(beats) == 0:
        return np.zeros(len(beats), dtype=bool)
    usual = median_before(beats.rr_s, NEIGHBOURS)
    usual[:3] = median_of_known(beats.rr_s)
    # a short beat lowers its own reference; the interval before the premature one is the honest one
    pause = beats.rr_s / np.concatenate([usual[:1], usual[:-1]]) > PAUSE
    weak = beats.dpdt_max_mmhg_per_s < WEAK_DPDT * running_median(beats.dpdt_max_mmhg_per_s, 2 * NEIGHBOURS + 1)
    borne_out: BoolArray = pause | weak
    return borne_out


def prematurity(subject: RunSubject) -> Measured:
    """Return the interval before each beat over its usual length, borne out by a second sign; shape (n_beats,)."""
    return Measured(preceding_ratio(subject.known_beats().rr_s), subject.start_s(), has_second_sign(subject))


def prematurity_before(subject: RunSubject) -> Measured:
    """Return the prematurity of the beat before each where that is borne out, else 1; shape (n_beats,)."""
    ratio = preceding_ratio(subject.known_beats().rr_s)
    told = np.where(has_second_sign(subject) & np.isfinite(ratio), ratio, 1.0)
    return Measured(np.concatenate([[1.0], told[:-1]])[: told.size], subject.start_s())


PREMATURE = Check(
    name="cycle-length",
    title="Beat not premature",
    level=Level.BEAT,
    measure=prematurity,
    unit="1",
    limits=Limits(suspect_below=0.80, fail_below=0.80, basis="0.80 of the 8 before, with a second sign; house default"),
    reason="the beat comes after {value:.0%} of the usual interval (limit {limit:.0%})",
    remedy="none; a premature beat is left out",
)
AFTER = Check(
    name="post-premature",
    title="Beat not after a premature one",
    level=Level.BEAT,
    measure=prematurity_before,
    unit="1",
    limits=Limits(fail_below=0.80, basis="0.80 of the 8 before, with a second sign; house default"),
    reason="the beat before came after {value:.0%} of the usual interval (limit {limit:.0%}), so this one is potentiated",
    remedy="none; the beat after a premature one is left out",
)
