"""The end-diastolic pressure-volume relation over the usable window of preload-reduction runs: how stiff the relaxed ventricle is.

Two curves (both read in a table of PMC8024231), never to be mixed: P = alpha exp(beta V) + c, primary, and P = alpha V^beta. Both by least
squares on pressure, never on its logarithm: to leave out c = 2 mmHg turns beta 0.030 into 0.025 (computed). Alpha and beta go together
(correlation near -1), so alpha is not published, and what compares ventricles is the slope dP/dV at 10 mmHg and the volume at 20 and at
30 mmHg (Burkhoff 2005, Am J Physiol 289:H501, from memory). The exponent of the power curve has no unit and is no beta.

Runs are pooled by the mean of what each says; the interval is t from the fit's linear covariance. A value is withheld where it cannot be
told from zero, and where its pressure is one the ventricle never came near: a curve says nothing of where no beat was.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from scipy import stats

from metrics.indices.card import Estimate, Index, RunBeats, Sensitivity, Source, StageBeats, Withheld
from metrics.indices.diastolic_curve import PassiveCurve, Reading, end_diastolic_points, exponential_curve, power_curve, reading

STIFFNESS_AT_MMHG = 10.0
BEYOND_SHARE = 0.5
"""A pressure may lie beyond the points by this share of their range, which is about a quarter of the volumes' range; house default."""

CurveOf = Callable[[RunBeats], PassiveCurve]
ReadingOf = Callable[[RunBeats], Reading]


def exponential_of(run: RunBeats) -> PassiveCurve:
    """Return the exponential with offset through a run's end-diastolic points; raises `Withheld` where there is none."""
    return exponential_curve(*end_diastolic_points(run))


def power_of(run: RunBeats) -> PassiveCurve:
    """Return the power curve through a run's end-diastolic points; raises `Withheld` where there is none."""
    return power_curve(*end_diastolic_points(run))


def beta_of(run: RunBeats) -> Reading:
    """Return beta of the exponential, 1/mL; raises `Withheld` where the curve cannot be told from a straight line."""
    found = reading(run.once(exponential_of), PassiveCurve.beta_per_ml)
    if found.value - _t(found.freedom) * found.error <= 0.0:
        message = f"the points cannot be told from a straight line (beta {found.value:.3g} +/- {_t(found.freedom) * found.error:.2g} /mL)"
        raise Withheld(message)
    return found


def stiffness_of(curve_of: CurveOf) -> ReadingOf:
    """Return what reads dP/dV at 10 mmHg from a run's curve, mmHg/mL."""
    return lambda run: _stiffness_at(run.once(curve_of), STIFFNESS_AT_MMHG)


def volume_of(curve_of: CurveOf, pressure_mmhg: float) -> ReadingOf:
    """Return what reads the volume at a pressure from a run's curve, mL."""

    def volume(run: RunBeats) -> Reading:
        curve = run.once(curve_of)
        _stiffness_at(curve, pressure_mmhg)
        return reading(curve, lambda one: one.volume_at_ml(pressure_mmhg))

    return volume


def _stiffness_at(curve: PassiveCurve, pressure_mmhg: float) -> Reading:
    """Return the slope at a pressure; raises `Withheld` where no point is near that pressure or the slope may be zero."""
    low, high = float(curve.pressure_mmhg.min()), float(curve.pressure_mmhg.max())
    beyond = BEYOND_SHARE * (high - low)
    if not low - beyond <= pressure_mmhg <= high + beyond:
        message = f"end-diastolic pressures from {low:.1f} to {high:.1f} mmHg say nothing of {pressure_mmhg:g} mmHg"
        raise Withheld(message)
    found = reading(curve, lambda one: one.stiffness_mmhg_per_ml(pressure_mmhg))
    if not found.value - _t(found.freedom) * found.error > 0.0:
        message = f"the slope of the curve at {pressure_mmhg:g} mmHg cannot be told from zero"
        raise Withheld(message)
    return found


def _t(freedom: int) -> float:
    return float(stats.t.ppf(0.975, freedom))


def pooled_readings(stage: StageBeats, reading_of: ReadingOf) -> tuple[list[Reading], tuple[str, ...]]:
    """Return what the curve of every preload-reduction run says, and why the others say nothing; raises `Withheld` where none does."""
    found: list[Reading] = []
    left_out: list[str] = []
    for run in stage.preload:
        try:
            found.append(reading_of(run))
        except Withheld as trouble:
            left_out.append(f"run {run.run}: {trouble}")
    if not found:
        raise Withheld(left_out[-1] if left_out else "the stage has no usable preload-reduction run")
    return found, tuple(left_out)


def _pooled(reading_of: ReadingOf) -> Callable[[StageBeats], Estimate]:
    def compute(stage: StageBeats) -> Estimate:
        found, left_out = pooled_readings(stage, reading_of)
        value = float(np.mean([one.value for one in found]))
        half = _t(sum(one.freedom for one in found)) * float(np.sqrt(sum(one.error**2 for one in found))) / len(found)
        return Estimate(value, value - half, value + half, sum(one.points for one in found), len(found), left_out)

    return compute


def _calibration(reading_of: ReadingOf) -> Callable[[StageBeats, float], Sensitivity]:
    def sensitivity(stage: StageBeats, _value: float) -> Sensitivity:
        moved_by = np.mean([one.moved_by for one in pooled_readings(stage, reading_of)[0]], axis=0)
        return Sensitivity(*(float(by) for by in moved_by))

    return sensitivity


def _beta_calibration(_stage: StageBeats, value: float) -> Sensitivity:
    return Sensitivity(volume_gain=-value)


_NEEDS = "at least 5 accepted beats in the usable window of a preload-reduction run"
_EXPONENTIAL, _POWER = "exponential-offset", "power"


def _card(name: str, title: str, unit: str, estimator: str, reading_of: ReadingOf, needs: str) -> Index:
    is_power = estimator == _POWER
    return Index(
        name=name,
        title=title,
        unit=unit,
        estimator=estimator,
        source=Source.PRELOAD,
        compute=_pooled(reading_of),
        needs=f"{_NEEDS}, and {needs}",
        sensitivity=_calibration(reading_of),
        primary=not is_power,
        # a power has no offsets of its own to take up those of the sensors
        rests_on=frozenset({"V20"}) if is_power else frozenset(),
    )


BETA = Index(
    name="EDPVR_beta",
    title="Exponent of the end-diastolic curve",
    unit="/mL",
    estimator=_EXPONENTIAL,
    source=Source.PRELOAD,
    compute=_pooled(beta_of),
    needs=f"{_NEEDS}, and points that can be told from a straight line",
    sensitivity=_beta_calibration,
)
_AT_10 = ("EDPVR_stiffness", "Slope of the end-diastolic curve at 10 mmHg", "mm[Hg]/mL")
_AT_20 = ("V20", "Volume at 20 mmHg on the end-diastolic curve", "mL")
_AT_30 = ("V30", "Volume at 30 mmHg on the end-diastolic curve", "mL")
STIFFNESS = _card(*_AT_10, _EXPONENTIAL, stiffness_of(exponential_of), "end-diastolic pressures near 10 mmHg")
VOLUME_AT_20 = _card(*_AT_20, _EXPONENTIAL, volume_of(exponential_of, 20.0), "end-diastolic pressures near 20 mmHg")
VOLUME_AT_30 = _card(*_AT_30, _EXPONENTIAL, volume_of(exponential_of, 30.0), "end-diastolic pressures near 30 mmHg")
POWER_STIFFNESS = _card(*_AT_10, _POWER, stiffness_of(power_of), "end-diastolic pressures near 10 mmHg")
POWER_VOLUME_AT_20 = _card(*_AT_20, _POWER, volume_of(power_of, 20.0), "end-diastolic pressures near 20 mmHg")
POWER_VOLUME_AT_30 = _card(*_AT_30, _POWER, volume_of(power_of, 30.0), "end-diastolic pressures near 30 mmHg")
