"""Straight lines through points that are noisy in both axes, with intervals for slope and axis intercept.

Deming's line with the noise ratio given (Deming 1943; formula from memory, worked values in the tests); the axis intercept by Fieller
1954, J R Stat Soc B 16:175 (from memory). Ordinary least squares pulls a slope down when the load axis is noisy: by 7-9 % in small hearts
(computed).

Through fewer than 16 points standard errors are those of the leave-one-out jackknife (Linnet 1990, Stat Med 9:1463, from memory; least
squares has its own) with t; from 16 points on those of blocks of neighbouring beats, with the studentised bootstrap of those blocks in
the place of t. Points in the order of their beats are told from one heap: what a line leaves may breathe or drift.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache, partial

import numpy as np

from metrics.arrays import FloatArray
from metrics.stats.bootstrap import LEAST_ERROR_SHARE, block_length, block_positions, student

FEWEST_FOR_BLOCKS = 16
"""Below, t of the jackknife covers as well and is narrower. Coverage of a slope's 95 % interval through n = 6, 8, 12, 15 | 16, 20, 30
points, by | where it changes: independent scatter 95, 94, 96, 96 | 96, 97, 96 %; correlated by 0.3 from beat to beat 96, 92, 92, 92 |
93, 94, 93 %; by 0.6 92, 88, 85, 81 | 89, 90, 90 %; breathing over 4.3 beats 98, 96, 98, 99 | 98, 98, 98 % (computed). What few points that
follow one another say of their correlation is too little to widen anything by."""

Fit = Callable[[FloatArray, FloatArray], tuple[FloatArray, FloatArray, FloatArray]]
"""Takes x and y of every row, shape (n_rows, n); returns slopes and constants, (n_rows,), and by how much each point moves its row's slope.
"""


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
    slope, constant, _ = _deming_rows(x[None, :], y[None, :], noise_ratio)
    if not np.isfinite(slope[0]):
        message = "x and y do not vary together"
        raise ValueError(message)
    return float(slope[0]), float(constant[0])


def _deming_rows(x: FloatArray, y: FloatArray, noise_ratio: float) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return Deming's slopes and constants of every row, shape (n_rows,), and what each point adds to the slope."""
    dx, dy = x - x.mean(axis=1, keepdims=True), y - y.mean(axis=1, keepdims=True)
    sxx, syy, sxy = (dx**2).sum(axis=1), (dy**2).sum(axis=1), (dx * dy).sum(axis=1)
    lead = syy - noise_ratio * sxx
    with np.errstate(divide="ignore", invalid="ignore"):
        slope = (lead + np.sqrt(lead**2 + 4.0 * noise_ratio * sxy**2)) / (2.0 * sxy)
        left = dy - slope[:, None] * dx
        # the slope is where sum(left (ratio dx + slope dy)) is zero
        score = left * (noise_ratio * dx + slope[:, None] * dy)
        steepness = noise_ratio * sxx + 2.0 * slope * sxy - syy
        moved = score / steepness[:, None]
    return slope, y.mean(axis=1) - slope * x.mean(axis=1), moved


def deming_line(x: FloatArray, y: FloatArray, noise_ratio: float, confidence: float = 0.95) -> Line:
    """Return Deming's line with its intervals; ``x`` and ``y`` have shape (n,), in the order of the beats.

    A line that one point alone holds up (the others have one load) is boundless in slope and intercept.
    Raises ValueError with fewer than four points or no spread in x.
    """
    _demand_points(x, 4)
    deming(x, y, noise_ratio)
    return _line(x, y, partial(_deming_rows, noise_ratio=noise_ratio), ("deming", noise_ratio), confidence)


@dataclass(frozen=True, slots=True)
class LineFit:
    """A way to draw a line through x and y of shape (n,): ``bare`` returns (slope, constant), ``whole`` the line with its intervals.

    Both raise ValueError with fewer than four points or no spread in x.
    """

    bare: Callable[[FloatArray, FloatArray], tuple[float, float]]
    whole: Callable[[FloatArray, FloatArray], Line]


def deming_fit(noise_ratio: float) -> LineFit:
    """Return Deming's way for a known noise ratio."""

    def bare(x: FloatArray, y: FloatArray) -> tuple[float, float]:
        _demand_points(x, 4)
        return deming(x, y, noise_ratio)

    return LineFit(bare, partial(deming_line, noise_ratio=noise_ratio))


def least_squares_fit() -> LineFit:
    """Return the way of ordinary least squares of y on x."""

    def bare(x: FloatArray, y: FloatArray) -> tuple[float, float]:
        _demand_points(x, 4)
        return least_squares(x, y)[:2]

    return LineFit(bare, least_squares_line)


LEAST_SHARE = 0.5
"""Noise is taken for at most half of the loads' variance: beyond that a correction is a guess; house default."""


def unattenuated_line(x: FloatArray, y: FloatArray, noise_variance: float, confidence: float = 0.95) -> Line:
    """Return the line of y on x freed of what noise in x takes from the slope, with its intervals; shapes (n,), in the order of the beats.

    ``noise_variance`` is that of one x. Unlike Deming's, it leaves curvature and beat-to-beat change to y: where points scatter for
    other reasons than noise, Deming's line is too steep (Carroll and Ruppert 1996, Am Stat 50:1; Fuller 1987, Measurement Error Models;
    both from memory). Raises ValueError with fewer than four points or no spread in x.
    """
    _demand_points(x, 4)
    return _line(x, y, partial(_unattenuated_rows, noise_variance=noise_variance), ("unattenuated", noise_variance), confidence)


def least_squares_line(x: FloatArray, y: FloatArray, confidence: float = 0.95) -> Line:
    """Return the line of ordinary least squares of y on x with its intervals; shapes (n,), in the order of the beats.

    Raises ValueError with fewer than four points or no spread in x.
    """
    _demand_points(x, 4)
    if x.size >= FEWEST_FOR_BLOCKS:
        return _line(x, y, partial(_unattenuated_rows, noise_variance=0.0), ("least squares", 0.0), confidence)
    slope, constant, var_slope, var_constant, covariance = least_squares(x, y)
    return interval_of(slope, constant, np.array([[var_slope, covariance], [covariance, var_constant]]), x.size, confidence)


def _unattenuated_rows(x: FloatArray, y: FloatArray, noise_variance: float) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return slopes and constants of every row, shape (n_rows,), and what each point adds to the slope."""
    dx, dy = x - x.mean(axis=1, keepdims=True), y - y.mean(axis=1, keepdims=True)
    sxx = (dx**2).sum(axis=1)
    freed = np.maximum(sxx - (x.shape[1] - 1) * noise_variance, LEAST_SHARE * sxx)
    with np.errstate(divide="ignore", invalid="ignore"):
        slope = (dx * dy).sum(axis=1) / freed
        moved = (dx * dy - slope[:, None] * (dx**2 - ((sxx - freed) / x.shape[1])[:, None])) / freed[:, None]
    return slope, y.mean(axis=1) - slope * x.mean(axis=1), moved


def _line(x: FloatArray, y: FloatArray, fit: Fit, name: tuple[str, float], confidence: float) -> Line:
    """Return one fit's line with the intervals that its number of points allows."""
    slope, constant, _ = fit(x[None, :], y[None, :])
    if x.size < FEWEST_FOR_BLOCKS:
        return interval_of(float(slope[0]), float(constant[0]), _jackknife(x, y, fit), x.size, confidence)
    held = (np.ascontiguousarray(x, dtype=np.float64).tobytes(), np.ascontiguousarray(y, dtype=np.float64).tobytes())
    covariance, strays = _by_blocks(*held, name, confidence)
    return interval_of(float(slope[0]), float(constant[0]), np.array(covariance).reshape(2, 2), x.size, confidence, strays)


def _jackknife(x: FloatArray, y: FloatArray, fit: Fit) -> FloatArray:
    """Return the covariance of (slope, constant), shape (2, 2); infinite where one point alone holds the line up."""
    n = x.size
    others = ~np.eye(n, dtype=bool)
    slopes, constants, _ = fit(np.broadcast_to(x, (n, n))[others].reshape(n, n - 1), np.broadcast_to(y, (n, n))[others].reshape(n, n - 1))
    stands = bool(np.isfinite(slopes).all())
    return (n - 1) ** 2 / n * np.cov(slopes, constants) if stands else np.full((2, 2), np.inf)


@lru_cache(maxsize=256)
def _by_blocks(x_held: bytes, y_held: bytes, name: tuple[str, float], confidence: float) -> tuple[tuple[float, ...], tuple[float, float]]:
    """Return the covariance of (slope, constant), by rows, and how many errors of their own slope and intercept of resamples stray.

    From the bytes of x and y, because many indices ask for the same line.
    """
    x, y = np.frombuffer(x_held), np.frombuffer(y_held)
    fit: Fit = partial(_deming_rows, noise_ratio=name[1]) if name[0] == "deming" else partial(_unattenuated_rows, noise_variance=name[1])
    slope, constant, moved = fit(x[None, :], y[None, :])
    left = y - constant - slope * x
    length = block_length(left)
    at = block_positions(left, length)
    drawn_x, drawn_y = x[at], y[at]
    slopes, constants, moves = fit(drawn_x, drawn_y)
    lifts = _constant_moves(drawn_x, drawn_y, slopes, constants, moves)
    lifted = _constant_moves(x[None, :], y[None, :], slope, constant, moved)
    covariance = _covariance_of_blocks(moved, lifted, length, overlapping=True)[0]
    errors = _covariance_of_blocks(moves, lifts, length, overlapping=False)
    along = np.array([[1.0, 0.0], [-constant[0] / slope[0], 1.0]])
    strays = []
    for combination in along:
        own = float(np.sqrt(combination @ covariance @ combination))
        each = np.sqrt(np.maximum(np.einsum("a,rab,b->r", combination, errors, combination), 0.0))
        off = np.abs(combination[0] * (slopes - slope) + combination[1] * (constants - constant))
        strays.append(float(np.nanquantile(off / np.maximum(each, LEAST_ERROR_SHARE * own), confidence)) if own > 0.0 else 0.0)
    return tuple(covariance.ravel().tolist()), (strays[0], strays[1])


def _constant_moves(x: FloatArray, y: FloatArray, slope: FloatArray, constant: FloatArray, moved: FloatArray) -> FloatArray:
    """Return by how much each point moves its row's constant, shape (n_rows, n)."""
    left = y - constant[:, None] - slope[:, None] * x
    lifted: FloatArray = left / x.shape[1] - x.mean(axis=1, keepdims=True) * moved
    return lifted


def _covariance_of_blocks(moved: FloatArray, lifted: FloatArray, length: int, *, overlapping: bool) -> FloatArray:
    """Return the covariance of (slope, constant) of every row from the sums of its blocks, shape (n_rows, 2, 2).

    A resample was put together of whole blocks, of which each counts once; a series has every block of neighbours.
    """
    both = np.stack([moved, lifted], axis=1)
    rows, _, count = both.shape
    if overlapping:
        summed = np.concatenate([np.zeros((rows, 2, 1)), np.cumsum(both, axis=2)], axis=2)
        sums = summed[:, :, length:] - summed[:, :, :-length]
    else:
        sums = both.reshape(rows, 2, count // length, length).sum(axis=3)
    blocks = count / length
    covariance: FloatArray = sums @ np.swapaxes(sums, 1, 2) / sums.shape[2] * blocks * blocks / (blocks - 1.0)
    return covariance


def interval_of(
    slope: float, constant: float, covariance: FloatArray, points: int, confidence: float = 0.95, strays: tuple[float, float] | None = None
) -> Line:
    """Return the line with its intervals from the covariance of (slope, constant), shape (2, 2).

    They reach as many standard errors as ``strays`` says of slope and axis intercept, by default those of t with points - 2 degrees of
    freedom. The standard error told is the one that t makes the slope's interval of.
    """
    plain = student(points - 2, confidence)
    reach, reach_axis = (plain, plain) if strays is None else strays
    half = reach * float(np.sqrt(covariance[0, 0]))
    low, high, g = fieller(-constant, slope, float(covariance[1, 1]), float(covariance[0, 0]), float(-covariance[0, 1]), reach_axis)
    return Line(
        slope=slope,
        axis_intercept=-constant / slope,
        slope_low=slope - half,
        slope_high=slope + half,
        intercept_low=low,
        intercept_high=high,
        slope_se=half / plain,
        fieller_g=max(g, (half / slope) ** 2 if slope else float("inf")),
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
