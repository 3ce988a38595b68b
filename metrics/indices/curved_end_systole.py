"""End-systolic elastance and V0 by curves, beside the line's: estimators of their own, never primary.

Ees of a curve is its slope at a stated pressure, 100 mmHg in a left and 30 in a right ventricle (house default), and only where the
beats reach that pressure: Kass's b, the slope at V0', lies where no beat was seen. A parabola is not followed further below the data
than half their span either, so its V0 is most often withheld; a logarithm cannot turn round and is followed to its V0. Where the line's
AICc is smaller by more than 4 (house default) a curve has no say. The curves are those of `metrics.indices.end_systolic_curve`.
"""

from __future__ import annotations

from collections.abc import Callable
from contextlib import suppress

import numpy as np

from metrics.indices.card import Estimate, Index, RunBeats, Sensitivity, Source, StageBeats, Withheld
from metrics.indices.end_systolic_curve import DECISIVE, logarithmic, preferences, quadratic, relation_through
from metrics.indices.slopes import intercept_estimate, pooled_lines, slope_estimate
from metrics.stats.lines import Line

STATED_PRESSURE_MMHG = {"LV": 100.0, "RV": 30.0}
REACH = 0.5
"""How far beyond the end-systolic pressures, in spans of theirs, a relation may still be read; house default."""


def _reading(form: str, stage: StageBeats, *, to_axis: bool) -> Callable[[RunBeats], Line]:
    """Return what reads a run's relation at the stated pressure, or at the volume axis; it raises `Withheld` where it may not."""
    pressure_mmhg = 0.0 if to_axis else STATED_PRESSURE_MMHG[stage.chamber]

    def read(run: RunBeats) -> Line:
        against = next((found.gain for found in run.once(preferences) if found.form == form), 0.0)
        if against < -DECISIVE:
            message = f"a straight line describes the end-systolic points better (AICc smaller by {-against:.1f})"
            raise Withheld(message)
        relation = run.once(quadratic if form == "quadratic" else logarithmic)
        low, high = float(relation.pressure_mmhg.min()), float(relation.pressure_mmhg.max())
        if to_axis and form == "quadratic" and low > REACH * (high - low):
            message = f"the beats reach down to {low:.0f} mmHg only, and a parabola is not followed that far beyond them"
            raise Withheld(message)
        if not to_axis and not low <= pressure_mmhg <= high:
            message = f"the beats' end-systolic pressures, {low:.0f} to {high:.0f} mmHg, do not reach {pressure_mmhg:g}"
            raise Withheld(message)
        return relation.reading(pressure_mmhg)

    return read


def quadratic_elastance(stage: StageBeats) -> Estimate:
    """Return the parabola's slope at the stated pressure, mmHg/mL; raises `Withheld` when no run carries one there."""
    return slope_estimate(pooled_lines(stage, _reading("quadratic", stage, to_axis=False)))


def logarithmic_elastance(stage: StageBeats) -> Estimate:
    """Return the logarithm's slope at the stated pressure, mmHg/mL; raises `Withheld` when no run carries one there."""
    return slope_estimate(pooled_lines(stage, _reading("logarithmic", stage, to_axis=False)))


def quadratic_intercept(stage: StageBeats) -> Estimate:
    """Return the parabola's V0', mL; raises `Withheld` when no run's beats come near it."""
    return intercept_estimate(pooled_lines(stage, _reading("quadratic", stage, to_axis=True)))


def logarithmic_intercept(stage: StageBeats) -> Estimate:
    """Return the logarithm's V0, mL; raises `Withheld` when no run carries one."""
    return intercept_estimate(pooled_lines(stage, _reading("logarithmic", stage, to_axis=True)))


def _sensitivity(form: str, *, to_axis: bool) -> Callable[[StageBeats, float], Sensitivity]:
    """Return how a reading of a curve moves with the calibration: that of the same points, each error put on them in turn."""

    def moved(stage: StageBeats, value: float) -> Sensitivity:
        read = _reading(form, stage, to_axis=to_axis)
        pressure_mmhg = 0.0 if to_axis else STATED_PRESSURE_MMHG[stage.chamber]
        relations = []
        for run in stage.preload:
            with suppress(ValueError, Withheld):
                read(run)
                relations.append(run.once(quadratic if form == "quadratic" else logarithmic))

        def changed(gain: float = 1.0, offset_mmhg: float = 0.0, volume_gain: float = 1.0, offset_ml: float = 0.0) -> float:
            found = [
                relation_through(volume_gain * was.volume_ml + offset_ml, gain * was.pressure_mmhg + offset_mmhg, form) for was in relations
            ]
            return float(np.mean([one.v0_ml if to_axis else one.reading(pressure_mmhg).slope for one in found]))

        now, small = changed(), 1e-3
        return Sensitivity(
            pressure_gain=(changed(gain=1.0 + small) - now) / small,
            pressure_mmhg=(changed(offset_mmhg=small) - now) / small,
            volume_gain=value if to_axis else -value,
            volume_ml=(changed(offset_ml=small) - now) / small,
        )

    return moved


NEEDS = "at least 6 accepted beats in the usable window of a preload-reduction run, and points no straight line describes better"
QUADRATIC, LOGARITHMIC = "multi-beat:quadratic-iterated", "multi-beat:logarithmic-iterated"
RESTS_ON = frozenset({"V100"})

QUADRATIC_ELASTANCE = Index(
    name="Ees",
    title="End-systolic elastance at a stated pressure, by a parabola",
    unit="mm[Hg]/mL",
    estimator=QUADRATIC,
    source=Source.PRELOAD,
    compute=quadratic_elastance,
    needs=f"{NEEDS}; end-systolic pressures that reach 100 mmHg (LV) or 30 mmHg (RV)",
    sensitivity=_sensitivity("quadratic", to_axis=False),
    primary=False,
    rests_on=RESTS_ON,
)
LOGARITHMIC_ELASTANCE = Index(
    name="Ees",
    title="End-systolic elastance at a stated pressure, by a logarithm",
    unit="mm[Hg]/mL",
    estimator=LOGARITHMIC,
    source=Source.PRELOAD,
    compute=logarithmic_elastance,
    needs=f"{NEEDS}; end-systolic pressures that reach 100 mmHg (LV) or 30 mmHg (RV)",
    sensitivity=_sensitivity("logarithmic", to_axis=False),
    primary=False,
    rests_on=RESTS_ON,
)
QUADRATIC_INTERCEPT = Index(
    name="V0",
    title="Volume-axis intercept of the end-systolic parabola",
    unit="mL",
    estimator=QUADRATIC,
    source=Source.PRELOAD,
    compute=quadratic_intercept,
    needs=f"{NEEDS}; end-systolic pressures that come near 0",
    sensitivity=_sensitivity("quadratic", to_axis=True),
    primary=False,
)
LOGARITHMIC_INTERCEPT = Index(
    name="V0",
    title="Volume-axis intercept of the end-systolic logarithm",
    unit="mL",
    estimator=LOGARITHMIC,
    source=Source.PRELOAD,
    compute=logarithmic_intercept,
    needs=NEEDS,
    sensitivity=_sensitivity("logarithmic", to_axis=True),
    primary=False,
)
