"""The median of a per-beat quantity over the accepted beats of a stage's steady runs: how every steady-state index is made.

A mean of ratios is not the ratio of means, so each quantity is formed per beat and its median published.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from metrics.arrays import FloatArray
from metrics.indices.card import Estimate, StageBeats, Withheld
from metrics.stats.medians import median_interval

FEWEST_BEATS = 3
"""Fewer accepted beats than this are no steady state; house default."""


def median_estimate(values: FloatArray) -> Estimate:
    """Return the median with its order-statistic interval; raises `Withheld` with fewer than three finite values."""
    finite = int(np.isfinite(values).sum())
    if finite < FEWEST_BEATS:
        message = f"{finite} accepted steady beats where {FEWEST_BEATS} are needed"
        raise Withheld(message)
    median, low, high = median_interval(values)
    return Estimate(median, low if np.isfinite(low) else None, high if np.isfinite(high) else None, finite)


def median_of(column: str) -> Callable[[StageBeats], Estimate]:
    """Return the index computation that takes the median of one column of `Beats`."""

    def compute(stage: StageBeats) -> Estimate:
        return median_estimate(stage.steady_column(column))

    return compute
