"""Aortic agreement: a left ventricle and the aorta behind an open valve reach one systolic pressure.

Without a narrowed valve or outflow tract, and without a device that pumps past them, the two peaks lie within a few mmHg (common
practice, no source). The second sensor has a gain and a zero of its own, and a fluid-filled line rings up to 10-15 % over the peak (from
memory): so only beyond 20 % is the ventricle's pressure not believed. A pressure in cmH2O called mmHg is 36 % too large. Leaks make no
difference: the valve is open when both reach their peak.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import PRESSURE_GAIN, PRESSURE_OFFSET
from checks.subject import RunSubject
from metrics.arrays import FloatArray, IntArray

CHANNEL = "aortic_pressure"
PARTED = frozenset({"aortic-stenosis", "outflow-obstruction", "assist-device"})
"""Conditions under which the two peaks differ in a sound recording."""


def peaks(samples: FloatArray, place: IntArray, start: IntArray, end: IntArray) -> FloatArray:
    """Return the largest sample of each beat, shape of ``start``; ``place`` says where each sample lies on the grid of the beats.

    >>> peaks(np.array([1.0, 5.0, np.nan, 2.0]), np.arange(4), np.array([0, 2]), np.array([2, 4])).tolist()
    [5.0, 2.0]
    """
    first, last = np.searchsorted(place, start), np.searchsorted(place, end)
    found = np.full(start.size, np.nan)
    held = last > first
    if held.any():
        edges = np.column_stack([first[held], last[held]]).ravel()
        found[held] = np.fmax.reduceat(np.append(samples, np.nan), edges)[::2]
    return found


def peak_gap(subject: RunSubject) -> Measured:
    """Return by what fraction of the aortic peak the ventricle's departs from it in the median accepted beat, shape ().

    NaN for a right ventricle, without the channel, and where the two may differ.
    """
    facts = subject.facts
    if facts.chamber != "LV" or facts.conditions & PARTED or subject.recording is None or CHANNEL not in subject.recording.channels:
        return single(np.nan)
    beats = subject.known_beats()
    chosen = np.ones(len(beats), dtype=bool) if subject.accepted is None else subject.accepted
    place = subject.known_signals().recorded_at[CHANNEL]
    aortic = peaks(subject.channel(CHANNEL).samples, place, beats.start, beats.end)[chosen]
    gaps = beats.pmax_mmhg[chosen] / np.where(aortic > 0.0, aortic, np.nan) - 1.0
    return single(abs(float(np.nanmedian(gaps))) if np.isfinite(gaps).any() else np.nan)


CHECK = Check(
    name="aortic-agreement",
    title="Ventricle and aorta reach one systolic pressure",
    level=Level.RUN,
    measure=peak_gap,
    unit="1",
    limits=Limits(suspect_above=0.10, fail_above=0.20, basis="house default; lines to the aorta overshoot by 10-15 % (from memory)"),
    reason="the ventricle's peak pressure departs by {value:.0%} from the aorta's, which it should reach (limit {limit:.0%})",
    remedy="confirm unit, zero and gain of both pressures, and whether anything narrows the outflow",
    spoils=PRESSURE_GAIN | PRESSURE_OFFSET,
    after_beats=True,
)
