"""Slopes over the usable window of preload-reduction runs: one line a run, runs of one manoeuvre pooled.

Runs are pooled by the mean of their lines (each run has its own baseline, so throwing all points on one heap would bend the slope).
Beats needed: 5-10 consecutive ones are usual (from memory).

The interval of a mean of runs takes the larger of two standard errors: what the runs' own fits leave open, and what the runs' scatter
about their mean shows. As far as the scatter exceeds the fits, the number of errors it reaches goes from t of all points to t of the runs.
That is bounded by t of 2 degrees, 4.3: two runs have 1, whose 12.7 would say nothing of any heart. So the 95 % interval covers 97 % where
runs differ by their fits alone, 92, 93 and 94 % of two, three and four runs that differ as much again, and at worst 83, 91 and 92 %, where
the fits' errors alone would cover 84 % and at last nothing (computed, 10 degrees a run). Two or three runs cannot tell more.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from metrics.indices.card import Estimate, RunBeats, StageBeats, Withheld
from metrics.stats.bootstrap import student
from metrics.stats.lines import Line

FEWEST_POINTS = 5
LEAST_FREEDOM = 2


@dataclass(frozen=True, slots=True)
class Pool:
    """The lines to pool, one a run, and for each run that carries none the reason."""

    lines: tuple[Line, ...]
    left_out: tuple[str, ...] = ()


def pooled_lines(stage: StageBeats, line_of: Callable[[RunBeats], Line]) -> Pool:
    """Return the line of every preload-reduction run of the stage that carries one.

    ``line_of`` takes a `RunBeats` and returns a `Line`. Raises `Withheld` when no run carries a line, with the last run's reason.
    """
    lines: list[Line] = []
    left_out: list[str] = []
    for run in stage.preload:
        try:
            line = _line(run, line_of)
        except (ValueError, Withheld) as trouble:
            left_out.append(f"run {run.run}: {trouble}")
            continue
        lines.append(line)
    if not lines:
        raise Withheld(left_out[-1] if left_out else "the stage has no usable preload-reduction run")
    return Pool(tuple(lines), tuple(left_out))


def _line(run: RunBeats, line_of: Callable[[RunBeats], Line]) -> Line:
    points = int(run.chosen.sum())
    if points < FEWEST_POINTS:
        message = f"{points} accepted beats in the usable window where {FEWEST_POINTS} are needed"
        raise Withheld(message)
    line = line_of(run)
    if not np.isfinite(line.slope) or line.slope <= 0.0:
        message = f"the slope is {line.slope:.3g}, not positive"
        raise Withheld(message)
    if line.fieller_g >= 1.0:
        message = f"the slope cannot be told from zero (Fieller g = {line.fieller_g:.2f})"
        raise Withheld(message)
    return line


def slope_estimate(pool: Pool) -> Estimate:
    """Return the mean slope with its 95 % interval."""
    lines = pool.lines
    low, high = [line.slope - line.slope_low for line in lines], [line.slope_high - line.slope for line in lines]
    return _mean_of_runs([line.slope for line in lines], low, high, pool)


def intercept_estimate(pool: Pool) -> Estimate:
    """Return the mean axis intercept with its 95 % interval, each side joined by itself because Fieller's is lopsided."""
    lines = pool.lines
    low, high = [line.axis_intercept - line.intercept_low for line in lines], [line.intercept_high - line.axis_intercept for line in lines]
    return _mean_of_runs([line.axis_intercept for line in lines], low, high, pool)


def _mean_of_runs(values: list[float], low: list[float], high: list[float], pool: Pool) -> Estimate:
    value = float(np.mean(values))
    scatter = float(np.std(values, ddof=1)) if len(values) > 1 else 0.0
    down, up = (_joint_half(halves, scatter, pool.lines) for halves in (low, high))
    notes: tuple[str, ...] = ()
    if down.is_widened or up.is_widened:
        notes = (f"its {len(values)} runs differ by more than their own fits leave open (SD {scatter:.3g}), which widens its interval",)
    points = sum(line.points for line in pool.lines)
    return Estimate(value, value - down.half, value + up.half, points, len(values), pool.left_out, notes)


@dataclass(frozen=True, slots=True)
class _Half:
    """Half an interval of a mean of runs; ``is_widened`` where the runs' scatter, not their fits, made it."""

    half: float
    is_widened: bool


def _joint_half(halves: list[float], scatter: float, lines: tuple[Line, ...]) -> _Half:
    """Return the half width of a mean of runs from each run's own and from the standard deviation of their values."""
    count = len(lines)
    errors = [half / student(line.points - 2) for half, line in zip(halves, lines, strict=True)]
    within, between = float(np.sqrt(np.sum(np.square(errors)))) / count, scatter / float(np.sqrt(count))
    reach = student(sum(line.points - 2 for line in lines))
    if between <= within:
        return _Half(reach * within, is_widened=False)
    beyond = student(max(count - 1, LEAST_FREEDOM)) - reach
    excess = 1.0 - (within / between) ** 2
    return _Half(between * (reach + excess * max(beyond, 0.0)), is_widened=True)
