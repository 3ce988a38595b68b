"""Loop closure: a loop ends where it began.

A gap means a volume that drifts or jumps, or a beat cut at the wrong sample. In a preload-reduction run the loop is *meant* to move, in
a breathing one it moves to and fro: so the run's own trend is taken out, and only what stands out of the beat-to-beat spread (more
than 4 robust SD) counts. 10 % of SV without that would reject 30 of 64 beats of an irregular heart (measured on simulated hearts).

The trend is the running median. A preload fall has a corner at its onset and bends afterwards, so in such a run a gap also counts as
the run's own when the four beats after it, or the four before it, lead up to it in a straight line; a jump answers to neither.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured
from checks.subject import RunSubject
from metrics.arrays import FloatArray, robust_sd, running_median

TREND_BEATS = 7
LEADING_BEATS = 4
SPREAD_SD = 4.0
IRREGULAR_CV = 0.10
RR_NEIGHBOURS = 9
ODD_INTERVAL = 0.08
"""Breathing moves RR by less in most adults, a premature beat by more; house default."""


def closure_gap(subject: RunSubject) -> Measured:
    """Return the gap of each loop beyond the run's trend as a fraction of its SV where it stands out of the spread, else 0.

    Shape (n_beats,). NaN in declared atrial fibrillation, in a run whose RR varies by more than 10 % (robust CV), where the interval
    before or after the loop is odd by more than 8 %, after the usable window of a preload-reduction run, and where SV is not positive.
    """
    beats, signals = subject.known_beats(), subject.known_signals()
    if len(beats) == 0:
        return Measured(np.empty(0))
    gap_ml = signals.volume_ml[beats.end] - signals.volume_ml[beats.start]
    beyond_ml = np.abs(gap_ml - running_median(gap_ml, TREND_BEATS))
    if subject.facts.kind == "preload-reduction":
        led_ml = np.minimum(np.abs(gap_ml - led_up_to(gap_ml)), np.abs(gap_ml - led_up_to(gap_ml[::-1])[::-1]))
        beyond_ml = np.fmin(beyond_ml, led_ml)
    # half the values lie below the median of |x|, and 1.4826 makes that the SD of a normal sample
    spread_ml = 1.4826 * float(np.median(beyond_ml))
    usual_sv_ml = np.maximum(beats.sv_ml, float(np.median(beats.sv_ml)))
    share = np.where(usual_sv_ml > 0.0, np.where(beyond_ml > SPREAD_SD * spread_ml, beyond_ml, 0.0), np.nan)
    share /= np.where(usual_sv_ml > 0.0, usual_sv_ml, 1.0)
    is_irregular = robust_sd(beats.rr_s) / float(np.median(beats.rr_s)) > IRREGULAR_CV
    if is_irregular or subject.facts.rhythm == "atrial-fibrillation":
        share[:] = np.nan
    # a loop's ends are filled by the intervals before and after it: an odd one moves an end as a volume drift would
    odd = np.abs(beats.rr_s / running_median(beats.rr_s, RR_NEIGHBOURS) - 1.0) > ODD_INTERVAL
    share[odd | np.append(False, odd[:-1])] = np.nan
    if subject.window is not None:
        # after the window the ventricle refills as fast as the deflation lets it: no trend to hold a gap against
        place = np.arange(len(beats))
        share[(place > subject.window.last_at) | ((place == subject.window.last_at) & (gap_ml > 0.0))] = np.nan
    return Measured(share, subject.start_s())


def led_up_to(gap_ml: FloatArray) -> FloatArray:
    """Return where the straight line through the four gaps after each one leads, shape of ``gap_ml``; NaN for the last four.

    The line of Theil and Sen (Sen 1968, J Am Stat Assoc 63:1379, from memory), which one stray gap among the four does not turn.

    >>> led_up_to(np.array([-9.0, -8.0, -7.0, -6.0, -5.0])).tolist()
    [-9.0, nan, nan, nan, nan]
    """
    led = np.full(gap_ml.size, np.nan)
    if gap_ml.size <= LEADING_BEATS:
        return led
    after = np.lib.stride_tricks.sliding_window_view(gap_ml, LEADING_BEATS)[1:]
    step = np.arange(1, LEADING_BEATS + 1)
    first, second = np.triu_indices(LEADING_BEATS, 1)
    slope = np.median((after[:, second] - after[:, first]) / (step[second] - step[first]), axis=1)
    led[: after.shape[0]] = np.median(after - slope[:, None] * step, axis=1)
    return led


CHECK = Check(
    name="loop-closure",
    title="The loop closes",
    level=Level.BEAT,
    measure=closure_gap,
    unit="1",
    limits=Limits(suspect_above=0.08, fail_above=0.15, basis="house default; spread rule after simulated irregular and breathing hearts"),
    reason="the loop ends {value:.0%} of stroke volume from where it began, beyond the run's own trend (limit {limit:.0%})",
    remedy="none for the beat; ask whether the catheter moved",
)
