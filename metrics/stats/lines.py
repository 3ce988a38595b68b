"""Straight lines through points that are noisy in both axes, with intervals for slope and axis intercept.

Deming's line with the noise ratio given (Deming 1943; formula from memory, worked values in the tests); its standard errors from the
leave-one-out jackknife (Linnet 1990, Stat Med 9:1463, from memory); the axis intercept by Fieller 1954, J R Stat Soc B 16:175 (from
memory). Ordinary least squares pulls a slope down when the load axis is noisy: by 7-9 % in small hearts (computed).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import stats

from metrics.arrays import FloatArray


@dataclass(frozen=True, slots=True)
class Line:
    """y = slope * (x - axis_intercept), with 95 % intervals of the fit.

    ``fieller_g`` >= 1 means the slope cannot be told from zero; the intercept's interval is then unbounded (infinite).
    """

    slope: float
    axis_intercept: float
    slope_low: float
    slope_high: float
    intercept_low: float
    intercept_high: float
    slope_se: float
    fieller_g: float
    points: int

    @property
    def constant(self) -> float:
        """Return y at x = 0."""
        return -self.slope * self.axis_intercept


def least_squares(x: FloatArray, y: FloatArray) -> tuple[float, float, float, float, float]:
    """Return (slope, constant, var_slope, var_constant, covariance) of ordinary least squares of y on x.

    Raises ValueError with fewer than three points or no spread in x.
    """
    _demand_points(x, 3)
    centre = x.mean()
    sxx = float(np.sum((x - centre) ** 2))
    slope = float(np.sum((x - centre) * (y - y.mean())) / sxx)
    constant = float(y.mean() - slope * centre)
    variance = float(np.sum((y - constant - slope * x) ** 2) / (x.size - 2))
    return slope, constant, variance / sxx, variance * (1.0 / x.size + centre**2 / sxx), -variance * centre / sxx


def deming(x: FloatArray, y: FloatArray, noise_ratio: float) -> tuple[float, float]:
    """Return (slope, constant) of Deming's line; ``noise_ratio`` is var(error of y) / var(error of x).

    Raises ValueError with fewer than two points, no spread in x, or no covariance.
    """
    slope, constant = _deming_rows(x[None, :], y[None, :], noise_ratio)
    if not np.isfinite(slope[0]):
        message = "x and y do not vary together"
        raise ValueError(message)
    return float(slope[0]), float(constant[0])


def _deming_rows(x: FloatArray, y: FloatArray, noise_ratio: float) -> tuple[FloatArray, FloatArray]:
    """Return Deming slopes and constants of every row, shape (n_rows,)."""
    dx, dy = x - x.mean(axis=1, keepdims=True), y - y.mean(axis=1, keepdims=True)
    sxx, syy, sxy = (dx**2).sum(axis=1), (dy**2).sum(axis=1), (dx * dy).sum(axis=1)
    lead = syy - noise_ratio * sxx
    with np.errstate(divide="ignore", invalid="ignore"):
        slope = (lead + np.sqrt(lead**2 + 4.0 * noise_ratio * sxy**2)) / (2.0 * sxy)
    return slope, y.mean(axis=1) - slope * x.mean(axis=1)


def deming_line(x: FloatArray, y: FloatArray, noise_ratio: float, confidence: float = 0.95) -> Line:
    """Return Deming's line with t intervals from the jackknife; ``x`` and ``y`` have shape (n,).

    A line that one point alone holds up (the others have one load) is boundless in slope and intercept.
    Raises ValueError with fewer than four points or no spread in x.
    """
    _demand_points(x, 4)
    slope, constant = deming(x, y, noise_ratio)
    n = x.size
    others = ~np.eye(n, dtype=bool)
    slopes, constants = _deming_rows(
        np.broadcast_to(x, (n, n))[others].reshape(n, n - 1), np.broadcast_to(y, (n, n))[others].reshape(n, n - 1), noise_ratio
    )
    stands = bool(np.isfinite(slopes).all())
    covariance = (n - 1) ** 2 / n * np.cov(slopes, constants) if stands else np.full((2, 2), np.inf)
    return interval_of(slope, constant, covariance, n, confidence)


LEAST_SHARE = 0.5
"""Noise is taken for at most half of the loads' variance: beyond that a correction is a guess; house default."""


def unattenuated_line(x: FloatArray, y: FloatArray, noise_variance: float, confidence: float = 0.95) -> Line:
    """Return the line of y on x freed of what noise in x takes from the slope, with t intervals from the jackknife; shapes (n,).

    ``noise_variance`` is that of one x. Unlike Deming's, it leaves curvature and beat-to-beat change to y: where points scatter for
    other reasons than noise, Deming's line is too steep (Carroll and Ruppert 1996, Am Stat 50:1; Fuller 1987, Measurement Error Models;
    both from memory). Raises ValueError with fewer than four points or no spread in x.
    """
    _demand_points(x, 4)
    slope, constant = _unattenuated_rows(x[None, :], y[None, :], noise_variance)
    n = x.size
    others = ~np.eye(n, dtype=bool)
    slopes, constants = _unattenuated_rows(
        np.broadcast_to(x, (n, n))[others].reshape(n, n - 1), np.broadcast_to(y, (n, n))[others].reshape(n, n - 1), noise_variance
    )
    stands = bool(np.isfinite(slopes).all())
    covariance = (n - 1) ** 2 / n * np.cov(slopes, constants) if stands else np.full((2, 2), np.inf)
    return interval_of(float(slope[0]), float(constant[0]), covariance, n, confidence)


def _unattenuated_rows(x: FloatArray, y: FloatArray, noise_variance: float) -> tuple[FloatArray, FloatArray]:
    """Return slopes and constants of every row, shape (n_rows,)."""
    dx, dy = x - x.mean(axis=1, keepdims=True), y - y.mean(axis=1, keepdims=True)
    sxx = (dx**2).sum(axis=1)
    with np.errstate(divide="ignore", invalid="ignore"):
        slope = (dx * dy).sum(axis=1) / np.maximum(sxx - (x.shape[1] - 1) * noise_variance, LEAST_SHARE * sxx)
    return slope, y.mean(axis=1) - slope * x.mean(axis=1)


def interval_of(slope: float, constant: float, covariance: FloatArray, points: int, confidence: float = 0.95) -> Line:
    """Return the line with t intervals (points - 2 degrees of freedom) from the covariance of (slope, constant), shape (2, 2)."""
    t = float(stats.t.ppf(0.5 + confidence / 2.0, points - 2))
    slope_se = float(np.sqrt(covariance[0, 0]))
    low, high, g = fieller(-constant, slope, float(covariance[1, 1]), float(covariance[0, 0]), float(-covariance[0, 1]), t)
    return Line(
        slope=slope,
        axis_intercept=-constant / slope,
        slope_low=slope - t * slope_se,
        slope_high=slope + t * slope_se,
        intercept_low=low,
        intercept_high=high,
        slope_se=slope_se,
        fieller_g=g,
        points=points,
    )


def fieller(numerator: float, denominator: float, var_n: float, var_d: float, covariance: float, t: float) -> tuple[float, float, float]:
    """Return (low, high, g): Fieller's interval of numerator / denominator; (-inf, inf, g) when g >= 1.

    >>> low, high, g = fieller(10.0, 5.0, 0.0, 0.0, 0.0, 2.0)
    >>> (low, high, g)
    (2.0, 2.0, 0.0)
    """
    g = t**2 * var_d / denominator**2 if denominator else float("inf")
    if g >= 1.0:
        return -float("inf"), float("inf"), g
    ratio = numerator / denominator
    centre = ratio - g * covariance / var_d if var_d else ratio
    inner = var_n - 2.0 * ratio * covariance + ratio**2 * var_d - g * (var_n - covariance**2 / var_d if var_d else var_n)
    half = t / abs(denominator) * np.sqrt(max(inner, 0.0))
    return float((centre - half) / (1.0 - g)), float((centre + half) / (1.0 - g)), g


def _demand_points(x: FloatArray, least: int) -> None:
    if x.size < least:
        message = f"{x.size} points where a line needs {least}"
        raise ValueError(message)
    if np.ptp(x) == 0.0:
        message = "every point has the same load"
        raise ValueError(message)
