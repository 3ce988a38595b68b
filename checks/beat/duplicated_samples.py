"""Duplicated samples: time stamps that stand twice.

A repeated stamp with the same values is a harmless echo and dropped; one with other values means two samples claim one instant.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured
from checks.subject import RunSubject


def contested_stamps(subject: RunSubject) -> Measured:
    """Return how many time stamps of each beat stand twice with different pressure or volume, and when first; shape (n_beats,).

    NaN for every beat where the run has no time stamps.
    """
    beats, signals = subject.known_beats(), subject.known_signals()
    counts, at_s = np.zeros(len(beats)), np.full(len(beats), np.nan)
    channel = subject.channel("pressure")
    if channel.time_s is None:
        return Measured(np.full(len(beats), np.nan))
    repeated = np.flatnonzero(np.diff(channel.time_s) == 0.0) + 1
    contested = np.zeros(repeated.size, dtype=bool)
    for name in ("pressure", "volume"):
        if subject.recording is not None and name in subject.recording.channels:
            samples = subject.channel(name).samples
            if samples.size == channel.samples.size:
                contested |= samples[repeated] != samples[repeated - 1]
    grid = signals.recorded_at["pressure"][repeated[contested]]
    owner = subject.beat_of_sample(grid)
    np.add.at(counts, owner[owner >= 0], 1.0)
    found, first = np.unique(owner[owner >= 0], return_index=True)
    at_s[found] = grid[owner >= 0][first] / signals.sampling_rate_hz
    return Measured(counts, at_s)


CHECK = Check(
    name="duplicated-samples",
    title="One sample an instant",
    level=Level.BEAT,
    measure=contested_stamps,
    unit="1",
    limits=Limits(fail_above=0.0, basis="a fact"),
    reason="{value:.0f} time stamps of the beat stand twice with different values",
    remedy="none for the beat; export the run again from the recorder",
)
