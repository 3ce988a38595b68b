"""One ventricle solved through time: what fills it, two valves with inertia, a three-element windkessel.

It is filled from a pressure source, or, where the heart has a `VenousReturn`, in a closed loop: arteries, peripheral resistance, venous
reservoir, venous resistance, atrium and ventricle again. No blood is made or lost there. The other side of the heart and the lungs are
lumped into the reservoir, so an occlusion raises the venous resistance over seconds, as it reaches the ventricle through them. Breath
moves the pressure around heart and atrium against that in the vessels outside the chest; a sensor shows the pressure against the air.

The windkessel is that of Westerhof 1971 (from memory): characteristic resistance in series with compliance parallel to the peripheral
resistance. Valves let blood pass one way only; blood has inertia, so flow goes on for a moment after the pressure gradient has turned.
What a leaking valve lets back follows the root of the gradient (Gorlin 1951, Am Heart J 41:1, from memory) and has no inertia.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import repeat

import numpy as np

from flows.sources.simulated.activation import FloatArray, activation
from flows.sources.simulated.heart import Heart
from flows.sources.simulated.rhythm import STEP_S, Conditions, Schedule, schedule, seconds

WARM_UP_S = 9.0
ATRIAL_SYSTOLE_S = 0.2
"""How long an atrium of the closed loop contracts, up to the onset of the ventricle's contraction: it is past its peak at the R wave."""

KICK_BEFORE_S = 0.095
KICK_WIDTH_S = 0.026
ABERRANT_STRETCH = 1.1
"""A ventricle whose parts contract one after the other takes longer about it; the tenth is a house choice."""


@dataclass(frozen=True, slots=True)
class Loop:
    """What else a closed loop holds on the grid of a solution, arrays of shape (n,): stressed volumes in mL, return in mL/s."""

    atrial_volume_ml: FloatArray
    venous_volume_ml: FloatArray
    arterial_volume_ml: FloatArray
    venous_return_ml_per_s: FloatArray
    chest_pressure_mmhg: FloatArray


@dataclass(frozen=True, slots=True)
class Solution:
    """A run solved on the grid of `STEP_S`, arrays of shape (n,), first sample at the run's time 0.

    Pressures in mmHg, volume in mL, flows in mL/s. ``schedule`` counts its onsets from ``first``, the run's first step. In a closed
    loop ``filling_pressure_mmhg`` is the atrium's.
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
    loop: Loop | None = None

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
    columns = _march(heart, strength, degree, *_filling(heart, conditions, beats, steps))
    pressure, volume, aortic, outflow, inflow, filling, *others = (column[first:] for column in columns)
    loop = Loop(*others) if others else None
    return Solution(heart, conditions, beats, first, pressure, volume, aortic, outflow, inflow, degree[first:], filling, loop)


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


def _filling(heart: Heart, conditions: Conditions, beats: Schedule, steps: int) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return what fills the ventricle on the grid: a source's pressure and nothing else, or what a closed loop goes by.

    That is the atrium's elastance, the conductance of the veins and the pressure in the chest beyond its mean.
    """
    veins = heart.veins
    contraction = np.zeros(steps)
    if not conditions.fibrillating:
        for onset, premature in zip(beats.onset, beats.premature, strict=True):
            if not premature:
                _contract(contraction, int(onset), is_kick=veins is None)
    breath = _breath(conditions, steps)
    if veins is None:
        level = _level(conditions, None if breath is None else 1.0 + breath, steps)
        source = np.asarray(level * (heart.filling_pressure_mmhg + heart.atrial_kick_mmhg * contraction), dtype=np.float64)
        return source, np.zeros(steps), np.zeros(steps)
    relaxed, contracted = veins.atrial_elastance, veins.atrial_elastance_contracted
    chest = np.zeros(steps) if breath is None else -heart.filling_pressure_mmhg * breath
    return relaxed + (contracted - relaxed) * contraction, _level(conditions, None, steps) ** 2 / veins.resistance, chest


def _level(conditions: Conditions, swing: FloatArray | None, steps: int) -> FloatArray:
    """Return what the occlusion, breath (``swing``, where it acts on the level) and a slow trend leave of the filling, shape (steps,)."""
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
    if swing is not None:
        level = level * swing
    if conditions.filling_trend_per_s:
        level = level * np.maximum(1.0 + conditions.filling_trend_per_s * np.clip(run_s, 0.0, None), 0.1)
    return level


def _breath(conditions: Conditions, steps: int) -> FloatArray | None:
    """Return breathing's swing on the grid, filling more above 0, None where the breath is held."""
    if conditions.breathing is None:
        return None
    run_s = np.arange(steps) * STEP_S - WARM_UP_S
    phase = 2.0 * math.pi * conditions.breathing.rate_per_min / 60.0 * (run_s + WARM_UP_S)
    return np.asarray(conditions.breathing.depth * np.sin(phase), dtype=np.float64)


def _contract(contraction: FloatArray, onset: int, *, is_kick: bool) -> None:
    """Add one atrial contraction before the onset of the ventricle's: the kick of a source, or an atrium's own activation up to 1."""
    if is_kick:
        centre = onset - round(KICK_BEFORE_S / STEP_S)
        low, high = max(0, centre - 220), min(contraction.size, centre + 221)
        contraction[low:high] += np.exp(-0.5 * ((np.arange(low, high) - centre) * (STEP_S / KICK_WIDTH_S)) ** 2)
        return
    low, high = max(0, onset - round(ATRIAL_SYSTOLE_S / STEP_S)), min(contraction.size, onset)
    if low < high:
        since = (np.arange(low, high) - onset) * (STEP_S / ATRIAL_SYSTOLE_S)
        contraction[low:high] = np.maximum(contraction[low:high], np.sin(math.pi * since) ** 2)


def _march(
    heart: Heart, strength: FloatArray, degree: FloatArray, filler: FloatArray, conductance: FloatArray, chest: FloatArray
) -> tuple[FloatArray, ...]:
    """Return pressure, volume, arterial pressure, outflow, inflow and filling pressure on the grid, then what a `Loop` holds.

    Flows are stepped implicitly in their own resistance, then volumes and arterial pressure with the new flows.
    """
    ees, v0, bend = heart.ees_mmhg_per_ml, heart.v0_ml, heart.espvr_bend_mmhg_per_ml2
    scale, exponent = heart.passive_pressure_mmhg, heart.passive_exponent_per_ml
    out_gain = STEP_S / heart.outflow_inertance
    out_damping = 1.0 / (1.0 + out_gain * (heart.outflow_resistance + heart.characteristic_resistance))
    in_gain = STEP_S / heart.filling_inertance
    in_damping = 1.0 / (1.0 + in_gain * heart.filling_resistance)
    leak, charge = 1.0 / heart.peripheral_resistance, STEP_S / heart.compliance_ml_per_mmhg
    is_leaky = heart.inlet_leak > 0.0 or heart.outlet_leak > 0.0
    is_closed = heart.veins is not None
    volume = v0 + math.log1p(heart.filling_pressure_mmhg / scale) / exponent
    downstream = heart.downstream_pressure_mmhg
    stored = downstream + 0.3 * ees * (volume - v0)
    empty_atrium, empty_veins, stiffness, atrium, reservoir = _emptiness_and_start(heart, volume, stored)
    outflow = inflow = forward = 0.0
    exp = math.exp
    rows: list[tuple[float, ...]] = []
    note = rows.append
    given = (one.tolist() if is_closed else repeat(0.0, filler.size) for one in (conductance, chest))
    for strong, active, filling, open_veins, around in zip(strength.tolist(), degree.tolist(), filler.tolist(), *given, strict=True):
        stretch = volume - v0
        pressure = strong * (ees + bend * stretch) * stretch + (1.0 - active) * scale * (exp(exponent * stretch) - 1.0)
        if is_closed:
            pressure += around
            filling = filling * (atrium - empty_atrium) + around  # noqa: PLW2901  (given is the atrium's elastance, not a pressure)
            downstream = (reservoir - empty_veins) * stiffness
        outflow = max((outflow + out_gain * (pressure - stored)) * out_damping, 0.0)
        inflow = max((inflow + in_gain * (filling - pressure)) * in_damping, 0.0)
        forward, through_inlet = outflow, inflow
        if is_leaky:
            if inflow == 0.0 and pressure > filling:
                through_inlet -= heart.inlet_leak * math.sqrt(pressure - filling)
            if outflow == 0.0 and stored > pressure:
                forward -= heart.outlet_leak * math.sqrt(stored - pressure)
        runoff = (stored - downstream) * leak
        if is_closed:
            note((pressure, volume, stored, forward, through_inlet, atrium, reservoir))
            returning = (downstream - filling) * open_veins
            atrium += STEP_S * (returning - through_inlet)
            reservoir += STEP_S * (runoff - returning)
        else:
            note((pressure, volume, stored, forward, through_inlet))
        volume += STEP_S * (through_inlet - forward)
        stored += charge * (forward - runoff)
    return _read_off(heart, np.ascontiguousarray(np.asarray(rows, dtype=np.float64).T), filler, conductance, chest)


def _read_off(heart: Heart, solved: FloatArray, filler: FloatArray, conductance: FloatArray, chest: FloatArray) -> tuple[FloatArray, ...]:
    """Return the columns of a solution, and of its loop where it is closed, from what the march noted, shape (5 or 7, steps)."""
    pressure, volume, stored, forward, through_inlet, *others = solved
    aortic = stored + heart.characteristic_resistance * forward
    if heart.veins is None:
        return pressure, volume, aortic, forward, through_inlet, filler
    (atrium, reservoir), veins = others, heart.veins
    filling = filler * (atrium - veins.atrial_unstressed_ml) + chest
    returning = ((reservoir - veins.unstressed_ml) / veins.compliance_ml_per_mmhg - filling) * conductance
    arterial = heart.compliance_ml_per_mmhg * stored
    return pressure, volume, aortic, forward, through_inlet, filling, atrium, reservoir, arterial, returning, chest


def _emptiness_and_start(heart: Heart, volume_ml: float, stored_mmhg: float) -> tuple[float, float, float, float, float]:
    """Return unstretched volumes of atrium and veins, the veins' stiffness, and volumes to start from: what is not elsewhere is venous."""
    veins = heart.veins
    if veins is None:
        return 0.0, 0.0, 0.0, 0.0, 0.0
    held = heart.filling_pressure_mmhg / veins.atrial_elastance
    elsewhere = volume_ml - heart.v0_ml + held + heart.compliance_ml_per_mmhg * stored_mmhg
    at_start = veins.atrial_unstressed_ml + held, veins.unstressed_ml + veins.stressed_volume_ml - elsewhere
    return veins.atrial_unstressed_ml, veins.unstressed_ml, 1.0 / veins.compliance_ml_per_mmhg, *at_start
