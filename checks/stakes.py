"""Against what a shift of a channel is held: at rest what is read from it, in an occlusion its range in the window, which a slope needs."""

from __future__ import annotations

import numpy as np

from checks.subject import RunSubject
from metrics.arrays import FloatArray, running_median

LEAST_EDP_MMHG = 5.0
"""A smaller end-diastolic pressure is held for this one: 5 % of it is what the best transducers resolve; house default."""

RESOLVED_MMHG = 1.0
"""A smaller shift is within what a transducer is good to (ANSI/AAMI BP22, from memory), and within what breathing leaves in few beats."""


def pressure_at_stake_mmhg(subject: RunSubject) -> float:
    """Return the median peak pressure of a run at rest, its range in the window of a preload-reduction run; NaN without such beats."""
    pmax_mmhg = subject.known_beats().pmax_mmhg
    return _median_at_rest(subject, pmax_mmhg) if subject.window is None else _range_in_window(subject, pmax_mmhg)


def edp_at_stake_mmhg(subject: RunSubject) -> float:
    """Return the median end-diastolic pressure at rest, at least `LEAST_EDP_MMHG`."""
    return float(np.fmax(_median_at_rest(subject, subject.known_beats().edp_mmhg), LEAST_EDP_MMHG))


def volume_at_stake_ml(subject: RunSubject) -> float:
    """Return the median end-diastolic volume of a run at rest, the range of end-systolic volume in the window of a preload-reduction run.

    NaN without such beats.
    """
    beats = subject.known_beats()
    return _median_at_rest(subject, beats.edv_ml) if subject.window is None else _range_in_window(subject, beats.esv_ml)


def esv_at_stake_ml(subject: RunSubject) -> float:
    """Return the median end-systolic volume at rest, NaN without such beats."""
    return _median_at_rest(subject, subject.known_beats().esv_ml)


def _median_at_rest(subject: RunSubject, values: FloatArray) -> float:
    found = values[subject.at_rest & np.isfinite(values)]
    return float(np.median(found)) if found.size else float("nan")


def _range_in_window(subject: RunSubject, values: FloatArray) -> float:
    """Return the range over the accepted beats, after a median of three, so that one noisy beat is no range."""
    chosen = subject.in_window if subject.accepted is None else subject.in_window & subject.accepted
    steadied = running_median(values[chosen], 3)
    return float(np.ptp(steadied)) if steadied.size > 1 else float("nan")
