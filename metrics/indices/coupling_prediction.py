"""Stroke volume and end-systolic pressure as the coupling equations foretell them, to be held against the measured ones.

Sunagawa 1985, Circ Res 56:586 (read): ``SV = Ees (EDV - V0) / (Ees + Ea)``, ``ESP = Ea SV``: where the end-systolic line and the arterial
one cross. Estimators of SV and ESP that are never primary. Ea is the measured one, so a prediction far from the measurement says that the
steady beats do not lie on the occlusion's line: contractility or the calibration changed between the runs. Both come out 1 to 3 % low in
sound hearts, which go on ejecting a little after end-systole (computed on simulated hearts).

The interval is of first order (derived). The crossing moves with the line's volume at that very pressure, by the share Ees / (Ees + Ea) of
it: slope and V0, whose errors belong together, need not be joined.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from metrics.indices.arterial_elastance import arterial_elastance
from metrics.indices.card import Estimate, Index, Sensitivity, Source, StageBeats
from metrics.indices.end_systolic_elastance import NEEDS as LINE_NEEDS
from metrics.indices.end_systolic_elastance import end_systolic_elastance, volume_intercept
from metrics.indices.end_systolic_position import volume_at
from metrics.indices.steady import median_estimate


def crossing(ees_mmhg_per_ml: float, v0_ml: float, ea_mmhg_per_ml: float, edv_ml: float) -> tuple[float, float]:
    """Return (stroke volume, end-systolic pressure), mL and mmHg, where the end-systolic and the arterial line cross.

    >>> crossing(2.0, 10.0, 2.0, 130.0)
    (60.0, 120.0)
    """
    sv_ml = ees_mmhg_per_ml * (edv_ml - v0_ml) / (ees_mmhg_per_ml + ea_mmhg_per_ml)
    return sv_ml, ea_mmhg_per_ml * sv_ml


def predicted_stroke_volume(stage: StageBeats) -> Estimate:
    """Return the stroke volume foretold, mL; raises `Withheld` without a line or with fewer than three steady beats."""
    ees, v0, ea, edv = _parts(stage)
    sv_ml, esp_mmhg = crossing(ees.value, v0.value, ea.value, edv.value)
    share = ees.value / (ees.value + ea.value)
    by = (share, share, sv_ml / (ees.value + ea.value))
    return _estimate(sv_ml, by, (volume_at(stage, esp_mmhg), edv, ea), v0)


def predicted_end_systolic_pressure(stage: StageBeats) -> Estimate:
    """Return the end-systolic pressure foretold, mmHg; raises `Withheld` without a line or with fewer than three steady beats."""
    ees, v0, ea, edv = _parts(stage)
    sv_ml, esp_mmhg = crossing(ees.value, v0.value, ea.value, edv.value)
    share = ees.value / (ees.value + ea.value)
    by = (ea.value * share, ea.value * share, sv_ml * share)
    return _estimate(esp_mmhg, by, (volume_at(stage, esp_mmhg), edv, ea), v0)


def _parts(stage: StageBeats) -> tuple[Estimate, Estimate, Estimate, Estimate]:
    """Return Ees, V0, Ea and EDV."""
    v0 = volume_intercept(stage)
    return end_systolic_elastance(stage), v0, arterial_elastance(stage), median_estimate(stage.steady_column("edv_ml"))


def _estimate(value: float, by: tuple[float, ...], parts: tuple[Estimate, ...], line: Estimate) -> Estimate:
    """Return a value with its parts' half widths joined in quadrature, each times how the value moves with it."""
    halves = [
        weight * (part.fit_high - part.fit_low) / 2.0
        for weight, part in zip(by, parts, strict=True)
        if part.fit_low is not None and part.fit_high is not None
    ]
    half = float(np.sqrt(np.sum(np.square(halves)))) if len(halves) == len(parts) else None
    low, high = (None, None) if half is None else (value - half, value + half)
    return replace(line, value=value, fit_low=low, fit_high=high, notes=())


def _stroke_volume_sensitivity(stage: StageBeats, value: float) -> Sensitivity:
    return Sensitivity(pressure_mmhg=_by_mmhg(stage), volume_gain=value)


def _pressure_sensitivity(stage: StageBeats, value: float) -> Sensitivity:
    _, _, ea, _ = _parts(stage)
    sv_ml = median_estimate(stage.steady_column("sv_ml")).value
    return Sensitivity(pressure_gain=value, pressure_mmhg=value / ea.value / sv_ml + ea.value * _by_mmhg(stage))


def _by_mmhg(stage: StageBeats) -> float:
    """Return by how much the stroke volume foretold moves with the pressure's zero, mL/mmHg: not at all where it is the measured one."""
    ees, v0, ea, edv = _parts(stage)
    foretold_ml, _ = crossing(ees.value, v0.value, ea.value, edv.value)
    sv_ml = median_estimate(stage.steady_column("sv_ml")).value
    return (1.0 - foretold_ml / sv_ml) / (ees.value + ea.value)


_NEEDS = f"what Ees needs ({LINE_NEEDS}), and at least 3 accepted steady beats"
_RESTS_ON = frozenset({"Ees", "V0", "Ea", "EDV"})

PREDICTED_STROKE_VOLUME = Index(
    name="SV",
    title="Stroke volume foretold by coupling",
    unit="mL",
    estimator="coupling-predicted",
    source=Source.BOTH,
    compute=predicted_stroke_volume,
    needs=_NEEDS,
    sensitivity=_stroke_volume_sensitivity,
    primary=False,
    rests_on=_RESTS_ON,
)
PREDICTED_END_SYSTOLIC_PRESSURE = Index(
    name="ESP",
    title="End-systolic pressure foretold by coupling",
    unit="mm[Hg]",
    estimator="coupling-predicted",
    source=Source.BOTH,
    compute=predicted_end_systolic_pressure,
    needs=_NEEDS,
    sensitivity=_pressure_sensitivity,
    primary=False,
    rests_on=_RESTS_ON,
)
