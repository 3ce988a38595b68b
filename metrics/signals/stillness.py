"""Where a channel stands still: the same sample over and over, as a plug that came out or a transmitter out of reach leaves it."""

from __future__ import annotations

import numpy as np

from metrics.arrays import BoolArray, FloatArray, IntArray, smallest_step, span

JUMP_STEPS = 3.0

LEAST_JUMP = 0.03
"""Of what the channel moves by: more than an upstroke or an ejection begins with between two samples at 250 Hz; house default."""

JUMP_RATE_HZ = 250.0

HELD_S = 0.100
"""Shorter pieces are plateaus of any converter; house default."""

RAIL_TIMES = 3
"""A channel that keeps coming back to its own extreme is clipped there, not held."""

PAUSE_S = 1.5
"""Longer than any diastole but that of an asystole; house default."""


def still_stretches(samples: FloatArray) -> tuple[IntArray, IntArray]:
    """Return (first, stop) of every stretch of at least three identical samples, half open.

    >>> still_stretches(np.array([1.0, 2.0, 2.0, 2.0, 3.0]))
    (array([1]), array([4]))
    """
    edges = np.flatnonzero(np.diff(samples[1:] == samples[:-1], prepend=False, append=False))
    first, stop = edges[::2], edges[1::2] + 1
    long = stop - first >= 3
    return first[long], stop[long]


def has_jump(samples: FloatArray, first: IntArray, stop: IntArray) -> BoolArray:
    """Return which stretches were entered or left by more than three of the channel's steps, or lie at its edge; shape of ``first``.

    >>> steps = np.array([0.0, 1.0, 1.0, 1.0, 2.0, 2.0, 2.0, 9.0])
    >>> has_jump(steps, np.array([1, 4]), np.array([4, 7])).tolist()
    [False, True]
    """
    widest = JUMP_STEPS * smallest_step(samples)
    entered = np.abs(samples[first] - samples[np.maximum(first - 1, 0)])
    left = np.abs(samples[np.minimum(stop, samples.size - 1)] - samples[stop - 1])
    # not "greater than": beside a missing sample the difference is no number, and that is no way a plateau ends
    jumped: BoolArray = ~(entered <= widest) | ~(left <= widest) | (first == 0) | (stop == samples.size)
    return jumped


def is_broken_off(samples: FloatArray, first: IntArray, stop: IntArray, rate_hz: float) -> BoolArray:
    """Return which stretches begin or end with a jump no heart makes, or lie at an edge; shape of ``first``.

    >>> wave = np.concatenate([np.zeros(5), np.arange(0.0, 100.0), np.full(5, 20.0), np.arange(20.0, 0.0, -1.0)])
    >>> is_broken_off(wave, np.array([1, 105]), np.array([5, 110]), 250.0).tolist()
    [False, True]
    """
    least = LEAST_JUMP * max(JUMP_RATE_HZ / rate_hz, 1.0) * float(np.nan_to_num(span(samples)))
    entered = np.abs(samples[first] - samples[np.maximum(first - 1, 0)])
    left = np.abs(samples[np.minimum(stop, samples.size - 1)] - samples[stop - 1])
    at_edge = (first == 0) | (stop == samples.size)
    broken: BoolArray = at_edge | (((entered > least) | (left > least)) & has_jump(samples, first, stop))
    return broken


def standing(samples: FloatArray, rate_hz: float) -> tuple[IntArray, IntArray]:
    """Return (first, stop) of every stretch, half open, that stands still as no heart does.

    It lasts 0.1 s or more and is broken off elsewhere than at a rail, or outlasts any diastole.

    >>> wave = np.sin(np.arange(1000) / 8.0)
    >>> wave[400:500] = wave[400]
    >>> standing(wave, 250.0)
    (array([400]), array([500]))
    """
    first, stop = still_stretches(samples)
    long = stop - first >= HELD_S * rate_hz
    first, stop = first[long], stop[long]
    if first.size == 0:
        return first, stop
    cut_off = is_broken_off(samples, first, stop, rate_hz) & ~_is_at_rail(samples, first)
    stands = cut_off | (stop - first >= PAUSE_S * rate_hz)
    return first[stands], stop[stands]


def _is_at_rail(samples: FloatArray, first: IntArray) -> BoolArray:
    """Return which stretches stand at a rail: at the channel's highest or lowest value, with two more of them; shape of ``first``."""
    value, known = samples[first], samples[np.isfinite(samples)]
    at_rail = np.zeros(first.shape, dtype=bool)
    for extreme in (known.max(), known.min()):
        there = value == extreme
        at_rail |= there & (np.count_nonzero(there) >= RAIL_TIMES)
    return at_rail
