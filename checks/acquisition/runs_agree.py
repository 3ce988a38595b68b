"""Runs of one stage show one heart at rest, in steady runs and before the onset of an occlusion alike.

Within minutes, at one heart rate and in one stage, peak pressure and stroke volume at rest wander by about 5 % (breathing and arousal;
from memory of beat-to-beat recordings), so that two runs differ by 7 %; 18 % are 2.6 standard deviations of that. A pressure in cmH2O
called mmHg is larger by 36 %, a volume calibrated twice by 20 % and more. What the beats' own scatter explains (2.6 standard errors of two
medians) is taken out first, so that breathing and an irregular rhythm cost certainty and raise no alarm. Pressure counts from its own
end-diastolic value, which no zero moves. A run whose own checks spoil the value is left out; which of two runs is right cannot be told.
"""

from __future__ import annotations

from collections.abc import Callable
from itertools import combinations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import PRESSURE_GAIN, VOLUME_GAIN, VOLUME_OFFSET
from checks.subject import AcquisitionSubject, RunSubject
from metrics.arrays import FloatArray
from metrics.signals.beats import Beats

APART = 2.6
FEWEST_BEATS = 3
LIKE_RATES = 0.2
"""Runs whose heart rates differ by more are not compared: paced faster, a ventricle fills and ejects less with each beat."""

FOURFOLD = 4.0
"""Turns a difference of 5 % into one of 20 %, which fails; house default."""

MEDIAN_SE = 1.2533
"""Standard error of a median over that of a mean, for a normal sample (square root of half pi)."""


def apart(first: FloatArray, second: FloatArray) -> float:
    """Return by what fraction the larger of two medians exceeds the smaller beyond what scatter explains; NaN unless both are positive.

    >>> round(apart(np.full(9, 120.0), np.full(4, 163.2)), 3)
    0.36
    >>> apart(np.array([100.0, 120.0, 140.0]), np.array([110.0, 140.0, 170.0]))
    0.0
    """
    low, high = sorted((float(np.median(first)), float(np.median(second))))
    if not low > 0.0:
        return float("nan")
    chance = APART * MEDIAN_SE * float(np.hypot(*(np.std(values, ddof=1) / np.sqrt(values.size) for values in (first, second))))
    return max(high - low - chance, 0.0) / low


def largest_gap(subject: AcquisitionSubject, index: str, value_of: Callable[[Beats], FloatArray]) -> float:
    """Return the largest difference of a value at rest between two runs of a stage; NaN without two that can be compared."""
    stages: dict[str | None, list[tuple[FloatArray, FloatArray]]] = {}
    for run in subject.runs:
        if index not in subject.spoiled.get(run.facts.run, frozenset()):
            values, rr_s = _at_rest(run, value_of)
            if values.size >= FEWEST_BEATS:
                stages.setdefault(run.facts.stage, []).append((values, rr_s))
    pairs = [pair for runs in stages.values() for pair in combinations(runs, 2)]
    gaps = [apart(one, other) for (one, one_rr_s), (other, other_rr_s) in pairs if not apart(one_rr_s, other_rr_s) > LIKE_RATES]
    return max((gap for gap in gaps if np.isfinite(gap)), default=float("nan"))


def _at_rest(run: RunSubject, value_of: Callable[[Beats], FloatArray]) -> tuple[FloatArray, FloatArray]:
    """Return the value and the RR interval of the beats at rest that have both, shape (n,)."""
    if run.beats is None or run.accepted is None:
        return np.empty(0), np.empty(0)
    values, rr_s = value_of(run.beats)[run.at_rest], run.beats.rr_s[run.at_rest]
    known = np.isfinite(values) & np.isfinite(rr_s)
    return values[known], rr_s[known]


def pressure_gap(subject: AcquisitionSubject) -> Measured:
    """Return the largest difference in developed pressure at rest between two runs of a stage, a fraction, shape ()."""
    return single(largest_gap(subject, "Pmax", lambda beats: beats.pmax_mmhg - beats.edp_mmhg))


def stroke_volume_gap(subject: AcquisitionSubject) -> Measured:
    """Return the largest difference in SV at rest between two runs of a stage, a fraction, shape ().

    It counts up to fourfold as far as EDV differs as well: of volumes that were certainly calibrated otherwise, strokes that differ by 5 %
    were too.
    """
    stroke = largest_gap(subject, "SV", lambda beats: beats.sv_ml)
    filled = largest_gap(subject, "EDV", lambda beats: beats.edv_ml)
    return single(max(stroke, min(FOURFOLD * stroke, filled)) if np.isfinite(stroke) and np.isfinite(filled) else stroke)


def volume_gap(subject: AcquisitionSubject) -> Measured:
    """Return the largest difference in EDV at rest between two runs of a stage, a fraction, shape ()."""
    return single(largest_gap(subject, "EDV", lambda beats: beats.edv_ml))


LIMITS = Limits(
    suspect_above=0.15,
    fail_above=0.20,
    basis="house default; 18 % are 2.6 SD of two runs that wander by 5 % each (from memory)",
)
PRESSURE = Check(
    name="runs-agree-pressure",
    title="Runs of a stage show one pressure at rest",
    level=Level.ACQUISITION,
    measure=pressure_gap,
    unit="1",
    limits=LIMITS,
    reason="pressure at rest differs by {value:.0%} between runs of one stage, and which is right cannot be told (limit {limit:.0%})",
    remedy="confirm the unit and the gain of the pressure in each run, and that all are of one subject and stage",
    spoils=PRESSURE_GAIN | {"Ees_Ea", "efficiency"},
)
STROKE_VOLUME = Check(
    name="runs-agree-stroke-volume",
    title="Runs of a stage show one stroke volume at rest",
    level=Level.ACQUISITION,
    measure=stroke_volume_gap,
    unit="1",
    limits=LIMITS,
    reason="volumes at rest, strokes too, differ by {value:.0%} between runs of one stage; none can be told right (limit {limit:.0%})",
    remedy="confirm unit and calibration of the volume in each run, and that all are of one subject and stage",
    spoils=VOLUME_GAIN | {"ESP", "Ees_Ea", "efficiency"},
)
VOLUME = Check(
    name="runs-agree-volume",
    title="Runs of a stage show one volume at rest",
    level=Level.ACQUISITION,
    measure=volume_gap,
    unit="1",
    limits=LIMITS,
    reason="end-diastolic volume at rest differs by {value:.0%} between runs of one stage; none can be told right (limit {limit:.0%})",
    remedy="confirm parallel volume, segments and place of the catheter in each run, and that all are of one subject and stage",
    spoils=VOLUME_OFFSET | {"efficiency"},
)
