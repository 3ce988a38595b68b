"""The end-diastolic curve of a left ventricle from one beat, by the shape that human ventricles share.

Klotz 2006, Am J Physiol 291:H403 (from memory): Vn = (V - V0) / (V30 - V0), P = An Vn^Bn with An 27.78 mmHg and Bn 2.76 (both read in a
quotation of Klotz 2007, Nat Protoc 2:2152), V0 = Vm (0.6 - 0.006 Pm) from the measured end-diastolic point (from memory). The curve
published is the power P = alpha V^beta through that point and 30 mmHg; above 22 mmHg, where 30 is too near, through 15 mmHg instead (from
memory). It is for passive left ventricles with 5 to 30 mmHg, not for the right one, nor for constriction or tamponade (from memory), and
never the primary estimator: it says what is usual for such a point, not what this ventricle does.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from metrics.arrays import FloatArray
from metrics.indices.card import Estimate, Index, Sensitivity, Source, StageBeats, Withheld
from metrics.indices.diastolic_stiffness import STIFFNESS_AT_MMHG
from metrics.indices.steady import FEWEST_BEATS, median_estimate

AN_MMHG, BN = 27.78, 2.76
HIGH_MMHG = 22.0
LOWEST_MMHG, HIGHEST_MMHG = 5.0, 30.0


@dataclass(frozen=True, slots=True)
class KlotzCurve:
    """P = alpha V^beta for each end-diastolic point, arrays of its shape; alpha is told by its logarithm, for it is very small."""

    v0_ml: FloatArray
    v30_ml: FloatArray
    exponent: FloatArray
    log_factor: FloatArray

    def volume_at_ml(self, pressure_mmhg: float) -> FloatArray:
        """Return the volume at a pressure."""
        volume: FloatArray = np.exp((np.log(pressure_mmhg) - self.log_factor) / self.exponent)
        return volume

    def stiffness_mmhg_per_ml(self, pressure_mmhg: float) -> FloatArray:
        """Return dP/dV at a pressure."""
        return self.exponent * pressure_mmhg / self.volume_at_ml(pressure_mmhg)


def klotz_curve(volume_ml: FloatArray, pressure_mmhg: FloatArray, an_mmhg: float = AN_MMHG) -> KlotzCurve:
    """Return the curve through each end-diastolic point, NaN outside 5 to 30 mmHg; ``an_mmhg`` is also printed as 27.8.

    >>> curve = klotz_curve(np.array([120.0]), np.array([12.0]))
    >>> curve.v0_ml.round(2).tolist(), curve.v30_ml.round(2).tolist()
    ([63.36], [140.13])
    """
    known = (pressure_mmhg >= LOWEST_MMHG) & (pressure_mmhg <= HIGHEST_MMHG) & (volume_ml > 0.0)
    volume, pressure = np.where(known, volume_ml, np.nan), np.where(known, pressure_mmhg, np.nan)
    v0_ml = volume * (0.6 - 0.006 * pressure)
    v30_ml = v0_ml + (volume - v0_ml) / (pressure / an_mmhg) ** (1.0 / BN)
    v15_ml = 0.8 * (v30_ml - v0_ml) + v0_ml
    other_ml, other_mmhg = np.where(pressure > HIGH_MMHG, v15_ml, v30_ml), np.where(pressure > HIGH_MMHG, 15.0, 30.0)
    exponent = np.log(pressure / other_mmhg) / np.log(volume / other_ml)
    return KlotzCurve(v0_ml, v30_ml, exponent, np.log(pressure) - exponent * np.log(volume))


Quantity = Callable[[KlotzCurve], FloatArray]


def _volume_at_20(curve: KlotzCurve) -> FloatArray:
    return curve.volume_at_ml(20.0)


def _volume_at_30(curve: KlotzCurve) -> FloatArray:
    return curve.v30_ml


def _stiffness(curve: KlotzCurve) -> FloatArray:
    return curve.stiffness_mmhg_per_ml(STIFFNESS_AT_MMHG)


def klotz_median(stage: StageBeats, quantity: Quantity) -> Estimate:
    """Return the median of what each accepted steady beat's curve says; raises `Withheld` where end-diastolic pressures forbid it."""
    pressure = stage.steady_column("edp_mmhg")
    values = quantity(klotz_curve(stage.steady_column("edv_ml"), pressure))
    if pressure.size >= FEWEST_BEATS and not LOWEST_MMHG <= np.nanmedian(pressure) <= HIGHEST_MMHG:
        message = (
            f"an end-diastolic pressure of {np.nanmedian(pressure):.1f} mmHg is outside "
            f"{LOWEST_MMHG:g} to {HIGHEST_MMHG:g} mmHg, where the method holds"
        )
        raise Withheld(message)
    return median_estimate(values)


def _computed(quantity: Quantity) -> Callable[[StageBeats], Estimate]:
    return lambda stage: klotz_median(stage, quantity)


_STEP = 1e-4
"""What a derivative is read over: of a gain, mmHg or mL."""


def _calibration(quantity: Quantity) -> Callable[[StageBeats, float], Sensitivity]:
    def sensitivity(stage: StageBeats, _value: float) -> Sensitivity:
        volume, pressure = stage.steady_column("edv_ml"), stage.steady_column("edp_mmhg")
        here = quantity(klotz_curve(volume, pressure))
        there = (
            quantity(klotz_curve(volume, pressure * (1.0 + _STEP))),
            quantity(klotz_curve(volume, pressure + _STEP)),
            quantity(klotz_curve(volume * (1.0 + _STEP), pressure)),
            quantity(klotz_curve(volume + _STEP, pressure)),
        )
        by = [float(np.nanmedian((moved - here) / _STEP)) for moved in there]
        return Sensitivity(*by)

    return sensitivity


def _card(name: str, title: str, unit: str, quantity: Quantity) -> Index:
    return Index(
        name=name,
        title=f"{title}, single beat",
        unit=unit,
        estimator="single-beat:klotz",
        source=Source.STEADY,
        compute=_computed(quantity),
        needs="at least 3 accepted steady beats of a left ventricle, end-diastolic pressure 5 to 30 mmHg",
        sensitivity=_calibration(quantity),
        primary=False,
        chamber="LV",
        rests_on=frozenset({"EDP", "V20"}),
    )


KLOTZ_STIFFNESS = _card("EDPVR_stiffness", "Slope of the end-diastolic curve at 10 mmHg", "mm[Hg]/mL", _stiffness)
KLOTZ_VOLUME_AT_20 = _card("V20", "Volume at 20 mmHg on the end-diastolic curve", "mL", _volume_at_20)
KLOTZ_VOLUME_AT_30 = _card("V30", "Volume at 30 mmHg on the end-diastolic curve", "mL", _volume_at_30)
