"""The slope of the largest dP/dt on end-diastolic volume: how much faster pressure rises for every mL of filling.

Little 1985, Circ Res 56:808 (from memory): close to the largest rate of rise of elastance. Of the slopes on load it moves most with
contractility and varies most from run to run (from memory). Freed, like PRSW, of what noise in the load takes from it.
"""

from __future__ import annotations

from metrics.indices.card import Estimate, Index, RunBeats, Source, StageBeats, powers
from metrics.indices.slopes import pooled_lines, slope_estimate
from metrics.signals.landmarks import landmark_noise_ml
from metrics.stats.lines import Line, unattenuated_line


def contractile_line(run: RunBeats) -> Line:
    """Return the line of the largest dP/dt on end-diastolic volume over the chosen beats; raises ValueError when they carry none."""
    return unattenuated_line(run.column("edv_ml"), run.column("dpdt_max_mmhg_per_s"), landmark_noise_ml(run.signals) ** 2)


def contractile_slope(stage: StageBeats) -> Estimate:
    """Return the slope, mmHg/s/mL; raises `Withheld` when no run carries a line."""
    return slope_estimate(pooled_lines(stage, contractile_line))


CONTRACTILE_SLOPE = Index(
    name="dPdt_max_EDV",
    title="Slope of the largest rate of pressure rise on end-diastolic volume",
    unit="mm[Hg]/s/mL",
    estimator="multi-beat:unattenuated",
    source=Source.PRELOAD,
    compute=contractile_slope,
    needs="at least 5 accepted beats in the usable window of a preload-reduction run, and a slope that can be told from zero",
    sensitivity=powers(pressure_gain=1.0, volume_gain=-1.0),
)
