"""How far values are left off a relation for one unit of a form of change, in many short series at once.

Partial regression (Frisch and Waugh 1933, Econometrica 1:387, from memory): values and form are both freed of the relation first, what is
left is one ratio a row. That gives what the whole regression gives, and needs no matrix. The errors are widened by the residuals' lag-1
correlation (Zieba 2010, Metrol Meas Syst 17:3, from memory).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from metrics.arrays import FloatArray

MOST_CORRELATED = 0.8
TOO_ALIKE = 1e-9


@dataclass(frozen=True, slots=True)
class Off:
    """How far a relation is left for one unit of a form, the relation's mean slope, and what stays unexplained; shape (n_forms,)."""

    off: FloatArray
    se: FloatArray
    slope: FloatArray
    freedom: FloatArray
    left: FloatArray


@dataclass(frozen=True, slots=True)
class Relation:
    """What a relation is made of: ``weight``, and unit rows ``across`` at right angles; ``x`` itself as ``level`` times ``scale``.

    ``tilt`` is what a unit of curvature adds to the slope. ``level`` is None where there is no relation but a mean.
    """

    weight: FloatArray
    counted: FloatArray
    across: tuple[FloatArray, ...]
    level: FloatArray | None
    scale: FloatArray
    tilt: FloatArray


def relation(x: FloatArray | None, weight: FloatArray, *, bent: bool) -> Relation:
    """Return the relation to ``x``, or a mean alone, over the places of weight 1; arrays of shape (n_forms, n_beside)."""
    counted = weight.sum(axis=1)
    root = np.sqrt(counted)[:, None]
    ones = weight / root
    if x is None:
        return Relation(weight, counted, (ones,), None, np.ones_like(counted), np.zeros_like(counted))
    away = _freed(weight * x, [ones])
    scale = np.sqrt(_dot(away, away) / counted)
    scale = np.where(scale > 0.0, scale, 1.0)
    level = away / scale[:, None]
    across = (ones, level / root)
    if not bent:
        return Relation(weight, counted, across, level, scale, np.zeros_like(counted))
    bend = _freed(level**2, across)
    bend_size = np.sqrt(_dot(bend, bend))
    bend_size = np.where(bend_size > 0.0, bend_size, 1.0)
    return Relation(weight, counted, (*across, bend / bend_size[:, None]), level, scale, _dot(level, level**2) / bend_size)


def off_relation(y: FloatArray, form: FloatArray, along: Relation) -> Off:
    """Return how far ``y`` is left off the relation for one unit of the form, row by row; both of shape (n_forms, n_beside).

    >>> x = np.arange(8.0)[None, :]
    >>> late = np.where(x >= 4.0, 1.0, 0.0)
    >>> found = off_relation(3.0 + 2.0 * x + 5.0 * late, late, relation(x, np.ones_like(x), bent=False))
    >>> found.off.round(6).tolist(), found.slope.round(6).tolist()
    ([5.0], [2.0])
    """
    y, form = along.weight * y, along.weight * form
    own, moved = _freed(y, along.across), _freed(form, along.across)
    size = _dot(moved, moved)
    # a form that the relation already explains cannot be told from it
    size = np.where(size > TOO_ALIKE * _dot(form, form), size, np.nan)
    off = _dot(own, moved) / size
    residual = own - off[:, None] * moved
    square = _dot(residual, residual)
    # a mean alone is charged as a line is, so that it is no surer for lack of a slope
    freedom = along.counted - max(len(along.across), 2) - 1
    with np.errstate(divide="ignore", invalid="ignore"):
        correlated = np.clip(_dot(residual[:, 1:], residual[:, :-1]) / square, 0.0, MOST_CORRELATED)
        error = np.sqrt(square / freedom * (1.0 + correlated) / (1.0 - correlated) / size)
        left = square / _dot(own, own)
    if along.level is None:
        slope = np.zeros_like(off)
    else:
        explained = y - off[:, None] * form
        slope = _dot(explained, along.level)
        if len(along.across) > 2:
            slope = slope - _dot(explained, along.across[2]) * along.tilt
        slope = slope / (along.counted * along.scale)
    off, error = (np.where(freedom > 0.0, value, np.nan) for value in (off, error))
    return Off(off, error, slope, freedom, left)


def _freed(values: FloatArray, across: Sequence[FloatArray]) -> FloatArray:
    """Return each row without its part along the unit rows of ``across``, which stand at right angles to each other."""
    for unit in across:
        values = values - _dot(values, unit)[:, None] * unit
    return values


def _dot(one: FloatArray, other: FloatArray) -> FloatArray:
    return np.asarray(np.einsum("ij,ij->i", one, other), dtype=np.float64)
