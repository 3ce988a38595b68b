"""Slopes over the usable window of preload-reduction runs: one line a run, runs of one manoeuvre pooled.

Runs are pooled by the mean of their lines (each run has its own baseline, so throwing all points on one heap would bend the slope);
the interval then joins the runs' own. Beats needed: 5-10 consecutive ones are usual (from memory).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy import stats

from metrics.indices.card import Estimate, RunBeats, StageBeats, Withheld
from metrics.stats.lines import Line

FEWEST_POINTS = 5


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
    """Return the mean slope with its 95 % t interval."""
    lines = pool.lines
    value = float(np.mean([line.slope for line in lines]))
    half = _joint_half([(line.slope_high - line.slope_low) / 2.0 for line in lines], lines)
    return Estimate(value, value - half, value + half, sum(line.points for line in lines), len(lines), pool.left_out)


def intercept_estimate(pool: Pool) -> Estimate:
    """Return the mean axis intercept with its 95 % Fieller interval, each side joined by itself because Fieller's is lopsided."""
    lines = pool.lines
    value = float(np.mean([line.axis_intercept for line in lines]))
    down = _joint_half([line.axis_intercept - line.intercept_low for line in lines], lines)
    up = _joint_half([line.intercept_high - line.axis_intercept for line in lines], lines)
    return Estimate(value, value - down, value + up, sum(line.points for line in lines), len(lines), pool.left_out)


def _joint_half(halves: list[float], lines: tuple[Line, ...]) -> float:
    """Return the half width of a mean of independent estimates: the runs' standard errors in quadrature, the runs' freedom added up."""
    freedom = sum(line.points - 2 for line in lines)
    errors = [half / float(stats.t.ppf(0.975, line.points - 2)) for half, line in zip(halves, lines, strict=True)]
    return float(stats.t.ppf(0.975, freedom) * np.sqrt(np.sum(np.square(errors))) / len(lines))
