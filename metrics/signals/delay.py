"""How late volume is against pressure, from the onset of ejection.

The aortic valve opens as dP/dt reaches its maximum or a few milliseconds later (from memory), and volume leaves its plateau there. From
rest, flow grows evenly at first, so volume falls as the square of time: the instants at which 3 % and 10 % of the stroke volume are gone
tell the onset without a word on how fast this ventricle ejects (derived). Read in the mean beat, so that noise hardly counts. The right
ventricle ejects before its dP/dt maximum and regurgitation leaves no plateau: there the onset says nothing about a delay. A volume that
seeps away before it is ejected shows in two pairs of instants that tell two onsets.
"""

from __future__ import annotations

import numpy as np

from metrics.arrays import BoolArray, FloatArray
from metrics.signals.beats import Beats
from metrics.signals.calibrate import Signals

AROUND_S = 0.20
STEEPEST_FROM_S, STEEPEST_TO_S = -0.08, 0.16
PLATEAU_S = 0.12
SHARES = (0.03, 0.10, 0.30)
"""Of the stroke volume: the first two tell the onset, the last two whether there is one."""

LARGEST_DISAGREEMENT_S = 0.010
LEAST_BEATS = 5


def volume_delay_s(signals: Signals, beats: Beats, chosen: BoolArray) -> float:
    """Return the onset of ejection in volume minus the instant of dP/dt maximum, in seconds; NaN with fewer than five beats.

    Positive where volume is late.
    """
    rate_hz = signals.sampling_rate_hz
    half = round(AROUND_S * rate_hz)
    peak = beats.dpdt_max_at[chosen & (beats.dpdt_max_at >= half) & (beats.dpdt_max_at + half < signals.volume_ml.size)]
    if peak.size < LEAST_BEATS:
        return float("nan")
    mean_ml = signals.volume_ml[peak[:, None] + np.arange(-half, half + 1)].mean(axis=0)
    return onset_of_fall_s(mean_ml, float(np.nanmedian(beats.sv_ml[chosen])), rate_hz)


def onset_of_fall_s(volume_ml: FloatArray, stroke_ml: float, rate_hz: float) -> float:
    """Return when volume begins to fall, seconds from the middle of ``volume_ml``; NaN where none can be told.

    >>> time_s = np.arange(-100, 101) / 500.0
    >>> round(onset_of_fall_s(120.0 - 9000.0 * np.clip(time_s - 0.01, 0.0, 0.09) ** 2, 70.0, 500.0), 3)
    0.01
    """
    middle = volume_ml.size // 2
    first = max(middle + round(STEEPEST_FROM_S * rate_hz), 1)
    steepest = first + int(np.argmin(np.diff(volume_ml[first - 1 : middle + round(STEEPEST_TO_S * rate_hz)])))
    plateau_ml = float(np.max(volume_ml[max(0, steepest - round(PLATEAU_S * rate_hz)) : steepest + 1]))
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
