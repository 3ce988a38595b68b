"""Landmarks of each beat that need no fit; end-systole waits for the verdicts (`metrics.indices.end_systole`).

Definitions: end-diastole is the last sample before dP/dt exceeds 10 % of the beat's maximum, preferred for
micromanometers (from memory) because volume cannot show it where the electrogram leaks into conductance (McGuirk 2009, J Biomed Sci
Eng 2:491, read). End-systolic volume is the smallest volume between end-diastole and dP/dt minimum; the right ventricle keeps
ejecting, so there to the end of relaxation (pressure within 5 mmHg of the beat's end-diastolic pressure).
"""

from __future__ import annotations

import numpy as np

from metrics.arrays import FloatArray, IntArray, argmax_within, argmin_within, taken
from metrics.signals.beats import Beats
from metrics.signals.calibrate import Signals
from metrics.signals.filters import slope_per_s, steadied, zero_phase
from metrics.signals.r_waves import r_waves
from metrics.signals.segment import upstrokes

UPSTROKE_SHARE = 0.10
UPSTROKE_SEARCH_S = 0.250
RELAXED_ABOVE_EDP_MMHG = 5.0
STEEPEST_WINDOW_S = 0.080


def beats_of(signals: Signals, chamber: str) -> Beats:
    """Return the whole beats of a run; the parts before the first and after the last end-diastole belong to no beat."""
    rate = signals.sampling_rate_hz
    found_r = r_waves(signals.ecg_mv, rate) if signals.ecg_mv is not None else np.empty(0, dtype=np.int64)
    peak, r_at = upstrokes(signals.dpdt_mmhg_per_s, found_r, rate)
    diastole = end_diastoles(signals.dpdt_mmhg_per_s, peak, rate)
    keep = (diastole >= 0) & (np.diff(diastole, prepend=-1) > 0)
    diastole, peak, r_at = diastole[keep], peak[keep], r_at[keep]
    start, end = diastole[:-1], diastole[1:]
    peak, this_r, next_r = peak[:-1], r_at[:-1], r_at[1:]
    upstroke_s = np.diff(diastole) / rate
    rr_s = np.where((this_r >= 0) & (next_r >= 0), (next_r - this_r) / rate, upstroke_s)
    peak = steepest(signals, peak, start, end, chamber)
    relaxing = argmin_within(signals.dpdt_mmhg_per_s, peak + 1, end)
    pmax_at = argmax_within(signals.pressure_mmhg, start, np.where(relaxing >= 0, relaxing, end))
    smooth_volume = signals.steadied_volume_ml
    esv_at = argmin_within(smooth_volume, start, end_of_ejection(signals.pressure_mmhg, start, end, relaxing, chamber))
    return Beats(
        detector="ecg" if np.mean(r_at >= 0 if r_at.size else [False]) > 0.5 else "pressure",
        start=start,
        end=end,
        dpdt_max_at=peak,
        dpdt_min_at=relaxing,
        esv_at=esv_at,
        r_at=this_r,
        rr_s=rr_s,
        edv_ml=taken(smooth_volume, start),
        esv_ml=taken(smooth_volume, esv_at),
        edp_mmhg=taken(signals.pressure_mmhg, start),
        pmax_mmhg=taken(signals.pressure_mmhg, pmax_at),
        dpdt_max_mmhg_per_s=taken(signals.dpdt_mmhg_per_s, peak),
        dpdt_min_mmhg_per_s=taken(signals.dpdt_mmhg_per_s, relaxing),
        sw_mmhg_ml=loop_areas(signals.pressure_mmhg, signals.volume_ml, start, end),
    )


def steepest(signals: Signals, peak: IntArray, start: IntArray, end: IntArray, chamber: str) -> IntArray:
    """Return where each beat's dP/dt maximum is read; shape of ``peak``.

    The largest of noisy values lies above the largest value. In the right ventricle, whose upstroke is slow, that costs 3 to 6 % at
    0.5 mmHg and 250 Hz (computed); so there the instant comes from a window of 80 ms, and dP/dt is read at it. A left ventricle's
    upstroke is too short for that: its maximum stays where it is.
    """
    if chamber != "RV":
        return peak
    slow = slope_per_s(signals.pressure_mmhg, signals.sampling_rate_hz, chamber, window_s=STEEPEST_WINDOW_S)
    half = round(STEEPEST_WINDOW_S / 2.0 * signals.sampling_rate_hz)
    return argmax_within(slow, np.maximum(peak - half, start + 1), np.minimum(peak + half + 1, end))


def end_diastoles(dpdt_mmhg_per_s: FloatArray, peak: IntArray, sampling_rate_hz: float) -> IntArray:
    """Return, before each dP/dt maximum, the last sample at which dP/dt is still at or below 10 % of it; shape of ``peak``.

    -1 where the run begins in the middle of the upstroke. Where dP/dt stays above that for 250 ms, its smallest value is taken.

    >>> end_diastoles(np.array([0.0, 1.0, 0.0, 6.0, 50.0, 100.0, 80.0]), np.array([5]), 250.0).tolist()
    [3]
    >>> end_diastoles(np.array([40.0, 50.0, 100.0, 80.0]), np.array([2]), 250.0).tolist()
    [-1]
    """
    if peak.size == 0:
        return peak
    reach = max(2, round(UPSTROKE_SEARCH_S * sampling_rate_hz))
    back = peak[:, None] - np.arange(1, reach)
    slope = np.where(back >= 0, dpdt_mmhg_per_s[np.maximum(back, 0)], np.inf)
    below = slope <= UPSTROKE_SHARE * dpdt_mmhg_per_s[peak][:, None]
    first = np.where(below.any(axis=1), below.argmax(axis=1), slope.argmin(axis=1))
    found = back[np.arange(peak.size), first]
    return np.where(~below.any(axis=1) & (peak < reach), -1, found)


def end_of_ejection(pressure_mmhg: FloatArray, start: IntArray, end: IntArray, relaxing: IntArray, chamber: str) -> IntArray:
    """Return the sample after which no end-systolic volume is looked for; shape of ``start``.

    LV: dP/dt minimum. RV: the first sample after it within 5 mmHg of the beat's end-diastolic pressure.
    """
    last = np.where(relaxing >= 0, relaxing + 1, end)
    if chamber != "RV" or start.size == 0:
        return last
    beat_of_sample = np.clip(np.searchsorted(start, np.arange(pressure_mmhg.size), side="right") - 1, 0, None)
    relaxed_below_mmhg = taken(pressure_mmhg, start) + RELAXED_ABOVE_EDP_MMHG
    relaxed = (pressure_mmhg <= relaxed_below_mmhg[beat_of_sample]).astype(np.float64)
    first = argmax_within(relaxed, last, end)
    return np.where((first >= 0) & (relaxed[np.maximum(first, 0)] > 0.0), first + 1, end)


def loop_areas(pressure_mmhg: FloatArray, volume_ml: FloatArray, start: IntArray, end: IntArray) -> FloatArray:
    """Return the area of each closed loop in mmHg mL, positive when it runs counter-clockwise; shape of ``start``.

    The polygon (shoelace) sum over the samples start..end, closed by a straight line; external work as -closed integral of P dV.

    >>> v, p = np.array([0.0, 2.0, 2.0, 0.0]), np.array([0.0, 0.0, 3.0, 3.0])
    >>> loop_areas(p, v, np.array([0]), np.array([3])).tolist()
    [6.0]
    """
    if start.size == 0:
        return np.empty(0)
    cross = volume_ml[:-1] * pressure_mmhg[1:] - volume_ml[1:] * pressure_mmhg[:-1]
    summed = np.concatenate([[0.0], np.cumsum(cross)])
    closing = volume_ml[end] * pressure_mmhg[start] - volume_ml[start] * pressure_mmhg[end]
    area: FloatArray = 0.5 * (summed[end] - summed[start] + closing)
    return area


def landmark_noise_ml(signals: Signals) -> float:
    """Return the standard deviation of the noise in a volume read at a landmark, mL.

    White noise of the size its residual shows, sent through the common filter and `steadied`; coloured noise is underestimated.
    """
    impulse = np.zeros(2 * round(signals.sampling_rate_hz) + 1)
    impulse[impulse.size // 2] = 1.0
    passed = zero_phase(impulse, signals.sampling_rate_hz)
    taken_away = float(np.linalg.norm(impulse - passed))
    if taken_away == 0.0:
        return 0.0
    return signals.volume_noise_ml * float(np.linalg.norm(steadied(passed, signals.sampling_rate_hz))) / taken_away
