"""The curve through a run's end-diastolic points: exponential with offset, or a power; what is read from it and how well it is known.

The points are means of pressure and volume over the 30 ms that end 8 ms before the upstroke: at the upstroke itself 0.1 to 0.2 mmHg of
active pressure, which grows with volume, moves beta by up to 14 % (computed on simulated hearts).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from metrics.arrays import FloatArray
from metrics.indices.card import RunBeats, Withheld
from metrics.indices.slopes import FEWEST_POINTS
from metrics.stats.curves import Curve, Fits, exponential, least_squares_curves, power

MEAN_OVER_S, ENDS_BEFORE_S = 0.030, 0.008
"""The window of a point: what is left of activation and what the filter carries back are gone by then (computed); house default."""

BENDS = (-2.0, 0.1, 1.0, 2.0, 4.0)
"""What beta is tried from, over half the range of the volumes."""


@dataclass(frozen=True, slots=True)
class PassiveCurve:
    """The curve of one run through its end-diastolic points, shape (n,).

    ``parameters`` are those of the curve over volumes less ``middle_ml`` (exponential) or over their ratio to it (power); ``covariance`` is
    the fit's; ``moved_by`` has shape (p, 4): by how much 1 of pressure gain, mmHg, volume gain and mL of all points moves each of them.
    """

    kind: str
    volume_ml: FloatArray
    pressure_mmhg: FloatArray
    middle_ml: float
    parameters: FloatArray
    covariance: FloatArray
    moved_by: FloatArray

    def beta_per_ml(self) -> float:
        """Return the exponent of the exponential; a power has none in 1/mL."""
        return float(self.parameters[2])

    def volume_at_ml(self, pressure_mmhg: float) -> float:
        """Return the volume at which the curve has that pressure, NaN where it never has.

        >>> points = np.array([80.0, 100.0, 120.0]), np.array([3.0, 5.0, 9.0])
        >>> straight = PassiveCurve("exponential", *points, 100.0, np.array([5.0, 0.5, 0.0]), np.zeros((3, 3)), np.zeros((3, 4)))
        >>> straight.volume_at_ml(10.0), straight.stiffness_mmhg_per_ml(10.0)
        (110.0, 0.5)
        """
        with np.errstate(invalid="ignore", divide="ignore"):
            if self.kind == "power":
                factor, exponent = self.parameters
                return float(self.middle_ml * np.power(pressure_mmhg / factor, 1.0 / exponent))
            height, slope, bend = self.parameters
            rise = pressure_mmhg - height
            return float(self.middle_ml + (np.log1p(bend * rise / slope) / bend if bend else rise / slope))

    def stiffness_mmhg_per_ml(self, pressure_mmhg: float) -> float:
        """Return the curve's slope where it has that pressure."""
        if self.kind == "power":
            return float(self.parameters[1] * pressure_mmhg / self.volume_at_ml(pressure_mmhg))
        height, slope, bend = self.parameters
        return float(slope + bend * (pressure_mmhg - height))


def end_diastolic_points(run: RunBeats) -> tuple[FloatArray, FloatArray]:
    """Return volume and pressure of the chosen beats at the end of diastole, shapes (n_chosen,), in mL and mmHg."""
    rate = run.signals.sampling_rate_hz
    stop = np.maximum(run.beats.start[run.chosen] - round(ENDS_BEFORE_S * rate) + 1, 1)
    at = np.maximum(stop[:, None] - 1 - np.arange(max(1, round(MEAN_OVER_S * rate))), 0)
    return run.signals.volume_ml[at].mean(axis=1), run.signals.pressure_mmhg[at].mean(axis=1)


def exponential_curve(volume_ml: FloatArray, pressure_mmhg: FloatArray) -> PassiveCurve:
    """Return the exponential with offset through the points, shapes (n,); raises `Withheld` where there is none."""
    middle_ml = _demanded(volume_ml)
    x = volume_ml - middle_ml
    scale = 2.0 / float(np.ptp(x))
    starts = np.array([_linear_start(x, pressure_mmhg, bend * scale) for bend in BENDS])
    return _curve("exponential", exponential, x, volume_ml, pressure_mmhg, middle_ml, starts)


def power_curve(volume_ml: FloatArray, pressure_mmhg: FloatArray) -> PassiveCurve:
    """Return the power curve through the points, shapes (n,); raises `Withheld` where there is none."""
    middle_ml = _demanded(volume_ml)
    if volume_ml.min() <= 0.0:
        message = "volumes are not above 0, so no power of them is defined"
        raise Withheld(message)
    starts = np.array([(float(np.median(pressure_mmhg)), exponent) for exponent in (1.0, 3.0, 6.0)])
    return _curve("power", power, volume_ml / middle_ml, volume_ml, pressure_mmhg, middle_ml, starts)


def _demanded(volume_ml: FloatArray) -> float:
    """Return the middle of the volumes; raises `Withheld` where there are too few or they are all the same."""
    if volume_ml.size < FEWEST_POINTS:
        message = f"{volume_ml.size} accepted beats in the usable window where {FEWEST_POINTS} are needed"
        raise Withheld(message)
    if np.ptp(volume_ml) == 0.0:
        message = "every point has the same load"
        raise Withheld(message)
    return float(volume_ml.mean())


def _linear_start(x: FloatArray, y: FloatArray, bend: float) -> tuple[float, float, float]:
    along = np.expm1(bend * x) / bend
    slope = float(np.sum((along - along.mean()) * y) / np.sum((along - along.mean()) ** 2))
    return float(y.mean() - slope * along.mean()), slope, bend


def _curve(
    kind: str, curve: Curve, x: FloatArray, volume_ml: FloatArray, pressure_mmhg: FloatArray, middle_ml: float, starts: FloatArray
) -> PassiveCurve:
    """Return the best curve of all starts; raises `Withheld` where there is none, or one that falls."""
    rows = np.tile(x, (len(starts), 1)), np.tile(pressure_mmhg, (len(starts), 1))
    fits: Fits = least_squares_curves(curve, *rows, starts)
    if np.isnan(fits.squares_left).all():
        message = f"no {kind} curve goes through the end-diastolic points"
        raise Withheld(message)
    best = int(np.nanargmin(fits.squares_left))
    parameters = fits.parameters[best]
    _, slopes = curve(x[None], parameters[None])
    step = 1e-4 * float(np.ptp(x))
    steep = (curve(x[None] + step, parameters[None])[0] - curve(x[None] - step, parameters[None])[0])[0] / (2.0 * step)
    steep_per_ml = steep / middle_ml if kind == "power" else steep
    moved = np.column_stack([pressure_mmhg, np.ones_like(x), -steep_per_ml * volume_ml, -steep_per_ml])
    if not float(np.median(steep)) > 0.0:
        message = "end-diastolic pressure does not rise with volume"
        raise Withheld(message)
    return PassiveCurve(kind, volume_ml, pressure_mmhg, middle_ml, parameters, fits.covariance[best], np.linalg.pinv(slopes[0]) @ moved)


@dataclass(frozen=True, slots=True)
class Reading:
    """What a run's curve says of one quantity: the value, its standard error, the points and the freedom behind them.

    ``moved_by`` has shape (4,): what 1 of pressure gain, mmHg, volume gain and mL adds to it.
    """

    value: float
    error: float
    points: int
    freedom: int
    moved_by: FloatArray


def reading(curve: PassiveCurve, quantity: Callable[[PassiveCurve], float]) -> Reading:
    """Return a quantity of a curve with its error from the fit's covariance; the derivatives are central differences."""
    gradient = np.zeros(curve.parameters.size)
    for place, error in enumerate(np.sqrt(np.diag(curve.covariance)).tolist()):
        step = max(1e-3 * error, 1e-6 * abs(float(curve.parameters[place])), 1e-9)
        up, down = (quantity(_moved(curve, place, by)) for by in (step, -step))
        gradient[place] = (up - down) / (2.0 * step)
    points = curve.volume_ml.size
    error = float(np.sqrt(max(float(gradient @ curve.covariance @ gradient), 0.0)))
    return Reading(quantity(curve), error, points, points - curve.parameters.size, gradient @ curve.moved_by)


def _moved(curve: PassiveCurve, place: int, by: float) -> PassiveCurve:
    parameters = curve.parameters.copy()
    parameters[place] += by
    return replace(curve, parameters=parameters)
