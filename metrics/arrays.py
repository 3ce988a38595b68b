"""The array types every module speaks of, and reductions over beats that need no Python loop."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]
BoolArray = NDArray[np.bool_]

EDGES_PERCENT = (2.0, 98.0)
MOST_SAMPLES = 15_000
"""Percentiles of so many samples, evenly spread, are as good as those of all."""


def spans(start: IntArray, stop: IntArray) -> tuple[IntArray, IntArray]:
    """Return (positions, owner): every sample of the half-open spans in order, and which span each belongs to.

    Both have shape (sum of lengths,). Spans may overlap or be empty.

    >>> positions, owner = spans(np.array([2, 7]), np.array([5, 9]))
    >>> positions.tolist(), owner.tolist()
    ([2, 3, 4, 7, 8], [0, 0, 0, 1, 1])
    """
    length = np.maximum(stop - start, 0)
    owner = np.repeat(np.arange(length.size), length)
    offset = np.arange(owner.size) - np.repeat(np.cumsum(length) - length, length)
    return start[owner] + offset, owner


def argmax_within(values: FloatArray, start: IntArray, stop: IntArray) -> IntArray:
    """Return where ``values`` is largest in each half-open span, the first such sample; shape (n_spans,), -1 for an empty span.

    NaN counts as smaller than anything; a span of NaN alone gives its first sample.

    >>> argmax_within(np.array([0.0, 3.0, 1.0, 5.0, 5.0]), np.array([0, 2, 4]), np.array([3, 5, 4])).tolist()
    [1, 3, -1]
    """
    positions, owner = spans(start, stop)
    at = argmax_by_owner(values[positions], owner, start.size)
    return np.where(at >= 0, positions[np.maximum(at, 0)], -1) if positions.size else at


def argmax_by_owner(values: FloatArray, owner: IntArray, count: int) -> IntArray:
    """Return where the values of each owner are largest, the first such place; shape (count,), -1 for an owner without any.

    ``owner`` has the shape of ``values`` and ascends. NaN counts as smaller than anything.

    >>> argmax_by_owner(np.array([0.0, 3.0, 1.0, 5.0]), np.array([0, 0, 2, 2]), 3).tolist()
    [1, -1, 3]
    """
    found = np.full(count, -1, dtype=np.int64)
    if values.size == 0:
        return found
    known = np.nan_to_num(values, nan=-np.inf)  # minus infinity becomes the least finite number, and so stays above missing
    first = _firsts(owner)
    filled = owner[first]
    peak = np.full(count, -np.inf)
    peak[filled] = np.maximum.reduceat(known, first)
    hits = np.flatnonzero(known == peak[owner])
    found[filled] = hits[_firsts(owner[hits])]
    return found


def _firsts(owner: IntArray) -> IntArray:
    """Return where each new value begins in an array that ascends."""
    return np.flatnonzero(np.concatenate([[True], owner[1:] != owner[:-1]]))


def argmin_within(values: FloatArray, start: IntArray, stop: IntArray) -> IntArray:
    """Return where ``values`` is smallest in each half-open span; shape (n_spans,), -1 for an empty span.

    >>> argmin_within(np.array([2.0, 1.0, 4.0]), np.array([0]), np.array([3])).tolist()
    [1]
    """
    return argmax_within(-values, start, stop)


def taken(values: FloatArray, at: IntArray) -> FloatArray:
    """Return ``values[at]``, NaN where ``at`` is -1; shape of ``at``.

    >>> taken(np.array([4.0, 5.0]), np.array([1, -1])).tolist()
    [5.0, nan]
    """
    if values.size == 0:
        return np.full(at.shape, np.nan)
    return np.where(at >= 0, values[np.maximum(at, 0)], np.nan)


def running_median(values: FloatArray, width: int) -> FloatArray:
    """Return the median of the ``width`` values around each one (fewer at the edges), NaN left out; shape (n,).

    >>> running_median(np.array([1.0, 9.0, 2.0, 3.0]), 3).tolist()
    [5.0, 2.0, 3.0, 2.5]
    """
    half = width // 2
    return _window_medians(np.pad(values.astype(np.float64), half, constant_values=np.nan), width)


def median_before(values: FloatArray, width: int) -> FloatArray:
    """Return the median of the ``width`` values before each one (fewer near the beginning, NaN for the first); shape (n,).

    >>> median_before(np.array([1.0, 3.0, 5.0]), 2).tolist()
    [nan, 1.0, 2.0]
    """
    padded = np.concatenate([np.full(width, np.nan), values.astype(np.float64)])
    return _window_medians(padded, width)[: values.size]


def _window_medians(padded: FloatArray, width: int) -> FloatArray:
    """Return NaN-ignoring medians of every window of ``width``; sorting puts NaN last, so no warning for an empty window."""
    if padded.size < width:
        return np.empty(0)
    windows = np.sort(np.lib.stride_tricks.sliding_window_view(padded, width), axis=1)
    count = np.sum(np.isfinite(windows), axis=1)
    rows = np.arange(windows.shape[0])
    low = windows[rows, np.maximum(count - 1, 0) // 2]
    high = windows[rows, np.minimum(count // 2, width - 1)]
    return np.where(count > 0, 0.5 * (low + high), np.nan)


def robust_sd(values: FloatArray) -> float:
    """Return 1.4826 times the median absolute deviation, NaN left out; NaN when nothing is finite.

    The factor makes it the standard deviation of a normal sample (Rousseeuw and Croux 1993, J Am Stat Assoc 88:1273, from memory).

    >>> round(robust_sd(np.array([0.0, 1.0, 2.0, 3.0, 100.0])), 4)
    1.4826
    """
    finite = values[np.isfinite(values)]
    if finite.size == 0:
        return float("nan")
    return float(1.4826 * np.median(np.abs(finite - np.median(finite))))


def median_of_known(values: FloatArray) -> float:
    """Return the median of the values that are numbers, NaN without any.

    >>> median_of_known(np.array([1.0, np.nan, 4.0])), median_of_known(np.empty(0))
    (2.5, nan)
    """
    known = values[np.isfinite(values)]
    return float(np.median(known)) if known.size else float("nan")


def smallest_step(values: FloatArray) -> float:
    """Return the smallest difference between two of the values, 0 where all are alike: the step of the converter that wrote them.

    >>> smallest_step(np.array([0.5, 2.0, np.nan, 1.5, 2.0]))
    0.5
    """
    apart = np.diff(np.sort(values[np.isfinite(values)]))
    return float(np.min(apart, where=apart > 0.0, initial=np.inf)) if apart.any() else 0.0


def span(samples: FloatArray) -> float:
    """Return how far a signal moves, from its 2nd to its 98th percentile, missing samples left out.

    NaN for one that stands still or is empty.

    >>> span(np.arange(101.0)), span(np.ones(50))
    (96.0, nan)
    """
    thinned = samples[:: max(1, samples.size // MOST_SAMPLES)]
    thinned = thinned[np.isfinite(thinned)]
    if thinned.size == 0:
        return float("nan")
    low, high = np.percentile(thinned, EDGES_PERCENT)
    return float(high - low) if high > low else float("nan")
