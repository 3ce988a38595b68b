"""Preload adequacy: a slope needs enough beats over enough load.

Gate on beats and load range only. A gate on r2 or on the interval's width would remove failing (flat) hearts selectively: their slopes
are published with the interval they have. With a fall of 10 % over 5 beats a slope of 2.5 came out at 1.9 +/- 0.9 (computed).

Stroke work falls with load along a curve, steeper at its upper end: over a fall of 23 % its slope came out 12 % above that over 37 %,
without any noise (computed). So it needs more range than the end-systolic line does.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import PRELOAD_SLOPES, WORK_SLOPES
from checks.subject import RunSubject
from metrics.arrays import running_median


def load_fall(subject: RunSubject) -> Measured:
    """Return how far EDV falls from the window's first to its lowest beat, as a fraction, and when the window begins; shape ().

    On a median of three accepted beats, so that one noisy beat is no load range; NaN without accepted beats in the window.
    """
    beats = subject.known_beats()
    chosen = subject.in_window if subject.accepted is None else subject.in_window & subject.accepted
    edv_ml = running_median(beats.edv_ml[chosen], 3)
    if edv_ml.size == 0:
        return single(np.nan)
    fall = 1.0 - float(edv_ml.min()) / float(edv_ml.max())
    return single(fall, subject.start_s()[chosen][0])


def window_beats(subject: RunSubject) -> Measured:
    """Return how many accepted beats lie in the usable window, shape ()."""
    chosen = subject.in_window if subject.accepted is None else subject.in_window & subject.accepted
    return single(chosen.sum())


ADEQUACY = Check(
    name="preload-adequacy",
    title="Preload falls far enough",
    level=Level.RUN,
    measure=load_fall,
    unit="1",
    limits=Limits(suspect_below=0.20, fail_below=0.12, basis="house default 20 %; below 12 % slopes scatter by a third"),
    reason="end-diastolic volume falls by only {value:.0%} in the usable window (limit {limit:.0%})",
    remedy="repeat the manoeuvre with a fuller occlusion",
    spoils=PRELOAD_SLOPES,
    run_kinds=("preload-reduction",),
    after_beats=True,
)
WORK_ADEQUACY = Check(
    name="preload-adequacy-work",
    title="Preload falls far enough for stroke work",
    level=Level.RUN,
    measure=load_fall,
    unit="1",
    limits=Limits(
        suspect_below=0.20, fail_below=0.15, basis="house default 20 %; occlusions reduce preload by 30 % (Sharir 1994, read in abstract)"
    ),
    reason="end-diastolic volume falls by only {value:.0%} in the usable window, and stroke work along a curve (limit {limit:.0%})",
    remedy="repeat the manoeuvre with a fuller occlusion",
    spoils=WORK_SLOPES,
    run_kinds=("preload-reduction",),
    after_beats=True,
)
BEATS = Check(
    name="preload-beats",
    title="Enough beats while preload falls",
    level=Level.RUN,
    measure=window_beats,
    unit="1",
    limits=Limits(suspect_below=6.0, fail_below=5.0, basis="5-10 consecutive beats are usual (from memory)"),
    reason="only {value:.0f} accepted beats lie in the usable window (limit {limit:.0f})",
    remedy="repeat the manoeuvre more slowly, without premature beats",
    spoils=PRELOAD_SLOPES,
    run_kinds=("preload-reduction",),
    after_beats=True,
)
