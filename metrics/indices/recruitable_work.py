"""Preload-recruitable stroke work: the slope of stroke work on end-diastolic volume, SW = Mw * (EDV - Vw).

Glower 1985, Circulation 71:994 (from memory). Independent of volume gain and offset (derived), so it survives faults Ees does not.
"""

from __future__ import annotations

from metrics.indices.card import Estimate, Index, RunBeats, Source, StageBeats, powers
from metrics.indices.slopes import pooled_lines, slope_estimate
from metrics.signals.landmarks import landmark_noise_ml
from metrics.stats.lines import Line, unattenuated_line


def recruitable_work_line(run: RunBeats) -> Line:
    """Return the line of stroke work on end-diastolic volume over the chosen beats; raises ValueError when they carry none.

    End-diastole comes before the beat's own force, so what scatters work beyond noise (curvature, force) is no error of the load.
    """
    return unattenuated_line(run.column("edv_ml"), run.column("sw_mmhg_ml"), landmark_noise_ml(run.signals) ** 2)


def recruitable_work(stage: StageBeats) -> Estimate:
    """Return the slope Mw, mmHg (mmHg mL per mL); raises `Withheld` when no run carries a line."""
    return slope_estimate(pooled_lines(stage, recruitable_work_line))


RECRUITABLE_WORK = Index(
    name="PRSW",
    title="Preload-recruitable stroke work",
    unit="mm[Hg]",
    estimator="multi-beat:unattenuated",
    source=Source.PRELOAD,
    compute=recruitable_work,
    needs="at least 5 accepted beats in the usable window of a preload-reduction run, and a slope that can be told from zero",
    sensitivity=powers(pressure_gain=1.0),
)
