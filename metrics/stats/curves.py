"""Curves by least squares, many at once: each row of points has its own.

Marquardt 1963, J Soc Ind Appl Math 11:431 (from memory): the step of Gauss and Newton, shortened along the curves' own scales until the
squares fall. A row has arrived when what the next step could still take away is nothing beside the squares that are left.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from metrics.arrays import BoolArray, FloatArray

Curve = Callable[[FloatArray, FloatArray], tuple[FloatArray, FloatArray]]
"""Takes x (n_rows, n) and parameters (n_rows, p); returns y (n_rows, n) and its derivatives by the parameters (n_rows, n, p)."""

MOST_STEPS = 100
LEAST_DAMPING, FIRST_DAMPING, SMALL_DAMPING, MOST_DAMPING = 1e-12, 1e-3, 1e-2, 1e12
ARRIVED, ARRIVED_BY_SIZE = 1e-18, 1e-27
"""Shares of the squares left and of the squares of y itself: the second is where arithmetic ends on points that lie on the curve."""

STALLED = 1e-12
"""A step that promises less than this share of the squares left, and does not even keep that, shows that arithmetic has ended."""

LEAST_RANK = 1e-12
"""Where the derivatives are nearer than this to saying the same, a parameter has ceased to move the curve, and no curve was found."""


@dataclass(frozen=True, slots=True)
class Fits:
    """The curves of all rows; NaN in the rows of which no curve was found.

    ``parameters`` has shape (n_rows, p), ``covariance`` (n_rows, p, p), ``squares_left`` and ``freedom`` (n_rows,). The covariance is the
    linear one, infinite where there are no more points than parameters.
    """

    parameters: FloatArray
    covariance: FloatArray
    squares_left: FloatArray
    freedom: FloatArray


def least_squares_curves(curve: Curve, x: FloatArray, y: FloatArray, start: FloatArray, inside: BoolArray | None = None) -> Fits:
    """Return the least-squares curve of every row of points.

    ``x`` and ``y`` have shape (n_rows, n), ``start`` (n_rows, p); ``inside`` says which points count, all by default. Outside, x and y
    must be finite.

    >>> halves = np.array([[0.0, 1.0, 2.0, 3.0]]), np.array([[9.0, 5.0, 3.0, 2.0]])
    >>> fits = least_squares_curves(exponential, *halves, np.array([[8.0, -3.0, -0.5]]))
    >>> np.exp(fits.parameters[:, 2]).round(9).tolist()
    [0.5]
    """
    inside = np.ones(x.shape, dtype=bool) if inside is None else inside
    parameters = start.astype(np.float64).copy()
    count = start.shape[1]
    freedom = inside.sum(axis=1) - float(count)
    size = np.sum(np.where(inside, y, 0.0) ** 2, axis=1)
    damping = np.full(x.shape[0], FIRST_DAMPING)
    arrived = np.zeros(x.shape[0], dtype=bool)
    going = np.flatnonzero(freedom >= 0.0)
    state = _normal(curve, x[going], y[going], inside[going], parameters[going])
    for _ in range(MOST_STEPS):
        if going.size == 0:
            break
        step, promised = _step(state[0], state[1], damping[going])
        is_near = damping[going] < SMALL_DAMPING
        trial = parameters[going] + step
        tried = _normal(curve, x[going], y[going], inside[going], trial)
        better = tried[2] <= state[2]
        there = is_near & (promised <= ARRIVED * state[2] + ARRIVED_BY_SIZE * size[going])
        there |= is_near & ~better & (promised <= STALLED * state[2])
        arrived[going[there]] = True
        parameters[going[better]] = trial[better]
        for now, then in zip(state, tried, strict=True):
            now[better] = then[better]
        damping[going] = np.where(better, np.maximum(0.1 * damping[going], LEAST_DAMPING), 10.0 * damping[going])
        on = ~there & (damping[going] < MOST_DAMPING)
        going, state = going[on], tuple(part[on] for part in state)
    return _found(curve, x, y, inside, np.where(arrived[:, None], parameters, np.nan), freedom)


def _scaled(normal: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return J'J over the lengths of its columns, and those lengths."""
    scale = np.sqrt(np.maximum(np.einsum("rpp->rp", normal), 1e-300))
    return normal / (scale[:, :, None] * scale[:, None, :]), scale


def _step(normal: FloatArray, gradient: FloatArray, damping: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return every row's next step and the squares it promises to take away."""
    shape, scale = _scaled(normal)
    lifted = shape + (damping[:, None, None] + 1e-15) * np.eye(scale.shape[1])
    step = np.linalg.solve(lifted, (gradient / scale)[:, :, None])[:, :, 0] / scale
    return step, np.sum(step * gradient, axis=1)


def _found(curve: Curve, x: FloatArray, y: FloatArray, inside: BoolArray, parameters: FloatArray, freedom: FloatArray) -> Fits:
    """Return the fits with their covariances, without those in which a parameter has ceased to move the curve."""
    covariance = np.full((*parameters.shape, parameters.shape[1]), np.nan)
    squares_left = np.full(freedom.size, np.nan)
    rows = np.flatnonzero(np.isfinite(parameters).all(axis=1))
    normal, _, squares = _normal(curve, x[rows], y[rows], inside[rows], parameters[rows])
    shape, scale = _scaled(normal)
    told = np.linalg.eigvalsh(shape)[:, 0] > LEAST_RANK
    parameters[rows[~told]] = np.nan
    rows, shape, scale, squares = rows[told], shape[told], scale[told], squares[told]
    variance = np.divide(squares, freedom[rows], out=np.full(rows.size, np.inf), where=freedom[rows] > 0.0)
    covariance[rows] = np.linalg.inv(shape) / (scale[:, :, None] * scale[:, None, :]) * variance[:, None, None]
    squares_left[rows] = squares
    return Fits(parameters, covariance, squares_left, freedom)


def _normal(curve: Curve, x: FloatArray, y: FloatArray, inside: BoolArray, parameters: FloatArray) -> tuple[FloatArray, ...]:
    """Return J'J, J'r and r'r of every row; r'r is infinite where the curve leaves the numbers."""
    with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
        value, slopes = curve(x, parameters)
        left = np.where(inside, y - value, 0.0)
        slopes = np.where(inside[:, :, None], slopes, 0.0)
        turned = np.swapaxes(slopes, 1, 2)
        normal, gradient, squares = turned @ slopes, (turned @ left[:, :, None])[:, :, 0], np.sum(left**2, axis=1)
    sound = np.isfinite(squares) & np.isfinite(normal).all(axis=(1, 2)) & np.isfinite(gradient).all(axis=1)
    return normal, gradient, np.where(sound, squares, np.inf)


def exponential(x: FloatArray, parameters: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return y = height + slope (exp(bend x) - 1) / bend and its derivatives by (height, slope, bend).

    Height and slope are those at x = 0, and bend 0 is the straight line, so that nothing breaks where a curve cannot be told from one.
    The asymptote is height - slope / bend.

    >>> exponential(np.array([[0.0, 2.0]]), np.array([[5.0, 3.0, 0.0]]))[0].tolist()
    [[5.0, 11.0]]
    """
    height, slope, bend = (parameters[:, place, None] for place in range(3))
    turn = bend * x
    small = np.abs(turn) < 1e-4
    safe = np.where(small, 1.0, turn)
    grown = np.expm1(turn)
    along = x * np.where(small, 1.0 + turn / 2.0 + turn**2 / 6.0, grown / safe)
    bent = x**2 * np.where(small, 0.5 + turn / 3.0 + turn**2 / 8.0, (safe * (grown + 1.0) - grown) / safe**2)
    return height + slope * along, np.stack([np.ones_like(x), along, slope * bent], axis=2)


def logistic(x: FloatArray, parameters: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return y = size / (1 + exp(rate x)) + floor and its derivatives by (size, rate, floor).

    >>> logistic(np.array([[0.0]]), np.array([[6.0, 1.0, 2.0]]))[0].tolist()
    [[5.0]]
    """
    size, rate, floor = (parameters[:, place, None] for place in range(3))
    share = 1.0 / (1.0 + np.exp(rate * x))
    return size * share + floor, np.stack([share, -size * x * share * (1.0 - share), np.ones_like(x)], axis=2)


def power(x: FloatArray, parameters: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return y = factor x^exponent and its derivatives by (factor, exponent); x above 0.

    >>> power(np.array([[3.0]]), np.array([[2.0, 2.0]]))[0].tolist()
    [[18.0]]
    """
    factor, exponent = (parameters[:, place, None] for place in range(2))
    raised = x**exponent
    return factor * raised, np.stack([raised, factor * raised * np.log(x)], axis=2)
