"""What changed between two stages: differences with their intervals, and a box's change split among contractility, load and filling.

Both stages are measured with the same sensors under one calibration, so its errors are common to both. To first order an error c of the
calibration moves a value by its sensitivity S times c; it moves the difference by ``(S_after - S_before) c`` (derived). What goes with a
gain has S = its value, so of the difference the gain's error is the same share as of the values (2 % more gain: 2 % more difference). What
goes along with an offset, like EDV or EDP, has the same S in both stages, and the offset cancels. A quotient like Ea = ESP / SV keeps
``1 / SV_after - 1 / SV_before`` of it. Where the stages were calibrated apart, nothing cancels and the errors join in quadrature. The two
fits are independent and always join in quadrature, each side by itself.

The box: where the end-systolic line crosses the arterial one, ``SV = Ees (EDV - V0) / (Ees + Ea)`` and ``ESP = Ea SV`` (Sunagawa 1985,
Circ Res 56:586, read), and ``SW = ESP SV``. Its change is split by the Shapley rule (`metrics.stats.shapley`). Contractility is what Ees
and V0 do together: they are slope and intercept of one line and err together, so their sum says more than either.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import astuple, dataclass
from types import MappingProxyType

import numpy as np

from metrics.arrays import FloatArray
from metrics.indices.card import Estimate, Sensitivity
from metrics.indices.intervals import Interval, calibration_half
from metrics.signals.uncertainty import CalibrationUncertainty
from metrics.stats.shapley import shapley_parts

CAUSES = ("Ees", "V0", "Ea", "EDV")
CANCELLED = 1e-6
"""A sensitivity that small beside the terms it is the difference of has cancelled; slopes are taken numerically."""

STEP = 1e-5


@dataclass(frozen=True, slots=True)
class Stood:
    """An index as it stood in one stage."""

    estimate: Estimate
    sensitivity: Sensitivity


@dataclass(frozen=True, slots=True)
class Calibrations:
    """How uncertain the calibration of either stage is, and whether it is one and the same."""

    before: CalibrationUncertainty
    after: CalibrationUncertainty
    are_one: bool = True


@dataclass(frozen=True, slots=True)
class Weighed:
    """By how much a difference moves with an index before, and with the same index after; the index in both stages."""

    by_before: float
    by_after: float
    before: Stood
    after: Stood


def changed_interval(difference: float, made_of: Sequence[Weighed], calibrations: Calibrations) -> Interval:
    """Return the 95 % interval of a difference, (None, None) where a fit has none or a calibration that moves it declares nothing.

    >>> one, other = (Stood(Estimate(v, v - 1.0, v + 1.0, 9), Sensitivity(volume_gain=v, volume_ml=1.0)) for v in (100.0, 150.0))
    >>> doubt = CalibrationUncertainty(volume_gain=0.04)
    >>> low, high = changed_interval(50.0, [Weighed(-1.0, 1.0, one, other)], Calibrations(doubt, doubt))
    >>> round(low, 2), round(high, 2)
    (45.83, 54.17)
    """
    half = _calibration_half(made_of, calibrations)
    ends = [(one.by_before, one.before.estimate) for one in made_of] + [(one.by_after, one.after.estimate) for one in made_of]
    down, up = (_fit_half(ends, side) for side in (-1.0, 1.0))
    if half is None or down is None or up is None:
        return None, None
    low, high = difference - float(np.hypot(down, half)), difference + float(np.hypot(up, half))
    return (low, high) if np.isfinite(low) and np.isfinite(high) else (None, None)


def _fit_half(ends: Sequence[tuple[float, Estimate]], side: float) -> float | None:
    """Return how far the fits reach below (-1) or above (+1) a difference, None where one that moves it has no interval."""
    squares = 0.0
    for by, estimate in ends:
        if by == 0.0:
            continue
        bound = estimate.fit_high if by * side > 0.0 else estimate.fit_low
        if bound is None:
            return None
        squares += (by * (bound - estimate.value)) ** 2
    return float(np.sqrt(squares))


def _calibration_half(made_of: Sequence[Weighed], calibrations: Calibrations) -> float | None:
    before = np.array([one.by_before * np.array(astuple(one.before.sensitivity)) for one in made_of])
    after = np.array([one.by_after * np.array(astuple(one.after.sensitivity)) for one in made_of])
    if calibrations.are_one:
        return calibration_half(_summed(np.concatenate([before, after])), calibrations.before.joined(calibrations.after))
    own, other = calibration_half(_summed(before), calibrations.before), calibration_half(_summed(after), calibrations.after)
    return None if own is None or other is None else float(np.hypot(own, other))


def _summed(terms: FloatArray) -> Sensitivity:
    total = terms.sum(axis=0)
    return Sensitivity(*np.where(np.abs(total) > CANCELLED * np.abs(terms).sum(axis=0), total, 0.0).tolist())


def difference_of(before: Stood, after: Stood, calibrations: Calibrations) -> tuple[float, Interval]:
    """Return an index's value after minus before, with its interval."""
    difference = after.estimate.value - before.estimate.value
    return difference, changed_interval(difference, [Weighed(-1.0, 1.0, before, after)], calibrations)


def box_stroke_volume(causes: FloatArray) -> FloatArray:
    """Return stroke volume of the box, mL, from (Ees, V0, Ea, EDV) along the last axis.

    >>> float(box_stroke_volume(np.array([2.5, 10.0, 2.0, 130.0])).round(4))
    66.6667
    """
    ees, v0_ml, ea, edv_ml = np.moveaxis(causes, -1, 0)
    stroke_ml: FloatArray = ees * (edv_ml - v0_ml) / (ees + ea)
    return stroke_ml


def box_pressure(causes: FloatArray) -> FloatArray:
    """Return end-systolic pressure of the box, mmHg."""
    return causes[..., 2] * box_stroke_volume(causes)


def box_work(causes: FloatArray) -> FloatArray:
    """Return stroke work of the box, mmHg mL."""
    return box_pressure(causes) * box_stroke_volume(causes)


BOX: Mapping[str, Callable[[FloatArray], FloatArray]] = MappingProxyType({"SV": box_stroke_volume, "ESP": box_pressure, "SW": box_work})
"""What is split, and what the box makes of the four causes."""


@dataclass(frozen=True, slots=True)
class Part:
    """One part of a change with its interval; the parts of a change sum to it."""

    name: str
    difference: float
    interval: Interval


RESIDUAL = "model-residual"


def split_change(
    measured: tuple[Stood, Stood], causes: Mapping[str, tuple[Stood, Stood]], index: str, both: Calibrations
) -> tuple[Part, ...]:
    """Return the parts of the measured change of SV, ESP or SW (``index``): one a cause, then what the box leaves.

    ``measured`` and each of the four ``causes`` hold an index before and after. The residual's interval takes the measured index and the
    causes for independent; they come from the same beats, so it is rather too wide.
    """
    worth = BOX[index]
    before, after = (np.array([causes[name][end].estimate.value for name in CAUSES]) for end in (0, 1))
    parts = shapley_parts(worth, before, after)
    slopes = _slopes(worth, before, after)
    told = []
    for place, name in enumerate(CAUSES):
        made_of = _weighed(slopes[:, place], causes)
        told.append(Part(name, float(parts[place]), changed_interval(float(parts[place]), made_of, both)))
    left = measured[1].estimate.value - measured[0].estimate.value - float(parts.sum())
    made_of = [Weighed(-1.0, 1.0, *measured), *_weighed(-slopes.sum(axis=1), causes)]
    return (*told, Part(RESIDUAL, left, changed_interval(left, made_of, both)))


def _weighed(by: FloatArray, causes: Mapping[str, tuple[Stood, Stood]]) -> list[Weighed]:
    count = len(CAUSES)
    return [Weighed(float(by[place]), float(by[count + place]), *causes[name]) for place, name in enumerate(CAUSES)]


def _slopes(worth: Callable[[FloatArray], FloatArray], before: FloatArray, after: FloatArray) -> FloatArray:
    """Return how every part moves with every cause before, then after: shape (2 n_causes, n_causes), by central differences."""
    count = before.size
    ends = np.concatenate([before, after])
    step = STEP * np.maximum(np.abs(ends), 1.0)
    high, low = (shapley_parts(worth, moved[:, :count], moved[:, count:]) for moved in (ends + np.diag(step), ends - np.diag(step)))
    slopes: FloatArray = (high - low) / (2.0 * step[:, None])
    return slopes
