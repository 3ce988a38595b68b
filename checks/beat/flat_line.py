"""Flat line: a signal that stands still while the heart does not.

Quantised diastasis and plateaus are flat in health, so only identical raw samples for more than 0.4 of the beat count (a share found on
simulated quantised hearts).
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured
from checks.subject import RunSubject
from metrics.arrays import FloatArray, IntArray


def still_stretches(samples: FloatArray) -> tuple[IntArray, IntArray]:
    """Return (first, stop) of every stretch of at least three identical samples, half open.

    >>> still_stretches(np.array([1.0, 2.0, 2.0, 2.0, 3.0]))
    (array([1]), array([4]))
    """
    same = np.concatenate([[False], np.diff(samples) == 0.0, [False]])
    edges = np.flatnonzero(np.diff(same.astype(np.int8)))
    first, stop = edges[::2], edges[1::2] + 1
    long = stop - first >= 3
    return first[long], stop[long]


def still_share(subject: RunSubject) -> Measured:
    """Return the longest still stretch of pressure or volume over the beat's length, and when it begins; shape (n_beats,)."""
    beats, signals = subject.known_beats(), subject.known_signals()
    share, at_s = np.zeros(len(beats)), np.full(len(beats), np.nan)
    length = (beats.end - beats.start).astype(np.float64)
    for name in ("pressure", "volume"):
        if subject.recording is None or name not in subject.recording.channels:
            continue
        first, stop = still_stretches(subject.channel(name).samples)
        positions = signals.recorded_at[name]
        begin, end = positions[first], positions[stop - 1]
        # the part of each stretch inside each beat it touches
        from_beat = np.searchsorted(beats.end, begin, side="right")
        to_beat = np.searchsorted(beats.start, end, side="right")
        touched = np.maximum(to_beat - from_beat, 0)
        stretch = np.repeat(np.arange(begin.size), touched)
        beat = np.repeat(from_beat, touched) + np.arange(stretch.size) - np.repeat(np.cumsum(touched) - touched, touched)
        inside = np.minimum(end[stretch], beats.end[beat]) - np.maximum(begin[stretch], beats.start[beat])
        worst = inside / length[beat]
        order = np.argsort(worst, kind="stable")
        better = worst[order] > share[beat[order]]
        share[beat[order[better]]] = worst[order[better]]
        at_s[beat[order[better]]] = np.maximum(begin[stretch], beats.start[beat])[order[better]] / signals.sampling_rate_hz
    return Measured(share, at_s)


CHECK = Check(
    name="flat-line",
    title="Signals move with the beat",
    level=Level.BEAT,
    measure=still_share,
    unit="1",
    limits=Limits(fail_above=0.40, basis="0.4 of the beat, after simulated quantised hearts"),
    reason="pressure or volume stands still for {value:.0%} of the beat (limit {limit:.0%})",
    remedy="none for the beat; check the connection of sensor and recorder",
)
