"""Segment phase: every segment whose sum is the volume shrinks while the ventricle empties.

A segment between electrodes that lie beyond a valve fills while the others empty. Each is held against the sum of the other ones, so
that its own share in the total does not hide it. An electrode only partly beyond makes a segment smaller before it turns it over; that
part cannot be seen here, only in a reference stroke volume.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import VOLUME_SHAPE
from checks.subject import RunSubject
from metrics.arrays import FloatArray

SAMPLES_PER_S = 50.0
LEAST_SEGMENTS = 2


def weakest_segment(subject: RunSubject) -> Measured:
    """Return the smallest correlation of a segment in use with the sum of the others, shape (); NaN without two segments."""
    if subject.recording is None or "volume" in subject.recording.channels:
        return single(np.nan)
    channels = subject.recording.channels
    names = [f"segment-{number}" for number in subject.facts.segments_used] or sorted(n for n in channels if n.startswith("segment-"))
    if len(names) < LEAST_SEGMENTS or not set(names) <= set(channels):
        return single(np.nan)
    every = max(1, round(channels[names[0]].sampling_rate_hz / SAMPLES_PER_S))
    samples = np.stack([channels[name].samples[::every] for name in names])
    samples = samples[:, np.isfinite(samples).all(axis=0)]
    return single(min(_correlation(one, samples.sum(axis=0) - one) for one in samples))


def _correlation(one: FloatArray, other: FloatArray) -> float:
    """Return Pearson's correlation, NaN for a segment that does not move."""
    spread = float(np.std(one) * np.std(other)) if one.size else 0.0
    return float(np.mean((one - one.mean()) * (other - other.mean())) / spread) if spread > 0.0 else float("nan")


CHECK = Check(
    name="segment-phase",
    title="Segments move together",
    level=Level.RUN,
    measure=weakest_segment,
    unit="1",
    limits=Limits(suspect_below=0.5, fail_below=0.0, basis="a segment against the total lies beyond a valve (from memory); house default"),
    reason="a segment in use moves with a correlation of {value:.2f} to the others (limit {limit:g})",
    remedy="leave segments beyond the valves out of segments_used, or place the catheter again",
    spoils=VOLUME_SHAPE,
)
