"""Change over time of a value read beat by beat: its trend by Theil and Sen, and its swing at one rate."""

from __future__ import annotations

import numpy as np
from scipy import stats

from metrics.arrays import BoolArray, FloatArray

LEAST_BLOCKS = 4
MOST_PAIRS_FROM = 400
"""Beyond so many values every n-th is taken: a median of slopes needs no more than 80,000 pairs."""

LEAST_FOR_A_SWING = 12


def trend_per_s(time_s: FloatArray, values: FloatArray) -> float:
    """Return the median of the slopes between all pairs of values (Theil 1950, Sen 1968, J Am Stat Assoc 63:1379, from memory).

    >>> trend_per_s(np.array([0.0, 1.0, 2.0, 3.0]), np.array([0.0, 2.0, 90.0, 6.0]))
    2.0
    """
    thin = slice(None, None, max(1, -(-time_s.size // MOST_PAIRS_FROM)))
    time_s, values = time_s[thin], values[thin]
    one, other = np.triu_indices(time_s.size, 1)
    return float(np.median((values[other] - values[one]) / (time_s[other] - time_s[one])))


def is_trend_by_blocks(time_s: FloatArray, values: FloatArray, block_s: float, confidence: float = 0.95) -> bool | None:
    """Return whether the means of blocks of that length have a trend whose interval excludes 0, None with fewer than four blocks.

    Blocks as long as a breath make neighbouring means nearly independent, which beats are not.
    """
    count = int((time_s[-1] - time_s[0]) / block_s) if time_s.size else 0
    if count < LEAST_BLOCKS:
        return None
    block = np.minimum(((time_s - time_s[0]) / (time_s[-1] - time_s[0]) * count).astype(np.int64), count - 1)
    held = np.bincount(block, minlength=count) > 0
    if held.sum() < LEAST_BLOCKS:
        return None
    number = np.flatnonzero(held)
    means = (np.bincount(block, values, count) / np.maximum(np.bincount(block, minlength=count), 1))[number]
    return bool(stats.linregress(number.astype(np.float64), means).pvalue < 1.0 - confidence)


def swing(time_s: FloatArray, values: FloatArray, rates_hz: FloatArray, usual: BoolArray | None = None) -> tuple[FloatArray, ...]:
    """Return the amplitude of the best sine at each rate, its share of the variance, and what it leaves, once a trend is taken out.

    Least squares at uneven instants (Lomb 1976, Astrophys Space Sci 39:447, from memory) over the ``usual`` values, all by default.
    Shapes (n_rates,), (n_rates,), (n_rates, n).
    """
    weight = np.ones(values.size) if usual is None else usual.astype(np.float64)
    centred = time_s - np.average(time_s, weights=weight)
    trend = np.polynomial.polynomial.polyfit(centred, values, 1, w=weight)
    rest = values - np.polynomial.polynomial.polyval(centred, trend)
    phase = 2.0 * np.pi * rates_hz[:, None] * centred
    design = np.stack([np.ones_like(phase), centred + np.zeros_like(phase), np.sin(phase), np.cos(phase)], axis=2)
    turned = np.swapaxes(design * weight[:, None], 1, 2)
    fitted = np.linalg.pinv(turned @ design, hermitian=True) @ (turned @ rest[:, None])
    left = rest - (design @ fitted)[:, :, 0]
    total = float(np.sum(weight * rest**2))
    explained = 1.0 - np.sum(weight * left**2, axis=1) / total if total > 0.0 else np.zeros(rates_hz.size)
    return np.hypot(fitted[:, 2, 0], fitted[:, 3, 0]), np.asarray(explained, dtype=np.float64), left


def is_swing(explained: FloatArray, count: int, false_alarms: float = 0.001) -> bool:
    """Return whether the best of several sines explains more of ``count`` values than chance, by F of two coefficients.

    ``false_alarms`` is how often chance may do it, divided by the number of sines tried.

    >>> is_swing(np.array([0.1, 0.9]), 20), is_swing(np.array([0.1, 0.3]), 20)
    (True, False)
    """
    best, freedom = float(np.max(explained)), count - 4
    ratio = 0.5 * best / max(1.0 - best, 1e-12) * freedom
    return bool(stats.f.sf(ratio, 2, freedom) < false_alarms / explained.size)


def without_swing(time_s: FloatArray, values: FloatArray, rates_hz: FloatArray) -> FloatArray:
    """Return the values less the best sine among ``rates_hz``, fitted together with a trend; as they are where no sine is told.

    >>> time_s = np.arange(40.0)
    >>> np.round(without_swing(time_s, 0.5 * time_s + np.sin(2.0 * np.pi * 0.2 * time_s), np.array([0.2, 0.3]))[:3], 6).tolist()
    [0.0, 0.5, 1.0]
    """
    if values.size < LEAST_FOR_A_SWING:
        return values
    _, explained, _ = swing(time_s, values, rates_hz)
    if not is_swing(explained, values.size):
        return values
    phase = 2.0 * np.pi * rates_hz[int(np.argmax(explained))] * time_s
    sines = np.stack([np.sin(phase), np.cos(phase)], axis=1)
    design = np.column_stack([np.ones(values.size), time_s - time_s.mean(), sines])
    fitted = np.linalg.lstsq(design, values, rcond=None)[0]
    return np.asarray(values - sines @ fitted[2:], dtype=np.float64)
