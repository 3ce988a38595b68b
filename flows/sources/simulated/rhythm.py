"""When the beats of a run begin, and how strong each is."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from flows.sources.simulated.activation import FloatArray, IntArray

STEP_S = 0.0005
"""The grid on which everything is solved; beats begin on it."""

REFRACTORY_S = 0.25
RESTITUTION_S = 0.16
REFLEX_TIME_S = 3.0
POTENTIATION = 1.2
POTENTIATION_DECAY = 0.35


@dataclass(frozen=True, slots=True)
class Occlusion:
    """A fall of the filling pressure: exponential from ``onset_s`` towards ``floor`` (a fraction), back after ``deflation_s``.

    The way back takes the same time constant: the blood stored between the balloon and the ventricle empties and fills alike.
    In a closed loop the fraction is that of the veins' cross-section left open, and their conductance goes with its square (Poiseuille).
    ``reflex`` is the fraction by which the heart rate has risen long after, beginning ``reflex_delay_s`` after the onset, and
    ``reflex_force`` that by which the force has.
    """

    onset_s: float = 5.0
    floor: float = 0.3
    time_constant_s: float = 3.5
    deflation_s: float | None = None
    reflex: float = 0.0
    reflex_delay_s: float = 6.0
    reflex_force: float = 0.0

    def reflex_grown(self, run_s: float) -> float:
        """Return how far the reflex has come at that time of the run, 0 before it begins and 1 long after."""
        return 1.0 - math.exp(-max(run_s - self.onset_s - self.reflex_delay_s, 0.0) / REFLEX_TIME_S)


@dataclass(frozen=True, slots=True)
class Breathing:
    """A sinusoidal swing of the filling pressure by ``depth`` (a fraction) and of the cycle length by ``sinus_depth``.

    In a closed loop it is the pressure in the chest that swings, by that fraction of the heart's filling pressure and the other way.
    """

    rate_per_min: float = 14.0
    depth: float = 0.12
    sinus_depth: float = 0.03


@dataclass(frozen=True, slots=True)
class Injection:
    """Hypertonic saline washing in: the blood that comes in conducts better by up to ``peak`` (a fraction), ``rise_s`` after the onset."""

    onset_s: float = 3.0
    peak: float = 0.16
    rise_s: float = 3.5

    def excess(self, time_s: FloatArray) -> FloatArray:
        """Return by what fraction the blood that comes in conducts better, same shape as ``time_s``."""
        since = np.clip(time_s - self.onset_s, 0.0, None) / self.rise_s
        return np.asarray(self.peak * since * np.exp(1.0 - since), dtype=np.float64)


@dataclass(frozen=True, slots=True)
class Conditions:
    """What happens during one run.

    ``rr_spread`` is the relative SD of the cycle length; ``premature_s`` are the instants about which a premature beat falls, at
    ``coupling`` of the heart's own cycle length; ``fibrillating`` replaces the sinus rhythm by an irregular one without an atrial kick,
    its cycles spread by ``irregularity``. The first beat after each of ``aberrant_s`` is on time but conducted another way: a wide
    complex, and a force of ``aberrant_force``. ``filling_trend_per_s`` lets the filling pressure (in a closed loop the
    veins' cross-section) rise or fall by that fraction a second.
    An ``injection`` changes what a conductance catheter sees, not the heart.
    """

    duration_s: float = 30.0
    rr_spread: float = 0.012
    premature_s: tuple[float, ...] = ()
    coupling: float = 0.6
    fibrillating: bool = False
    occlusion: Occlusion | None = None
    breathing: Breathing | None = None
    irregularity: float = 0.22
    aberrant_s: tuple[float, ...] = ()
    aberrant_force: float = 0.75
    filling_trend_per_s: float = 0.0
    injection: Injection | None = None


@dataclass(frozen=True, slots=True)
class Schedule:
    """The beats of a run, warm-up included: arrays of shape (n_beats,).

    ``onset`` counts grid steps from the start of the warm-up; ``force`` multiplies Ees; ``rr_before_s`` is the cycle that led to the beat.
    """

    onset: IntArray
    premature: tuple[bool, ...]
    force: FloatArray
    rr_before_s: FloatArray
    aberrant: tuple[bool, ...]


def seconds(steps: IntArray) -> FloatArray:
    """Return grid steps as seconds, same shape."""
    return np.asarray(steps, dtype=np.float64) * STEP_S


def schedule(rr_s: float, conditions: Conditions, warm_up_s: float, rng: np.random.Generator) -> Schedule:
    """Return the beats of a run of ``warm_up_s + conditions.duration_s`` seconds and one beat beyond."""
    ends_s = warm_up_s + conditions.duration_s + 2.0 * rr_s
    pending = sorted(warm_up_s + at for at in conditions.premature_s)
    astray = sorted(warm_up_s + at for at in conditions.aberrant_s)
    onsets, premature, force, before, aberrant = [0.1], [False], [1.0], [rr_s], [False]
    slow, pause_s, potentiation = 0.0, 0.0, 0.0
    while onsets[-1] < ends_s:
        now = onsets[-1]
        slow = 0.6 * slow + 0.8 * rng.standard_normal()
        cycle_s = _sinus_cycle_s(rr_s, conditions, now, now - warm_up_s, slow)
        is_premature = False
        if pause_s:
            cycle_s, pause_s = pause_s, 0.0
        elif pending and now + cycle_s >= pending[0]:
            pending.pop(0)
            is_premature = True
            pause_s = cycle_s * (2.0 - conditions.coupling)
            cycle_s *= conditions.coupling
        # Force follows the interval: a beat too early is weak, the one after the pause is strong, and the surplus dies away.
        strength = _restitution(cycle_s, rr_s) if is_premature else 1.0 + potentiation
        potentiation = POTENTIATION * (1.0 - strength) if is_premature else potentiation * POTENTIATION_DECAY
        onsets.append(now + max(round(cycle_s / STEP_S), 1) * STEP_S)
        if conditions.occlusion is not None and conditions.occlusion.reflex_force:
            strength *= 1.0 + conditions.occlusion.reflex_force * conditions.occlusion.reflex_grown(onsets[-1] - warm_up_s)
        is_aberrant = bool(astray) and not is_premature and onsets[-1] >= astray[0]
        if is_aberrant:
            astray.pop(0)
            strength *= conditions.aberrant_force
        aberrant.append(is_aberrant)
        premature.append(is_premature)
        force.append(strength if abs(strength - 1.0) > 1e-3 else 1.0)  # potentiation that has died away is none
        before.append(cycle_s)
    return Schedule(
        onset=np.round(np.asarray(onsets) / STEP_S).astype(np.int64),
        premature=tuple(premature),
        force=np.asarray(force, dtype=np.float64),
        rr_before_s=np.asarray(before, dtype=np.float64),
        aberrant=tuple(aberrant),
    )


def _restitution(interval_s: float, own_rr_s: float) -> float:
    """Return the strength of a premature beat.

    Mechanical restitution, exponential in the interval (Yue 1985, Circ Res 56:340, from memory; constants are house choices).
    """
    ready = 1.0 - math.exp(-max(interval_s - REFRACTORY_S, 0.05) / RESTITUTION_S)
    return min(ready / (1.0 - math.exp(-max(own_rr_s - REFRACTORY_S, 0.05) / RESTITUTION_S)), 1.0)


def _sinus_cycle_s(rr_s: float, conditions: Conditions, clock_s: float, run_s: float, slow: float) -> float:
    """Return the next cycle length before any premature beat."""
    if conditions.fibrillating:
        return rr_s * min(max(math.exp(conditions.irregularity * slow), 0.6), 1.8)
    cycle_s = rr_s * (1.0 + conditions.rr_spread * slow)
    if conditions.breathing is not None:
        cycle_s *= 1.0 + conditions.breathing.sinus_depth * math.sin(2.0 * math.pi * conditions.breathing.rate_per_min / 60.0 * clock_s)
    occlusion = conditions.occlusion
    if occlusion is not None:
        cycle_s /= 1.0 + occlusion.reflex * occlusion.reflex_grown(run_s)
    return cycle_s
