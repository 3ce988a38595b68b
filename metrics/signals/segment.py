"""Where one beat ends and the next begins: pressure upstrokes, borne out by R waves where there are any.

A beat is a pressure upstroke: pressure is required, and the electrogram can be missing, leak or lose a lead for a while. A strong
upstroke counts on its own; a weak one (a premature beat on an empty ventricle) counts only when an R wave stands before it.
"""

from __future__ import annotations

import numpy as np
from scipy import signal

from metrics.arrays import BoolArray, FloatArray, IntArray

STRONG = 0.40
WEAK = 0.10
"""Fractions of the pressure the neighbours gain. 10-20 % of the running maximum is a customary fallback threshold (from memory, there of
dP/dt); 0.40 without an R wave keeps noise and pressure waves of breathing out; house default."""

GAIN_S = 0.080
"""An upstroke is weighed by the pressure gained in this time about its dP/dt maximum, about the length of one; house default. Noise is as
steep as the upstroke of an unloaded right ventricle but gains next to nothing: with 1 mmHg at 250 Hz it made 16 false beats among 1,000
when dP/dt itself was weighed, 2 so (computed)."""

REFRACTORY_S = 0.150
R_TO_UPSTROKE_S = (-0.020, 0.250)
"""A dP/dt maximum follows its R wave by an electromechanical delay plus isovolumic contraction; house default, wide."""


def upstrokes(dpdt_mmhg_per_s: FloatArray, r_waves: IntArray, sampling_rate_hz: float) -> tuple[IntArray, IntArray]:
    """Return (peak, r): the sample of each upstroke's dP/dt maximum, and of its R wave (-1 without one); both shape (n,).

    Without any R wave only strong upstrokes count.
    """
    distance = max(1, round(REFRACTORY_S * sampling_rate_hz))
    rising = np.maximum(dpdt_mmhg_per_s, 0.0)
    if rising.size == 0 or rising.max() == 0.0:
        return np.empty(0, dtype=np.int64), np.empty(0, dtype=np.int64)
    candidates, _ = signal.find_peaks(rising, distance=distance)
    if candidates.size == 0:
        return np.empty(0, dtype=np.int64), np.empty(0, dtype=np.int64)
    width = max(1, round(GAIN_S * sampling_rate_hz))
    gain = np.maximum(np.convolve(dpdt_mmhg_per_s, np.full(width, 1.0 / width), mode="same")[candidates], 0.0)
    share = gain / _neighbours_gain(candidates, gain, sampling_rate_hz)
    r_at = _r_before(candidates, share, r_waves, sampling_rate_hz)
    kept = (share >= STRONG) | ((share >= WEAK) & (r_at >= 0))
    return candidates[kept].astype(np.int64), r_at[kept]


def _neighbours_gain(candidates: IntArray, gain: FloatArray, sampling_rate_hz: float) -> FloatArray:
    """Return what an upstroke usually gains around each candidate: the upper quartile of the per-second maxima near it, NaN for none."""
    second = (candidates / sampling_rate_hz).astype(np.int64)
    tallest = np.zeros(int(second[-1]) + 1)
    np.maximum.at(tallest, second, gain)
    tallest[tallest == 0.0] = np.nan
    half = 5
    padded = np.pad(tallest, half, constant_values=np.nan)
    windows = np.lib.stride_tricks.sliding_window_view(padded, 2 * half + 1)
    ordered = np.sort(windows, axis=1)
    count = np.sum(np.isfinite(ordered), axis=1)
    usual = ordered[np.arange(ordered.shape[0]), np.maximum((count * 3) // 4 - (count % 4 == 0), 0)]
    picked: FloatArray = usual[second]
    return picked


def _r_before(candidates: IntArray, share: FloatArray, r_waves: IntArray, sampling_rate_hz: float) -> IntArray:
    """Return the R wave each candidate answers to, -1 for none: the tallest candidate after an R wave has it."""
    owner = np.full(candidates.size, -1, dtype=np.int64)
    if r_waves.size == 0:
        return owner
    early, late = (round(edge * sampling_rate_hz) for edge in R_TO_UPSTROKE_S)
    behind = np.searchsorted(r_waves, candidates - early, side="right") - 1
    near: BoolArray = (behind >= 0) & (candidates - r_waves[np.maximum(behind, 0)] <= late)
    order = np.lexsort((share, behind))
    last_of_r = np.append(behind[order][1:] != behind[order][:-1], True)
    tallest = order[last_of_r]
    chosen = tallest[near[tallest]]
    owner[chosen] = r_waves[behind[chosen]]
    return owner
