"""End-systolic elastance from single beats: the pressure the ventricle would reach if it could not eject.

LV: Takeuchi 1991, Circulation 83:202 (from memory); RV: Brimioulle 2003, Am J Physiol 284:H1625 (from memory). A cosine
``0.5 A (1 - cos(omega t + C)) + EDP`` is fitted to the isovolumic parts of a beat alone, from end-diastole to the largest dP/dt and from
the smallest back down to the next beat's EDP. Its top, ``Pmax = A + EDP``, is the pressure source of Sunagawa 1980 (from memory), and the
tangent from (EDV, Pmax) to end-systole gives ``Ees = (Pmax - ESP) / SV``, ``V0 = EDV - Pmax / Ees`` and, without a volume,
``Ees / Ea = Pmax / ESP - 1``. The fit is bounded (house default): A up to 4 times the beat's own rise, and a period of half to twice the
time from end-diastole to the end of relaxation. A beat whose fit ends on a bound has no value.

Estimators of their own, never primary and never mixed with a line over many beats. Their limits of agreement with it are wide: four
methods in 37 pigs lay within 2.6 to 3.8 mmHg/mL of it, and none saw a dopamine rise of 1.7 (Kjorstad 2002, Am J Physiol 282:H1739, read).
A pressure that rises over a longer time than it falls is no cosine: on simulated hearts, whose activation does, Pmax is a quarter too low
and Ees half of what it is, in each about alike (0.49 to 0.54 in left ventricles, 0.57 to 0.70 in right ones; computed).

Left out, because their published coefficients could not be verified: Senzaki 1996 (Circulation 94:2497; the table of the normalised
elastance) and Shishido 2000 (Circulation 102:1983; the regression of the ratio of slopes). Chen 2001 (J Am Coll Cardiol 38:2028) needs
cuff pressures and the times at which flow begins and ends, which an acquisition does not carry.
"""

from __future__ import annotations

import numpy as np

from metrics.arrays import BoolArray, FloatArray, IntArray, argmax_within, spans
from metrics.indices.card import Estimate, Index, RunBeats, Sensitivity, Source, StageBeats, Withheld, powers
from metrics.indices.steady import FEWEST_BEATS, median_estimate

LEAST_SHARE, LARGEST_SHARE = 1.0, 4.0
SHORTEST_PERIOD, LONGEST_PERIOD = 0.5, 2.0
LEAST = np.array([LEAST_SHARE, 2.0 * np.pi / LONGEST_PERIOD, -np.pi])
MOST = np.array([LARGEST_SHARE, 2.0 * np.pi / SHORTEST_PERIOD, np.pi])
"""Bounds of A over the beat's own rise, of omega times the time from end-diastole to the end of relaxation, and of C."""

FEWEST_SAMPLES = 3
"""Samples in either isovolumic part below which a beat has no fit: a cosine has three unknowns; house default."""

ENOUGH_HZ = 250.0
"""Samples beyond this rate repeat what the common low-pass left (50 Hz), so every n-th is taken."""

START = (1.5, 2.0 * np.pi / 1.1, 0.0)
"""Where the fit sets out from: A over the beat's rise, omega times the contraction's length, C."""

MOST_STEPS = 30
TOLERANCE = 1e-10
TINY = 1e-12
"""Keeps a matrix without curvature solvable."""


def source_rise(time: FloatArray, rise: FloatArray, used: BoolArray) -> FloatArray:
    """Return A of the cosine ``0.5 A (1 - cos(omega t + C))`` through each beat's isovolumic samples; shape (n_beats,).

    ``time`` counts from end-diastole in units of the contraction's length, ``rise`` is pressure above EDP over the beat's own rise; both
    have shape (n_beats, n_samples) and count where ``used``. NaN where the best fit lies on a bound. All beats step at once
    (Levenberg 1944, Q Appl Math 2:164, and Marquardt 1963, J SIAM 11:431, from memory).

    >>> t = np.concatenate([np.linspace(0.0, 0.2, 6), np.linspace(0.8, 0.95, 5)])[None, :]
    >>> float(source_rise(t, 0.9 * (1.0 - np.cos(2.0 * np.pi * t)), np.ones_like(t, dtype=bool))[0].round(6))
    1.8
    """
    found = np.tile(START, (rise.shape[0], 1))
    damping, weight = np.full(rise.shape[0], 1e-3), used.astype(np.float64)
    squares, gradient, normal = _sums(found, time, rise, weight)
    for _ in range(MOST_STEPS if rise.size else 0):
        damped = normal + damping[:, None, None] * normal * np.eye(3) + TINY * np.eye(3)
        tried = np.clip(found + np.linalg.solve(damped, gradient[..., None])[..., 0], LEAST, MOST)
        moved = float(np.max(np.abs(tried - found)))
        sums = _sums(tried, time, rise, weight)
        better = sums[0] < squares
        found, squares = np.where(better[:, None], tried, found), np.where(better, sums[0], squares)
        gradient, normal = np.where(better[:, None], sums[1], gradient), np.where(better[:, None, None], sums[2], normal)
        damping = np.where(better, 0.1 * damping, 10.0 * damping)
        if moved < TOLERANCE:
            break
    inside = np.all((found > LEAST) & (found < MOST), axis=1)
    return np.where(inside & used.any(axis=1), found[:, 0], np.nan)


def _sums(found: FloatArray, time: FloatArray, rise: FloatArray, weight: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return of each beat's cosine the sum of squares it leaves, shape (n_beats,), what pulls at A, omega and C, and the normal matrix."""
    amplitude, omega, phase = (found[:, [place]] for place in range(3))
    turn = omega * time + phase
    shape, lean = 0.5 * (1.0 - np.cos(turn)) * weight, 0.5 * amplitude * np.sin(turn) * weight
    left, slopes = rise * weight - amplitude * shape, (shape, time * lean, lean)
    gradient = np.stack([np.einsum("bs,bs->b", slope, left) for slope in slopes], axis=1)
    normal = np.stack([np.stack([np.einsum("bs,bs->b", one, other) for one in slopes], axis=1) for other in slopes], axis=2)
    return np.einsum("bs,bs->b", left, left), gradient, normal


def source_pressure(run: RunBeats) -> FloatArray:
    """Return the isovolumic source's Pmax of each chosen beat of a run, mmHg; NaN for a beat whose isovolumic parts carry no cosine."""
    beats, pressure_mmhg, rate_hz = run.beats, run.signals.pressure_mmhg, run.signals.sampling_rate_hz
    at = np.flatnonzero(run.chosen & (beats.dpdt_max_at >= 0) & (beats.dpdt_min_at >= 0))
    start, next_edp = beats.start[at], pressure_mmhg[beats.end[at]]
    relaxed = _first_below(pressure_mmhg, next_edp, beats.dpdt_min_at[at], beats.end[at] + 1)
    time, positions, used = _isovolumic(start, beats.dpdt_max_at[at], beats.dpdt_min_at[at], relaxed, max(1, round(rate_hz / ENOUGH_HZ)))
    edp, own = beats.edp_mmhg[at], beats.pmax_mmhg[at] - beats.edp_mmhg[at]
    known = used.any(axis=1) & (own > 0.0) & np.isfinite(pressure_mmhg[positions]).all(axis=1)
    rise = (pressure_mmhg[positions[known]] - edp[known, None]) / own[known, None]
    found = np.full(run.chosen.size, np.nan)
    found[at[known]] = edp[known] + source_rise(time[known], rise, used[known]) * own[known]
    return found[run.chosen]


def _isovolumic(
    start: IntArray, rising: IntArray, falling: IntArray, relaxed: IntArray, every: int
) -> tuple[FloatArray, IntArray, BoolArray]:
    """Return every n-th sample of start..rising and falling..relaxed, a row a beat: its time, its place, whether it counts.

    Time runs from 0 at start to 1 at relaxed. No sample of a beat counts where either part has too few.
    """
    before, after = (rising - start) // every + 1, (relaxed - falling) // every + 1
    column = np.arange(int(np.max(before + after, initial=0)))
    is_before = column < before[:, None]
    positions = np.where(is_before, start[:, None] + every * column, falling[:, None] + every * (column - before[:, None]))
    used = (column < (before + after)[:, None]) & (np.minimum(before, after) >= FEWEST_SAMPLES)[:, None]
    positions = np.where(used, positions, start[:, None])
    return (positions - start[:, None]) / np.maximum(relaxed - start, 1)[:, None], positions, used


def _first_below(pressure_mmhg: FloatArray, level_mmhg: FloatArray, start: IntArray, stop: IntArray) -> IntArray:
    """Return the first sample of each span at or below that span's level, the span's last where none is; shape (n_spans,)."""
    positions, owner = spans(start, stop)
    below = np.zeros(pressure_mmhg.size)
    hit = positions[pressure_mmhg[positions] <= level_mmhg[owner]]
    below[hit] = 1.0
    return argmax_within(below, start, stop)


def _sources(stage: StageBeats) -> FloatArray:
    """Return Pmax of the chosen steady beats of all runs, mmHg; raises `Withheld` when too few carry one.

    Half of the beats must: those whose fit ends on a bound are not the others' like.
    """
    found = np.concatenate([run.once(source_pressure) for run in stage.steady]) if stage.steady else np.empty(0)
    count, needed = int(np.isfinite(found).sum()), max(FEWEST_BEATS, -(-found.size // 2))
    if count < needed:
        message = f"the isovolumic parts of {count} of {found.size} accepted steady beats carry a pressure source where {needed} are needed"
        raise Withheld(message)
    return found


def elastance(stage: StageBeats) -> Estimate:
    """Return the single-beat Ees, mmHg/mL; raises `Withheld` when too few beats carry a source."""
    return median_estimate((_sources(stage) - stage.steady_end_systole[0]) / stage.steady_column("sv_ml"))


def coupling(stage: StageBeats) -> Estimate:
    """Return the single-beat Ees / Ea, dimensionless; raises `Withheld` when too few beats carry a source."""
    return median_estimate(_sources(stage) / stage.steady_end_systole[0] - 1.0)


def intercept(stage: StageBeats) -> Estimate:
    """Return the single-beat V0, mL; raises `Withheld` when too few beats carry a source."""
    source_mmhg = _sources(stage)
    per_ml = (source_mmhg - stage.steady_end_systole[0]) / stage.steady_column("sv_ml")
    return median_estimate(stage.steady_column("edv_ml") - source_mmhg / per_ml)


def _coupling_sensitivity(stage: StageBeats, value: float) -> Sensitivity:
    return Sensitivity(pressure_mmhg=-value / median_estimate(stage.steady_end_systole[0]).value)


def _intercept_sensitivity(stage: StageBeats, value: float) -> Sensitivity:
    return Sensitivity(pressure_mmhg=-1.0 / elastance(stage).value, volume_gain=value, volume_ml=1.0)


ESTIMATORS = {"LV": "single-beat:takeuchi", "RV": "single-beat:brimioulle"}
_NEEDS = (
    "the accepted beats of the stage's steady runs, their pressure from end-diastole to the end of relaxation sampled at 100 Hz or more"
)
_SHAPE = frozenset({"tau"})
"""Whatever bends the pressure's rise or fall reaches the source."""


def _elastance_of(chamber: str) -> Index:
    return Index(
        name="Ees",
        title="End-systolic elastance from single beats",
        unit="mm[Hg]/mL",
        estimator=ESTIMATORS[chamber],
        source=Source.STEADY,
        compute=elastance,
        needs=_NEEDS,
        sensitivity=powers(pressure_gain=1.0, volume_gain=-1.0),
        primary=False,
        chamber=chamber,
        isovolumic=True,
        rests_on=_SHAPE | {"SV"},
    )


def _intercept_of(chamber: str) -> Index:
    return Index(
        name="V0",
        title="Volume-axis intercept from single beats",
        unit="mL",
        estimator=ESTIMATORS[chamber],
        source=Source.STEADY,
        compute=intercept,
        needs=_NEEDS,
        sensitivity=_intercept_sensitivity,
        primary=False,
        chamber=chamber,
        isovolumic=True,
        rests_on=_SHAPE | {"SV", "EDV"},
    )


def _coupling_of(chamber: str) -> Index:
    return Index(
        name="Ees_Ea",
        title="Ventriculo-arterial coupling ratio from single beats, without a volume",
        unit="1",
        estimator=ESTIMATORS[chamber],
        source=Source.STEADY,
        compute=coupling,
        needs=_NEEDS,
        sensitivity=_coupling_sensitivity,
        primary=False,
        chamber=chamber,
        isovolumic=True,
        rests_on=_SHAPE,
    )


LEFT_ELASTANCE, RIGHT_ELASTANCE = _elastance_of("LV"), _elastance_of("RV")
LEFT_INTERCEPT, RIGHT_INTERCEPT = _intercept_of("LV"), _intercept_of("RV")
LEFT_COUPLING, RIGHT_COUPLING = _coupling_of("LV"), _coupling_of("RV")
