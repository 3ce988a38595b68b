"""The saline intercept: what a catheter shows of an empty ventricle, from hypertonic saline washing in.

Saline makes the blood conduct better, so raw end-systolic (ES) and end-diastolic (ED) volume grow together along a line, ES = a * ED + b.
Where it meets ES = ED nothing but the parallel conductance is left: alpha * Vc = b / (1 - a) (Baan 1984, Circulation 70:812, read in
abstract). Both regressions stand beside each other, because each is bent by noise to its side (Herrera 1999, Med Biol Eng Comput 37:169,
read in abstract, who accepts r > 0.65); their mean in slope, the reduced major axis, is the estimate. Only the rising limb counts:
later the heart answers to the saline.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import signal

from metrics.arrays import FloatArray, argmax_within, running_median, taken
from metrics.signals.calibrate import calibrated_volume_ml, observed_rate_hz
from metrics.signals.facts import RunFacts, VolumeCalibration
from metrics.signals.filters import steadied, zero_phase
from metrics.signals.recording import Recording

LEAST_R = 0.65
FEWEST_BEATS = 5
SHORTEST_CYCLE_S = 0.25
EMPTYING_SHARE = 0.4
"""A volume minimum is an end-systole when the volume falls to it by this share of its usual range; house default."""

ONSET_SHARE = 0.1
"""The rising limb begins where end-diastolic volume has gained this share of its rise; house default."""


@dataclass(frozen=True, slots=True)
class SalineIntercept:
    """alpha * Vc in raw mL by the reduced major axis, by ES on ED and by ED on ES, with the line's slope a and r.

    ``se_ml`` is the jackknife's standard error of ``ml``.
    """

    ml: float
    es_on_ed_ml: float
    ed_on_es_ml: float
    se_ml: float
    slope: float
    r: float
    beats: int

    @property
    def spread_ml(self) -> float:
        """Return how far the two regressions lie apart."""
        return abs(self.es_on_ed_ml - self.ed_on_es_ml)


def saline_intercept(ed_ml: FloatArray, es_ml: FloatArray) -> SalineIntercept:
    """Return the intercept from raw end-diastolic and end-systolic volumes of the rising limb, both shape (n_beats,).

    Raises ValueError with fewer than five beats, where they vary together too little (r at most 0.65), or where a regression has a >= 1.

    >>> ed = np.array([150.0, 155.0, 160.0, 165.0, 170.0])
    >>> round(saline_intercept(ed, 0.6 * ed + 24.0).ml, 9)
    60.0
    """
    if ed_ml.size < FEWEST_BEATS:
        message = f"{ed_ml.size} beats on the rising limb where {FEWEST_BEATS} are needed"
        raise ValueError(message)
    r, slope = _line(ed_ml, es_ml)
    if not r > LEAST_R:
        message = f"end-systolic and end-diastolic volume do not rise together (r = {r:.2f})"
        raise ValueError(message)
    if max(slope, slope / r) >= 1.0:
        message = f"the line does not meet the identity (slope {slope / r:.3f})"
        raise ValueError(message)
    both, es_on_ed, ed_on_es = (_meeting(one, ed_ml, es_ml) for one in (slope, slope * r, slope / r))
    kept = ~np.eye(ed_ml.size, dtype=bool)
    others = np.array([_meeting(_line(ed_ml[some], es_ml[some])[1], ed_ml[some], es_ml[some]) for some in kept])
    count = ed_ml.size
    error = float(np.sqrt((count - 1) / count * np.sum((others - others.mean()) ** 2)))
    return SalineIntercept(both, es_on_ed, ed_on_es, error, slope, r, count)


def _line(ed_ml: FloatArray, es_ml: FloatArray) -> tuple[float, float]:
    """Return r and the slope of the reduced major axis; NaN without spread."""
    ed, es = ed_ml - ed_ml.mean(), es_ml - es_ml.mean()
    see, sdd = float(np.sum(es**2)), float(np.sum(ed**2))
    if see == 0.0 or sdd == 0.0:
        return float("nan"), float("nan")
    return float(np.sum(ed * es)) / float(np.sqrt(see * sdd)), float(np.sqrt(see / sdd))


def _meeting(slope: float, ed_ml: FloatArray, es_ml: FloatArray) -> float:
    return float((es_ml.mean() - slope * ed_ml.mean()) / (1.0 - slope))


def raw_volume_ml(recording: Recording, facts: RunFacts) -> tuple[FloatArray, float]:
    """Return the raw volume in mL before gain and parallel volume, shape (n,), and its rate in Hz; missing samples bridged.

    Raises ValueError where the channel was sent calibrated, or is not there.
    """
    names = [f"segment-{number}" for number in facts.segments_used] or sorted(
        one for one in recording.channels if one.startswith("segment-")
    )
    names = ["volume"] if "volume" in recording.channels else names
    if not names or not set(names) <= set(recording.channels):
        message = "the run has no volume"
        raise ValueError(message)
    first = recording.channels[names[0]]
    if facts.volume.calibrated and first.unit != "mS":
        message = "volume was sent calibrated, so there is no raw one"
        raise ValueError(message)
    total: FloatArray = np.sum([recording.channels[name].samples for name in names], axis=0)
    known = np.flatnonzero(np.isfinite(total))
    if known.size == 0:
        message = "the volume channel holds no value"
        raise ValueError(message)
    bridged = np.interp(np.arange(total.size), known, total[known])
    constants = VolumeCalibration(
        calibrated=False,
        electrode_spacing_cm=facts.volume.electrode_spacing_cm,
        blood_resistivity_ohm_cm=facts.volume.blood_resistivity_ohm_cm,
    )
    return calibrated_volume_ml(bridged, first.unit, constants), observed_rate_hz(first)


def extremes_ml(volume_ml: FloatArray, sampling_rate_hz: float) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return (seconds, end-diastolic, end-systolic) of each beat found in the volume alone; each shape (n_beats,).

    A saline run needs no pressure, so a beat is an emptying: the largest volume before each deep minimum, and that minimum.
    """
    smooth = steadied(zero_phase(volume_ml, sampling_rate_hz), sampling_rate_hz)
    low, high = np.percentile(smooth, [5.0, 95.0])
    distance = max(1, round(SHORTEST_CYCLE_S * sampling_rate_hz))
    emptied, _ = signal.find_peaks(-smooth, distance=distance, prominence=max(EMPTYING_SHARE * float(high - low), 1e-12))
    emptied = emptied.astype(np.int64)
    filled = argmax_within(smooth, emptied[:-1], emptied[1:])
    return emptied[1:] / sampling_rate_hz, taken(smooth, filled), taken(smooth, emptied[1:])


def rising_limb(ed_ml: FloatArray) -> slice:
    """Return the beats of the rising limb: from the first that has left the level before the saline to the highest, medians of three.

    Raises ValueError where end-diastolic volume does not rise.
    """
    level = running_median(ed_ml, 3)
    if level.size == 0:
        message = "the run has no beats"
        raise ValueError(message)
    top = int(np.argmax(level))
    if top == 0:
        message = "end-diastolic volume does not rise"
        raise ValueError(message)
    bottom = float(np.min(level[: top + 1]))
    before = np.flatnonzero(level[:top] <= bottom + ONSET_SHARE * (level[top] - bottom))
    return slice(int(before[-1]), top + 1)


def saline_intercept_of(recording: Recording, facts: RunFacts) -> SalineIntercept:
    """Return the saline intercept of a run; raises ValueError where its volume does not give one."""
    volume_ml, sampling_rate_hz = raw_volume_ml(recording, facts)
    at_s, ed_ml, es_ml = extremes_ml(volume_ml, sampling_rate_hz)
    injected_s = next((instant for instant, kind in facts.events if kind == "injection"), -np.inf)
    after = at_s >= injected_s
    limb = rising_limb(ed_ml[after])
    return saline_intercept(ed_ml[after][limb], es_ml[after][limb])
