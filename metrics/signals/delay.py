"""How late volume is against pressure, from the onset of ejection, and what pressure is left when filling begins.

The outflow valve opens as dP/dt reaches its maximum or a few milliseconds later, and volume leaves its plateau there (from memory; of
the right ventricle Reynolds 1995, J Am Coll Cardiol 25:1176, from memory: its pressure at dP/dt maximum is the pulmonary artery's
diastolic one). From rest, flow grows evenly at first, so volume falls as the square of time: the instants at which 3 % and 10 % of the
stroke volume are gone tell the onset without a word on how fast this ventricle ejects (derived). Read in the mean beat, so that noise
hardly counts. A whole beat is searched, so that no delay falls outside. Regurgitation leaves no plateau: a volume that seeps away before
it is ejected shows in two pairs of instants that tell two onsets.
"""

from __future__ import annotations

import numpy as np

from metrics.arrays import BoolArray, FloatArray
from metrics.signals.beats import Beats
from metrics.signals.calibrate import Signals
from metrics.signals.filters import steadied

BEFORE, AFTER = 0.35, 0.65
"""Of a beat's length, around dP/dt maximum: where the steepest fall of volume is looked for."""

LEAST_AROUND_S = 0.20
PLATEAU_S = 0.12
TOP_S = 0.03
"""The largest of noisy values lies above the plateau and so makes ejection early by some ms; the largest mean over so long hardly does."""

SHARES = (0.03, 0.10, 0.30)
"""Of the stroke volume: the first two tell the onset, the last two whether there is one."""

REFILLED = 0.10
LARGEST_DISAGREEMENT_S = 0.007
LEAST_BEATS = 5
MOST_BEATS = 60


def mean_beat(samples: FloatArray, signals: Signals, beats: Beats, chosen: BoolArray) -> tuple[FloatArray, int]:
    """Return a channel's mean from before dP/dt maximum of the chosen beats to before the next one, and where that maximum lies in it.

    Empty with fewer than five beats; 60 of them, evenly spread, are as good as all.
    """
    length = float(np.median(np.diff(beats.start))) if len(beats) > 1 else 0.0
    least = round(LEAST_AROUND_S * signals.sampling_rate_hz)
    before, after = max(round(BEFORE * length), least), max(round(AFTER * length), least)
    peak = beats.dpdt_max_at[chosen & (beats.dpdt_max_at >= before) & (beats.dpdt_max_at + after < samples.size)]
    if peak.size < LEAST_BEATS:
        return np.empty(0), 0
    peak = peak[:: -(-peak.size // MOST_BEATS)]
    return samples[peak[:, None] + np.arange(-before, after + 1)].mean(axis=0), before


def volume_delay_s(signals: Signals, beats: Beats, chosen: BoolArray) -> float:
    """Return the onset of ejection in volume minus the instant of dP/dt maximum, in seconds; NaN with fewer than five beats.

    Positive where volume is late.
    """
    volume_ml, middle = mean_beat(signals.volume_ml, signals, beats, chosen)
    rate_hz = signals.sampling_rate_hz
    return onset_of_fall_s(steadied(volume_ml, rate_hz), middle, rate_hz) if volume_ml.size else float("nan")


def pressure_when_filling(signals: Signals, beats: Beats, chosen: BoolArray) -> float:
    """Return how much of its range pressure still has to fall when a tenth of the stroke is filled again; NaN with fewer than five beats.

    A share of what pressure moves by in the mean beat.
    """
    volume_ml, middle = mean_beat(signals.volume_ml, signals, beats, chosen)
    volume_ml = steadied(volume_ml, signals.sampling_rate_hz)
    pressure_mmhg, _ = mean_beat(signals.pressure_mmhg, signals, beats, chosen)
    if volume_ml.size == 0 or np.ptp(pressure_mmhg) == 0.0:
        return float("nan")
    emptied = middle + int(np.argmin(volume_ml[middle:]))
    refilled = volume_ml[emptied:] >= volume_ml[emptied] + REFILLED * np.ptp(volume_ml)
    if not refilled.any():
        return float("nan")
    at = emptied + int(np.argmax(refilled))
    return float((pressure_mmhg[at] - pressure_mmhg[middle:].min()) / np.ptp(pressure_mmhg))


def onset_of_fall_s(volume_ml: FloatArray, middle: int, rate_hz: float) -> float:
    """Return when volume begins to fall, seconds from the sample ``middle``; NaN where no onset can be told.

    >>> time_s = np.arange(-100, 101) / 500.0
    >>> round(onset_of_fall_s(120.0 - 9000.0 * np.clip(time_s - 0.01, 0.0, 0.09) ** 2, 100, 500.0), 3)
    0.01
    """
    steepest = 1 + int(np.argmin(np.diff(volume_ml)))
    top_ml = volume_ml[max(0, steepest - round(PLATEAU_S * rate_hz)) : steepest + 1]
    wide = min(max(round(TOP_S * rate_hz), 1), top_ml.size)
    plateau_ml = float(np.max(np.convolve(top_ml, np.full(wide, 1.0 / wide), mode="valid")))
    stroke_ml = plateau_ml - float(np.min(volume_ml[steepest:]))
    first_at, second_at, third_at = (_crossed(volume_ml, steepest, plateau_ml - share * stroke_ml) for share in SHARES)
    onset = _onset(first_at, second_at, SHARES[0] / SHARES[1])
    again = _onset(second_at, third_at, SHARES[1] / SHARES[2])
    agree = abs(onset - again) <= LARGEST_DISAGREEMENT_S * rate_hz
    return (onset - middle) / rate_hz if agree else float("nan")


def _onset(early: float, late: float, ratio: float) -> float:
    """Return where a fall with the square of time began that reached ``ratio`` of its later depth at the earlier instant."""
    root = float(np.sqrt(ratio))
    return (early - root * late) / (1.0 - root)


def _crossed(volume_ml: FloatArray, near: int, level_ml: float) -> float:
    """Return where volume falls through a level last before it has certainly done so, in samples; NaN where it never does."""
    last = near + int(np.argmax(volume_ml[near:] < level_ml))
    above = np.flatnonzero(volume_ml[: last + 1] >= level_ml)
    if not volume_ml[last] < level_ml or above.size == 0:
        return float("nan")
    place = int(above[-1])
    return place + float((volume_ml[place] - level_ml) / (volume_ml[place] - volume_ml[place + 1]))
