"""End-systole: where P / (V - V0) is largest, with V0 found together with the line.

Kono 1984, Circulation 70:1057 (from memory): start with V0 = 0, pick each beat's point, fit, take the new V0, repeat until it moves by
less than 0.01 mL, at most 50 times; when it swings between two values their mean is taken. Other definitions bias the slope by 2 to
42 % (computed on an exact elastance), so the rule stands in the estimator's name.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from metrics.arrays import BoolArray, FloatArray, IntArray, argmax_by_owner, spans, taken
from metrics.signals.beats import Beats
from metrics.signals.calibrate import Signals
from metrics.stats.lines import Line, LineFit, deming_fit

TOLERANCE_ML = 0.01
MOST_STEPS = 50


@dataclass(frozen=True, slots=True)
class EndSystole:
    """End-systolic points; arrays of shape (n_beats,), -1 and NaN where a beat has none. ``v0_ml`` is None for plain max P/V."""

    at: IntArray
    esp_mmhg: FloatArray
    volume_ml: FloatArray
    v0_ml: float | None


def end_systole(signals: Signals, beats: Beats, v0_ml: float | None) -> EndSystole:
    """Return each beat's end-systole between dP/dt maximum and minimum: max P / (V - V0), or max P/V without V0.

    Both channels are read from the 40 ms local quadratic of the other landmarks: the largest ratio of noisy samples lies above the
    largest ratio (0.8 % of the slope at 0.5 mmHg and 0.6 mL; computed). Where V - V0 is not positive throughout a beat's ejection its
    ratio means nothing; such a beat falls back to max P/V.
    """
    pressure_mmhg, volume_ml = signals.steadied_pressure_mmhg, signals.steadied_volume_ml
    inside = (beats.dpdt_max_at >= 0) & (beats.dpdt_min_at >= 0)
    start = np.where(inside, beats.dpdt_max_at, 0)
    stop = np.where(inside, beats.dpdt_min_at + 1, 0)
    positions, owner = spans(start, stop)
    pressures_mmhg, volumes_ml = pressure_mmhg[positions], volume_ml[positions]
    within = argmax_by_owner(pressures_mmhg / np.maximum(volumes_ml, 1e-6), owner, len(beats))
    if v0_ml is not None:
        above_ml = volumes_ml - v0_ml
        possible = beats.esv_ml - v0_ml > 0.02 * np.abs(beats.edv_ml)
        iterated = argmax_by_owner(pressures_mmhg / np.where(above_ml > 0.0, above_ml, np.inf), owner, len(beats))
        within = np.where(possible, iterated, within)
    at = np.where(within >= 0, positions[np.maximum(within, 0)], -1) if positions.size else within
    return EndSystole(at, taken(pressure_mmhg, at), taken(volume_ml, at), v0_ml)


@dataclass(frozen=True, slots=True)
class EndSystolicLine:
    """The end-systolic line of one run, its points (chosen beats only)."""

    line: Line
    volume_ml: FloatArray
    pressure_mmhg: FloatArray


def noise_ratio(signals: Signals) -> float:
    """Return var(pressure noise) / var(volume noise) from what the filter took away, in mmHg2/mL2.

    It comes from the high-frequency residual, not from the scatter of steady beats (breathing is signal). Without noise to measure the
    ratio of the signals' own variances stands in: the line then lies between both regressions, whatever the units.
    """
    pressure_span, volume_span = float(np.ptp(signals.pressure_mmhg)), float(np.ptp(signals.volume_ml))
    floor = 1e-4
    if signals.pressure_noise_mmhg > floor * pressure_span and signals.volume_noise_ml > floor * volume_span:
        return (signals.pressure_noise_mmhg / signals.volume_noise_ml) ** 2
    return (pressure_span / volume_span) ** 2 if volume_span > 0.0 else 1.0


def end_systolic_line(signals: Signals, beats: Beats, chosen: BoolArray, fit: LineFit | None = None) -> EndSystolicLine:
    """Return the iterated end-systolic line through the ``chosen`` beats, shape (n_beats,).

    ``fit`` is how pressures and volumes make a line, Deming's way by default. Raises ValueError when fewer than four of the beats
    have an end-systole or they all have the same load.
    """
    if fit is None:
        fit = deming_fit(noise_ratio(signals))
    v0_ml: float | None = None
    earlier: list[float] = []
    for _ in range(MOST_STEPS):
        points = end_systole(signals, beats, v0_ml)
        usable = chosen & np.isfinite(points.esp_mmhg) & np.isfinite(points.volume_ml)
        volume_ml, pressure_mmhg = points.volume_ml[usable], points.esp_mmhg[usable]
        slope, constant = fit.bare(volume_ml, pressure_mmhg)
        found_ml = -constant / slope
        if v0_ml is not None and abs(found_ml - v0_ml) < TOLERANCE_ML:
            break
        swings = any(abs(found_ml - seen) < TOLERANCE_ML for seen in earlier)
        earlier.append(found_ml)
        v0_ml = 0.5 * (found_ml + (v0_ml or 0.0)) if swings else found_ml
    return EndSystolicLine(fit.whole(volume_ml, pressure_mmhg), volume_ml, pressure_mmhg)
