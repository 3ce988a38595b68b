"""Preload-recruitable stroke work: the slope of stroke work on end-diastolic volume, SW = Mw * (EDV - Vw).

Glower 1985, Circulation 71:994 (from memory). Independent of volume gain and offset (derived), so it survives faults Ees does not.
"""

from __future__ import annotations

import numpy as np

from metrics.indices.card import Estimate, Index, RunBeats, Source, StageBeats
from metrics.indices.end_systole import noise_ratio
from metrics.indices.slopes import pooled_lines, slope_estimate
from metrics.stats.lines import Line, deming_line


def recruitable_work_line(run: RunBeats) -> Line:
    """Return the two-axis line of stroke work on end-diastolic volume over the chosen beats; raises ValueError when they carry none."""
    return deming_line(run.column("edv_ml"), run.column("sw_mmhg_ml"), area_noise_ratio(run))


def area_noise_ratio(run: RunBeats) -> float:
    """Return var(error of a loop's area) / var(error of one volume), mmHg2, for the typical chosen beat.

    To first order noise moves the polygon's area by the sum of dP_i * (V_i+1 - V_i-1) / 2 and dV_i * (P_i+1 - P_i-1) / 2, so its
    variance is noise var(P) * sum(dV^2) / 4 + var(V) * sum(dP^2) / 4 (derived).
    """
    across = [np.square(values[2:] - values[:-2]) / 4.0 for values in (run.signals.volume_ml, run.signals.pressure_mmhg)]
    start, end = run.beats.start[run.chosen], run.beats.end[run.chosen]
    sums = [np.concatenate([[0.0], np.cumsum(parts)]) for parts in across]
    by_volume, by_pressure = (total[np.minimum(end, total.size - 1)] - total[start] for total in sums)
    return max(float(np.median(noise_ratio(run.signals) * by_volume + by_pressure)), 1e-9)


def recruitable_work(stage: StageBeats) -> Estimate:
    """Return the slope Mw, mmHg (mmHg mL per mL); raises `Withheld` when no run carries a line."""
    return slope_estimate(pooled_lines(stage, recruitable_work_line))


RECRUITABLE_WORK = Index(
    name="PRSW",
    title="Preload-recruitable stroke work",
    unit="mm[Hg]",
    estimator="multi-beat:two-axis",
    source=Source.PRELOAD,
    compute=recruitable_work,
    needs="at least 5 accepted beats in the usable window of a preload-reduction run, and a slope that can be told from zero",
)
