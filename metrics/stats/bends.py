"""How far points stray from a straight line, and which curve they would rather follow.

Akaike's criterion for small samples (Hurvich and Tsai 1989, Biometrika 76:297, from memory) weighs a closer fit against one unknown
more. Curves here are least squares of y on x: noise in x flattens them a little, which Deming's line does not suffer.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy import stats

from metrics.arrays import FloatArray

FEWEST_POINTS = 6
"""A parabola and the size of its scatter are four unknowns; the criterion needs two points more."""

EXACT = 1e-6
"""Points nearer to a curve than this share of their own span lie on it: what is left is arithmetic."""


@dataclass(frozen=True, slots=True)
class Curve:
    """A curve linear in its unknowns: y = coefficients . forms(x); the least-squares covariance of the unknowns, shape (k, k).

    ``criterion`` is AICc, smaller for the better curve through the same points.
    """

    coefficients: FloatArray
    covariance: FloatArray
    points: int
    criterion: float

    @property
    def freedom(self) -> int:
        """Return the degrees of freedom that are left."""
        return self.points - self.coefficients.size

    def half_width(self, by_coefficient: FloatArray, confidence: float = 0.95) -> float:
        """Return the half width of the t interval of a value with these derivatives by the coefficients, shape (k,)."""
        variance = float(by_coefficient @ self.covariance @ by_coefficient)
        return float(stats.t.ppf(0.5 + confidence / 2.0, self.freedom) * np.sqrt(max(variance, 0.0)))


def least_squares_curve(x: FloatArray, y: FloatArray, forms: Callable[[FloatArray], FloatArray]) -> Curve:
    """Return the curve through points of shape (n,); ``forms`` gives each unknown's own column, shape (n, k).

    Raises ValueError with fewer than six points or when their x cannot tell the unknowns apart.

    >>> x = np.array([0.0, 1.0, 2.0, 3.0, 4.0, 5.0])
    >>> least_squares_curve(x, 3.0 * x**2 - 2.0 * x + 1.0, parabola).coefficients.round(9).tolist()
    [1.0, -2.0, 3.0]
    """
    if x.size < FEWEST_POINTS:
        message = f"{x.size} points where a curve needs {FEWEST_POINTS}"
        raise ValueError(message)
    design = forms(x)
    scale = np.linalg.norm(design, axis=0)
    shape, _, rank, _ = np.linalg.lstsq(design / scale, y, rcond=1e-10)
    if rank < design.shape[1]:
        message = "every point has the same load" if np.ptp(x) == 0.0 else "the loads are too few to show a bend"
        raise ValueError(message)
    floor = x.size * (EXACT * float(np.ptp(y))) ** 2
    left = max(float(np.sum((y - design / scale @ shape) ** 2)), floor)
    scaled = np.linalg.inv((design / scale).T @ (design / scale)) * left / (x.size - shape.size)
    return Curve(shape / scale, scaled / np.outer(scale, scale), x.size, criterion(left, x.size, shape.size + 1))


def criterion(squares_left: float, points: int, unknowns: int) -> float:
    """Return AICc of a least-squares fit; ``unknowns`` counts the size of the scatter too.

    >>> round(criterion(10.0, 10, 3), 6)
    10.0
    """
    return float(points * np.log(max(squares_left, 1e-300) / points)) + 2.0 * unknowns * points / (points - unknowns - 1.0)


def straight(x: FloatArray) -> FloatArray:
    """Return the columns 1, x; shape (n, 2)."""
    return np.stack([np.ones_like(x), x], axis=1)


def parabola(x: FloatArray) -> FloatArray:
    """Return the columns 1, x, x^2; shape (n, 3)."""
    return np.stack([np.ones_like(x), x, x**2], axis=1)


def logarithm(x: FloatArray) -> FloatArray:
    """Return the columns 1, ln x; shape (n, 2). Raises ValueError where an x is not positive."""
    if np.min(x, initial=np.inf) <= 0.0:
        message = "a load is not positive and has no logarithm"
        raise ValueError(message)
    return np.stack([np.ones_like(x), np.log(x)], axis=1)
