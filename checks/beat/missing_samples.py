"""Missing samples: the longest gap inside a beat.

A straight line bridges one lost sample without harm; a gap of the width of dP/dt's own window does not.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured
from checks.subject import RunSubject


def longest_gap(subject: RunSubject) -> Measured:
    """Return the longest stretch of missing samples touching each beat, in seconds, and when it begins; shape (n_beats,)."""
    beats, signals = subject.known_beats(), subject.known_signals()
    edges = np.flatnonzero(np.diff(signals.missing, prepend=False, append=False))
    first, stop = edges[::2], edges[1::2]
    longest_s, at_s = np.zeros(len(beats)), np.full(len(beats), np.nan)
    # a gap is counted once in every beat it touches: from the beat of its first sample to that of its last
    if len(beats) and first.size:
        from_beat = np.maximum(np.searchsorted(beats.end, first, side="right"), 0)
        to_beat = np.searchsorted(beats.start, stop - 1, side="right")
        for gap in np.argsort(stop - first, kind="stable"):
            touched = slice(from_beat[gap], to_beat[gap])
            longest_s[touched] = (stop[gap] - first[gap]) / signals.sampling_rate_hz
            at_s[touched] = first[gap] / signals.sampling_rate_hz
    return Measured(longest_s, at_s)


CHECK = Check(
    name="missing-samples",
    title="No gap inside the beat",
    level=Level.BEAT,
    measure=longest_gap,
    unit="s",
    limits=Limits(fail_above=0.010, basis="half the 20-30 ms window dP/dt needs; house default"),
    reason="{value:.3f} s of samples are missing inside the beat (limit {limit:.3f} s)",
    remedy="none for the beat; look for lost packets between recorder and disk",
    required=True,
)
