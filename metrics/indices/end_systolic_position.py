"""Where the end-systolic line lies: the volume at 100 and at 120 mmHg of end-systolic pressure.

``V100 = V0 + 100 / Ees`` (from memory): read where beats were seen, or near, it is far firmer than V0, and tells a shift of the line that
neither slope nor V0 tells alone. Its interval is Fieller's of the line at that pressure, so that the errors of slope and V0, which nearly
cancel there, are never joined as if they were independent. Published only where the pressure lies among the end-systolic pressures or
within half their span of them (house default).

For a left ventricle. A right one hardly reaches 100 mmHg; the volumes at 20 and 30 mmHg that bear the names V20 and V30 are those of
the passive curve (Burkhoff 2005, Am J Physiol 289:H501, from memory), and an end-systolic volume under the same name would be taken for
another heart's filling. So a right ventricle's end-systolic line is told by Ees and V0 alone.
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


VOLUME_AT_100 = Index(
    name="V100",
    title="End-systolic volume at 100 mmHg",
    unit="mL",
    estimator=ESTIMATOR,
    source=Source.PRELOAD,
    compute=position(100.0),
    needs=f"{NEEDS}; end-systolic pressures that come near 100 mmHg",
    sensitivity=_sensitivity(100.0),
    chamber="LV",
)
VOLUME_AT_120 = Index(
    name="V120",
    title="End-systolic volume at 120 mmHg",
    unit="mL",
    estimator=ESTIMATOR,
    source=Source.PRELOAD,
    compute=position(120.0),
    needs=f"{NEEDS}; end-systolic pressures that come near 120 mmHg",
    sensitivity=_sensitivity(120.0),
    chamber="LV",
)
