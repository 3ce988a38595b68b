"""Ringing: pressure does not swing after the ventricle has relaxed.

A fluid-filled line swings at its natural frequency after every fast change, whatever it was declared as. The fastest one before a quiet
stretch is the end of relaxation: from 50 ms after dP/dt minimum pressure is a decay and a slow rise, which a polynomial of fifth degree
follows over 200 ms. What is left of the mean over beats is a swing that comes back in every beat alike. What differs from beat to beat is
noise and is taken off; so is rounding, which on a quiet plateau is the same in every beat, and hum; where there is much of it, it chooses
the landmarks and nothing is said. Lines of 12 Hz and less show so. At 20 Hz the swing is lost in
the usual noise, though dP/dt minimum is 7-14 % off: that cannot be told without a fast flush (Gardner 1981, Anesthesiology 54:227, from
memory). How slow the swing is cannot be told either, so what lines of 8 Hz reach is withheld behind one of 12 Hz too.
"""

from __future__ import annotations

import functools
import math

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.run.hum import dpdt_hum
from checks.run.quantisation import step_share
from checks.spoils import PRESSURE_EXTREMES, STEEPEST
from checks.subject import RunSubject
from metrics.arrays import FloatArray
from metrics.signals.mains import MAINS_HZ, shown_at_hz

AFTER_S = (0.050, 0.250)
BEFORE_NEXT_S = 0.100
"""The atrium's push before the next beat stays out."""

SHORTEST_S = 0.100
DEGREE = 5
BEATS = (5, 12)
"""Fewest beats for a mean, and how many are averaged: over more of them relaxation itself changes in an occlusion."""

MOST_HUM = 0.10
"""Of dP/dt maximum: hum of more chooses the landmark the pieces begin at, and so comes back in every beat; house default."""

STANDS_OUT = 10.0
"""A swing counts from so many times the power the mean has by chance: noise has some 1 to 3 times
that, lines of 12 Hz 30 times and more (computed)."""


def common_swing(pieces: FloatArray, sampling_rate_hz: float) -> float:
    """Return the RMS of what the pieces' mean has beyond a polynomial, the mains and its own noise; pieces have shape (n_beats, length).

    >>> time = np.linspace(0.0, 0.2, 51)
    >>> swing = np.sin(2.0 * np.pi * 20.0 * time) + 30.0 * np.exp(-time / 0.05)
    >>> round(common_swing(np.tile(swing, (6, 1)), 250.0), 1)
    0.7
    """
    count, length = pieces.shape
    shapes, taking = _expected_shapes(length, sampling_rate_hz)
    left = pieces - (pieces @ taking) @ shapes.T
    noise, common = float(np.mean(np.var(left, axis=0, ddof=1))) / count, float(np.mean(np.mean(left, axis=0) ** 2))
    return float(np.sqrt(common - noise)) if common > STANDS_OUT * noise else 0.0


@functools.lru_cache(maxsize=16)
def _expected_shapes(length: int, sampling_rate_hz: float) -> tuple[FloatArray, FloatArray]:
    """Return the polynomials and the mains, and what takes their amounts out of a piece; both of shape (length, n_shapes)."""
    slow = np.polynomial.legendre.legvander(np.linspace(-1.0, 1.0, length), DEGREE)
    shown_hz = [hz for hz in (shown_at_hz(mains_hz, sampling_rate_hz) for mains_hz in MAINS_HZ) if np.isfinite(hz)]
    turn = 2.0 * np.pi * np.outer(np.arange(length) / sampling_rate_hz, shown_hz)
    shapes = np.hstack([slow, np.sin(turn), np.cos(turn)])
    return shapes, np.linalg.pinv(shapes).T


def swing_in_diastole(subject: RunSubject) -> Measured:
    """Return the RMS of what swings after relaxation over what pressure moves by, shape (); NaN where diastole is too short."""
    signals, beats = subject.known_signals(), subject.known_beats()
    if float(dpdt_hum(subject).value) > MOST_HUM:
        return single(np.nan)
    rate_hz, relaxing = signals.sampling_rate_hz, beats.dpdt_min_at
    first, last = (round(edge * rate_hz) for edge in AFTER_S)
    room = beats.end - round(BEFORE_NEXT_S * rate_hz) - relaxing
    last = min(last, int(np.median(room[relaxing >= 0]))) if (relaxing >= 0).any() else 0
    chosen = relaxing[(relaxing >= 0) & (room >= last)][: BEATS[1]]
    if last - first < SHORTEST_S * rate_hz or chosen.size < BEATS[0]:
        return single(np.nan)
    pieces = signals.pressure_mmhg[chosen[:, None] + np.arange(first, last)]
    rounding = np.nan_to_num(step_share(subject, "pressure")) / math.sqrt(12.0)
    swing = math.sqrt(max((common_swing(pieces, rate_hz) / signals.pressure_reach_mmhg) ** 2 - float(rounding) ** 2, 0.0))
    return single(swing, float(chosen[0]) / rate_hz)


CHECK = Check(
    name="ringing",
    title="Pressure does not ring",
    level=Level.RUN,
    measure=swing_in_diastole,
    unit="1",
    limits=Limits(
        suspect_above=0.0015,
        fail_above=0.002,
        basis="0.25 mmHg of 125 comes back in every beat; a sound decay leaves nothing, rounding is taken off (computed)",
    ),
    reason="pressure swings after relaxation by {value:.2%} of the pulse in all beats alike (limit {limit:.2%}), as in a fluid-filled line",
    remedy="confirm the kind of the pressure sensor; flush the line and look for air, or use a tip manometer",
    spoils=STEEPEST | PRESSURE_EXTREMES,
)
