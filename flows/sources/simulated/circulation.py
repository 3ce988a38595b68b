"""One ventricle solved through time: filling source, two valves with inertia, a three-element windkessel.

The windkessel is that of Westerhof 1971 (from memory): characteristic resistance in series with compliance parallel to the peripheral
resistance. Valves let blood pass one way only; blood has inertia, so flow goes on for a moment after the pressure gradient has turned.
What a leaking valve lets back follows the root of the gradient (Gorlin 1951, Am Heart J 41:1, from memory) and has no inertia.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from flows.sources.simulated.activation import FloatArray, activation
from flows.sources.simulated.heart import Heart
from flows.sources.simulated.rhythm import STEP_S, Conditions, Schedule, schedule, seconds

WARM_UP_S = 9.0
KICK_BEFORE_S = 0.095
KICK_WIDTH_S = 0.026
ABERRANT_STRETCH = 1.1
"""A ventricle whose parts contract one after the other takes longer about it; the tenth is a house choice."""


@dataclass(frozen=True, slots=True)
class Solution:
    """A run solved on the grid of `STEP_S`, arrays of shape (n,), first sample at the run's time 0.

    Pressures in mmHg, volume in mL, flows in mL/s. ``schedule`` counts its onsets from ``first``, the run's first step.
    """

    heart: Heart
    conditions: Conditions
    schedule: Schedule
    first: int
    pressure_mmhg: FloatArray
    volume_ml: FloatArray
    aortic_pressure_mmhg: FloatArray
    outflow_ml_per_s: FloatArray
    inflow_ml_per_s: FloatArray
    activation: FloatArray
    filling_pressure_mmhg: FloatArray

    @property
    def time_s(self) -> FloatArray:
        """Return the instants of the samples, shape (n,)."""
        return seconds(np.arange(self.pressure_mmhg.size))


def solve(heart: Heart, conditions: Conditions, seed: int = 0) -> Solution:
    """Return the run of a heart under these conditions, after a warm-up that is cut off."""
    rng = np.random.default_rng(seed)
    beats = schedule(heart.rr_s, conditions, WARM_UP_S, rng)
    first = round(WARM_UP_S / STEP_S)
    steps = first + round(conditions.duration_s / STEP_S) + 1
    strength, degree = _drive(heart, beats, steps)
    source = _filling_pressure(heart, conditions, beats, steps)
    columns = _march(heart, strength, degree, source)
    pressure, volume, aortic, outflow, inflow = (column[first:] for column in columns)
    return Solution(heart, conditions, beats, first, pressure, volume, aortic, outflow, inflow, degree[first:], source[first:])


def _drive(heart: Heart, beats: Schedule, steps: int) -> tuple[FloatArray, FloatArray]:
    """Return activation times force, and activation, on the grid; overlapping beats add without passing 1."""
    strength_left, degree_left = np.ones(steps), np.ones(steps)
    reach = round(1.6 / STEP_S)
    for onset, force, rr_s, other in zip(beats.onset, beats.force, beats.rr_before_s, beats.aberrant, strict=True):
        stop = min(steps, int(onset) + reach)
        if stop <= onset:
            continue
        # The heart's own cycle sets most of systole's length; one long pause does not stretch the next beat in full.
        scale_s = heart.activation_scale * (0.2 + 0.15 * (0.8 * heart.rr_s + 0.2 * rr_s)) * (ABERRANT_STRETCH if other else 1.0)
        shape = activation(reach, STEP_S, scale_s, heart.relaxation_exponent)[: stop - int(onset)]
        degree_left[onset:stop] *= 1.0 - shape
        strength_left[onset:stop] *= 1.0 - min(force, 1.0) * shape
        if force > 1.0:
            strength_left[onset:stop] -= (force - 1.0) * shape
    return 1.0 - strength_left, 1.0 - degree_left


def _filling_pressure(heart: Heart, conditions: Conditions, beats: Schedule, steps: int) -> FloatArray:
    """Return the pressure that fills the ventricle, shape (steps,): its level, the manoeuvre, breathing, and the atrium's kick."""
    run_s = np.arange(steps) * STEP_S - WARM_UP_S
    level = np.full(steps, 1.0)
    occlusion = conditions.occlusion
    if occlusion is not None:
        fall = 1.0 - np.exp(-np.clip(run_s - occlusion.onset_s, 0.0, None) / occlusion.time_constant_s)
        if occlusion.deflation_s is not None:
            since = np.clip(run_s - occlusion.deflation_s, 0.0, None)
            held = 1.0 - math.exp(-max(occlusion.deflation_s - occlusion.onset_s, 0.0) / occlusion.time_constant_s)
            fall = np.where(since > 0.0, held * np.exp(-since / occlusion.time_constant_s), fall)
        level = 1.0 - (1.0 - occlusion.floor) * fall
    if conditions.breathing is not None:
        phase = 2.0 * math.pi * conditions.breathing.rate_per_min / 60.0 * (run_s + WARM_UP_S)
        level = level * (1.0 + conditions.breathing.depth * np.sin(phase))
    if conditions.filling_trend_per_s:
        level = level * np.maximum(1.0 + conditions.filling_trend_per_s * np.clip(run_s, 0.0, None), 0.1)
    kick = np.zeros(steps)
    if not conditions.fibrillating:
        for onset, premature in zip(beats.onset, beats.premature, strict=True):
            if not premature:
                centre = int(onset) - round(KICK_BEFORE_S / STEP_S)
                low, high = max(0, centre - 220), min(steps, centre + 221)
                kick[low:high] += np.exp(-0.5 * ((np.arange(low, high) - centre) * (STEP_S / KICK_WIDTH_S)) ** 2)
    return np.asarray(level * (heart.filling_pressure_mmhg + heart.atrial_kick_mmhg * kick), dtype=np.float64)


def _march(heart: Heart, strength: FloatArray, degree: FloatArray, source: FloatArray) -> tuple[FloatArray, ...]:
    """Return pressure, volume, arterial pressure, outflow and inflow on the grid.

    Flows are stepped implicitly in their own resistance, then volume and arterial pressure with the new flows.
    """
    ees, v0, bend = heart.ees_mmhg_per_ml, heart.v0_ml, heart.espvr_bend_mmhg_per_ml2
    scale, exponent = heart.passive_pressure_mmhg, heart.passive_exponent_per_ml
    out_gain = STEP_S / heart.outflow_inertance
    out_damping = 1.0 / (1.0 + out_gain * (heart.outflow_resistance + heart.characteristic_resistance))
    in_gain = STEP_S / heart.filling_inertance
    in_damping = 1.0 / (1.0 + in_gain * heart.filling_resistance)
    leak, charge = 1.0 / heart.peripheral_resistance, STEP_S / heart.compliance_ml_per_mmhg
    is_leaky = heart.inlet_leak > 0.0 or heart.outlet_leak > 0.0
    volume = v0 + math.log1p(heart.filling_pressure_mmhg / scale) / exponent
    stored = heart.downstream_pressure_mmhg + 0.3 * ees * (volume - v0)
    outflow = inflow = forward = 0.0
    exp = math.exp
    rows = []
    for strong, active, filling in zip(strength.tolist(), degree.tolist(), source.tolist(), strict=True):
        stretch = volume - v0
        pressure = strong * (ees + bend * stretch) * stretch + (1.0 - active) * scale * (exp(exponent * stretch) - 1.0)
        outflow = (outflow + out_gain * (pressure - stored)) * out_damping
        outflow = forward = max(outflow, 0.0)
        inflow = (inflow + in_gain * (filling - pressure)) * in_damping
        inflow = max(inflow, 0.0)
        through_inlet = inflow
        if is_leaky:
            if inflow == 0.0 and pressure > filling:
                through_inlet -= heart.inlet_leak * math.sqrt(pressure - filling)
            if outflow == 0.0 and stored > pressure:
                forward -= heart.outlet_leak * math.sqrt(stored - pressure)
        rows.append((pressure, volume, stored + heart.characteristic_resistance * forward, forward, through_inlet))
        volume += STEP_S * (through_inlet - forward)
        stored += charge * (forward - (stored - heart.downstream_pressure_mmhg) * leak)
    return tuple(np.ascontiguousarray(column) for column in np.asarray(rows, dtype=np.float64).T)
