"""What a beat's oxygen pays for: potential energy, the pressure-volume area, and the share of it that is external work.

Suga 1982, Jpn Heart J 23:749 (read), and 1990, Physiol Rev 70:247 (cited): ``PVA = SW + PE``, ``PE = ESP (ESV - V0) / 2`` with V0 of the
stage's end-systolic line, and efficiency = SW / PVA, which for a rectangle on the volume axis is ``1 / (1 + Ea / (2 Ees))`` (derived).

The strip under the passive curve from V0 to ESV, which PE would lose, is neglected, as it often is (from memory), and the estimators'
names say so: no beat of an occlusion is filled as little as that, so its height would be a passive curve followed to where it was not
seen. V0 is itself an extrapolation: where its line is known badly, or the points bend, so are these.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from metrics.arrays import FloatArray
from metrics.indices.card import Estimate, Index, Sensitivity, Source, StageBeats, Withheld
from metrics.indices.end_systolic_elastance import NEEDS as LINE_NEEDS
from metrics.indices.end_systolic_elastance import end_systolic_elastance, volume_intercept
from metrics.indices.steady import median_estimate


def triangle(esp_mmhg: FloatArray, esv_ml: FloatArray, v0_ml: float) -> FloatArray:
    """Return the area under the end-systolic line from V0 to each end-systolic volume, mmHg mL; shape of ``esp_mmhg``.

    >>> triangle(np.array([100.0]), np.array([50.0]), 10.0).tolist()
    [2000.0]
    """
    area: FloatArray = 0.5 * esp_mmhg * (esv_ml - v0_ml)
    return area


def potential_energy(stage: StageBeats) -> Estimate:
    """Return PE, mmHg mL; raises `Withheld` without a line or with fewer than three steady beats, or when V0 is not below ESV."""
    energy, v0 = _triangles(stage)
    return _with_intercept(median_estimate(energy), -0.5 * median_estimate(stage.steady_end_systole[0]).value, v0)


def pressure_volume_area(stage: StageBeats) -> Estimate:
    """Return PVA = SW + PE, mmHg mL; raises `Withheld` as `potential_energy` does."""
    energy, v0 = _triangles(stage)
    by_v0 = -0.5 * median_estimate(stage.steady_end_systole[0]).value
    return _with_intercept(median_estimate(stage.steady_column("sw_mmhg_ml") + energy), by_v0, v0)


def efficiency(stage: StageBeats) -> Estimate:
    """Return SW / PVA, dimensionless; raises `Withheld` as `potential_energy` does."""
    energy, v0 = _triangles(stage)
    work = stage.steady_column("sw_mmhg_ml")
    found = median_estimate(work / (work + energy))
    whole = median_estimate(work + energy).value
    return _with_intercept(found, 0.5 * median_estimate(stage.steady_end_systole[0]).value * found.value / whole, v0)


def _triangles(stage: StageBeats) -> tuple[FloatArray, Estimate]:
    """Return each chosen steady beat's potential energy, and V0."""
    v0 = volume_intercept(stage)
    energy = triangle(stage.steady_end_systole[0], stage.steady_column("esv_ml"), v0.value)
    if median_estimate(energy).value <= 0.0:
        message = f"V0 of the end-systolic line, {v0.value:.0f} mL, does not lie below the end-systolic volume"
        raise Withheld(message)
    return energy, v0


def _with_intercept(steady: Estimate, by_v0: float, v0: Estimate) -> Estimate:
    """Return a steady median whose interval also holds what V0's leaves open, each side by itself (first order, derived)."""
    known = (steady.fit_low, steady.fit_high, v0.fit_low, v0.fit_high)
    joined = replace(v0, value=steady.value, fit_low=None, fit_high=None)
    if None in known:
        return joined
    low, high, v0_low, v0_high = (float(bound) for bound in known if bound is not None)
    moved = sorted((by_v0 * (v0_low - v0.value), by_v0 * (v0_high - v0.value)))
    down, up = np.hypot(steady.value - low, moved[0]), np.hypot(high - steady.value, moved[1])
    return replace(joined, fit_low=float(steady.value - down), fit_high=float(steady.value + up))


def _energy_by_mmhg(stage: StageBeats) -> float:
    """Return by how much PE moves with the pressure's zero, mL: the triangle grows by what it is wide, as V0 moves to the left."""
    esp = median_estimate(stage.steady_end_systole[0]).value
    wide_ml = median_estimate(stage.steady_column("esv_ml")).value - volume_intercept(stage).value
    return 0.5 * (wide_ml + esp / end_systolic_elastance(stage).value)


def _area_sensitivity(stage: StageBeats, value: float) -> Sensitivity:
    return Sensitivity(pressure_gain=value, pressure_mmhg=_energy_by_mmhg(stage), volume_gain=value)


def _efficiency_sensitivity(stage: StageBeats, value: float) -> Sensitivity:
    return Sensitivity(pressure_mmhg=-value * _energy_by_mmhg(stage) / pressure_volume_area(stage).value)


_NEEDS = f"what V0 needs ({LINE_NEEDS}), and at least 3 accepted steady beats"

POTENTIAL_ENERGY = Index(
    name="PE",
    title="Potential energy",
    unit="mm[Hg].mL",
    estimator="whole-triangle",
    source=Source.BOTH,
    compute=potential_energy,
    needs=_NEEDS,
    sensitivity=_area_sensitivity,
)
PRESSURE_VOLUME_AREA = Index(
    name="PVA",
    title="Pressure-volume area",
    unit="mm[Hg].mL",
    estimator="loop-and-whole-triangle",
    source=Source.BOTH,
    compute=pressure_volume_area,
    needs=_NEEDS,
    sensitivity=_area_sensitivity,
)
EFFICIENCY = Index(
    name="efficiency",
    title="Mechanical efficiency",
    unit="1",
    estimator="loop-and-whole-triangle",
    source=Source.BOTH,
    compute=efficiency,
    needs=_NEEDS,
    sensitivity=_efficiency_sensitivity,
)
