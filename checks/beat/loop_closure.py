"""Loop closure: a loop ends where it began.

A gap means a volume that drifts or jumps, or a beat cut at the wrong sample. In a preload-reduction run the loop is *meant* to move, in
a breathing one it moves to and fro: so the run's own trend is taken out, and only what stands out of the beat-to-beat spread (more
than 4 robust SD) counts. 10 % of SV without that would reject 30 of 64 beats of an irregular heart (measured on simulated hearts).
"""

from __future__ import annotations

import numpy as np

from checks.beat.cycle_length import PREMATURE, has_second_sign, preceding_ratio
from checks.check import Check, Level, Limits, Measured
from checks.subject import RunSubject
from metrics.arrays import FloatArray, robust_sd, running_median

TREND_BEATS = 7
SPREAD_SD = 4.0
IRREGULAR_CV = 0.10


def closure_gap(subject: RunSubject) -> Measured:
    """Return the gap of each loop beyond the run's trend as a fraction of its SV where it stands out of the spread, else 0.

    Shape (n_beats,). NaN in a run whose RR varies by more than 10 % (robust CV), beside a premature beat, and where SV is not positive.
    """
    beats, signals = subject.known_beats(), subject.known_signals()
    if len(beats) == 0:
        return Measured(np.empty(0))
    gap_ml = signals.volume_ml[beats.end] - signals.volume_ml[beats.start]
    beyond_ml = beyond_trend(gap_ml)
    stands_out = np.abs(beyond_ml) > SPREAD_SD * robust_sd(beyond_ml)
    share = np.where(beats.sv_ml > 0.0, np.where(stands_out, np.abs(beyond_ml), 0.0) / beats.sv_ml, np.nan)
    if robust_sd(beats.rr_s) / float(np.median(beats.rr_s)) > IRREGULAR_CV:
        share[:] = np.nan
    premature = (preceding_ratio(beats.rr_s) < (PREMATURE.limits.fail_below or 0.0)) & has_second_sign(subject)
    beside = premature | np.append(premature[1:], False) | np.append(False, premature[:-1])
    share[beside] = np.nan
    return Measured(share, subject.start_s())


def beyond_trend(gap_ml: FloatArray) -> FloatArray:
    """Return the gaps with the run's own trend (their running median) taken out, shape of ``gap_ml``.

    >>> beyond_trend(np.array([-5.0, -5.0, 9.0, -5.0])).tolist()
    [0.0, 0.0, 14.0, 0.0]
    """
    return gap_ml - running_median(gap_ml, TREND_BEATS)


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
