"""Where the end-systolic line lies: the volume at 100 and at 120 mmHg of end-systolic pressure.

``V100 = V0 + 100 / Ees`` (from memory): read where beats were seen, or near, it is far firmer than V0, and tells a shift of the line that
neither slope nor V0 tells alone. Its interval is Fieller's of the line at that pressure, so that the errors of slope and V0, which nearly
cancel there, are never joined as if they were independent. Published only where the pressure lies among the end-systolic pressures or
within half their span of them (house default).

V100 and V120 are a left ventricle's. A right one hardly reaches 100 mmHg and is read at 20 and 30; but V20 and V30 are, first of all,
volumes of the passive curve (Burkhoff 2005, Am J Physiol 289:H501, from memory), another quantity altogether. So the end-systolic ones
stand under those names as an estimator that is never primary and says what it is.
"""

from __future__ import annotations

from collections.abc import Callable

from metrics.indices.card import Estimate, Index, RunBeats, Sensitivity, Source, StageBeats, Withheld
from metrics.indices.curved_end_systole import REACH
from metrics.indices.end_systole import noise_ratio
from metrics.indices.end_systolic_elastance import ESTIMATOR, NEEDS, end_systolic_elastance
from metrics.indices.slopes import intercept_estimate, pooled_lines
from metrics.stats.lines import Line, deming_line


def line_at(run: RunBeats, pressure_mmhg: float) -> Line:
    """Return the run's end-systolic line with its axis moved up to a pressure: its axis intercept is the volume there.

    Raises ValueError when the run's beats carry no line.
    """
    points = run.end_systolic_line
    return deming_line(points.volume_ml, points.pressure_mmhg - pressure_mmhg, noise_ratio(run.signals))


def volume_at(stage: StageBeats, pressure_mmhg: float) -> Estimate:
    """Return the volume at which the stage's end-systolic lines reach a pressure, mL, wherever the beats lie.

    Raises `Withheld` when no run carries a line.
    """
    return intercept_estimate(pooled_lines(stage, lambda run: line_at(run, pressure_mmhg)))


def position(pressure_mmhg: float) -> Callable[[StageBeats], Estimate]:
    """Return the index computation of the volume at a pressure; it raises `Withheld` when no run's beats come near that pressure."""

    def near(run: RunBeats) -> Line:
        line = line_at(run, pressure_mmhg)
        reached = run.end_systolic_line.pressure_mmhg
        low, high = float(reached.min()), float(reached.max())
        if not low - REACH * (high - low) <= pressure_mmhg <= high + REACH * (high - low):
            message = f"{pressure_mmhg:g} mmHg lies too far from the beats' end-systolic pressures, {low:.0f} to {high:.0f} mmHg"
            raise Withheld(message)
        return line

    return lambda stage: intercept_estimate(pooled_lines(stage, near))


def _sensitivity(pressure_mmhg: float) -> Callable[[StageBeats, float], Sensitivity]:
    def moved(stage: StageBeats, value: float) -> Sensitivity:
        per_mmhg = -1.0 / end_systolic_elastance(stage).value
        return Sensitivity(pressure_gain=pressure_mmhg * per_mmhg, pressure_mmhg=per_mmhg, volume_gain=value, volume_ml=1.0)

    return moved


def _card(pressure_mmhg: float, chamber: str) -> Index:
    """Return the card of the volume at a pressure: an index of its own in a left ventricle, beside the passive curve's in a right one."""
    is_left = chamber == "LV"
    return Index(
        name=f"V{pressure_mmhg:.0f}",
        title=f"End-systolic volume at {pressure_mmhg:.0f} mmHg",
        unit="mL",
        estimator=ESTIMATOR if is_left else f"end-systolic:{ESTIMATOR}",
        source=Source.PRELOAD,
        compute=position(pressure_mmhg),
        needs=f"{NEEDS}; end-systolic pressures that come near {pressure_mmhg:.0f} mmHg",
        sensitivity=_sensitivity(pressure_mmhg),
        primary=is_left,
        chamber=chamber,
        rests_on=frozenset() if is_left else frozenset({"V100"}),
    )


VOLUME_AT_100 = _card(100.0, "LV")
VOLUME_AT_120 = _card(120.0, "LV")
RIGHT_VOLUME_AT_20 = _card(20.0, "RV")
RIGHT_VOLUME_AT_30 = _card(30.0, "RV")
