"""A median and its distribution-free interval."""

from __future__ import annotations

import numpy as np
from scipy import stats

from metrics.arrays import FloatArray


def median_interval(values: FloatArray, confidence: float = 0.95) -> tuple[float, float, float]:
    """Return (median, low, high) of the finite values, the interval from order statistics; NaN bounds where n is too small for one.

    The ranks are the binomial ones (Conover 1999, Practical Nonparametric Statistics, from memory); fewer than 6 values have no such
    95 % interval. Raises ValueError without a finite value.

    >>> median_interval(np.arange(1.0, 11.0))
    (5.5, 2.0, 9.0)
    """
    finite = np.sort(values[np.isfinite(values)])
    if finite.size == 0:
        message = "no beat has a value"
        raise ValueError(message)
    median = float(np.median(finite))
    rank = int(stats.binom.ppf((1.0 - confidence) / 2.0, finite.size, 0.5))
    if rank < 1:
        return median, float("nan"), float("nan")
    return median, float(finite[rank - 1]), float(finite[finite.size - rank])
