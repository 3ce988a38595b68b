"""Segments: every segment whose sum is the volume shrinks while the ventricle empties, and by a fair part of itself.

A segment between electrodes that lie beyond a valve fills while the others empty. Each is held against the sum of the other ones, so
that its own share in the total does not hide it. An electrode partly beyond makes a segment swing less before it turns it over: so what
each swings by, over its own mean, is held against the others. The wall's own differences are as large as a half, and an infarct stills a
segment that is truly inside; only the segment next to the valve, the last in use, fails for swinging too little. Up to a third of it
beyond the valve cannot be seen here, only in a reference stroke volume.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import VOLUME_SHAPE
from checks.subject import RunSubject, once_a_run
from metrics.arrays import FloatArray

SAMPLES_PER_S = 25.0
LEAST_SEGMENTS = 2
EDGES_PERCENT = (2.0, 98.0)


def weakest_segment(subject: RunSubject) -> Measured:
    """Return the smallest correlation of a segment in use with the sum of the others, shape (); NaN without two segments."""
    samples = _segments(subject)
    return single(np.nan if samples is None else min(_correlation(one, samples.sum(axis=0) - one) for one in samples))


def least_swing(subject: RunSubject) -> Measured:
    """Return the least of the segments' swings over their means, as a share of the others' median, shape (); NaN without three segments.

    Borne out where it is that of the last segment in use, the one next to the valve.
    """
    samples = _segments(subject)
    if samples is None or len(samples) <= LEAST_SEGMENTS:
        return single(np.nan)
    low, high = np.percentile(samples, EDGES_PERCENT, axis=1)
    mean = samples.mean(axis=1)
    swing = np.where(mean > 0.0, (high - low) / np.where(mean > 0.0, mean, 1.0), np.nan)
    share = np.array([one / np.median(np.delete(swing, place)) for place, one in enumerate(swing)])
    if np.isnan(share).any():
        return single(np.nan)
    least = int(np.argmin(share))
    return Measured(np.array(share[least]), corroborated=np.array(least == len(samples) - 1))


@once_a_run
def _segments(subject: RunSubject) -> FloatArray | None:
    """Return the segments in use, thinned, shape (n_segments, n); None without two, or where a volume channel stands in their place."""
    if subject.recording is None or "volume" in subject.recording.channels:
        return None
    channels = subject.recording.channels
    names = [f"segment-{number}" for number in subject.facts.segments_used] or sorted(n for n in channels if n.startswith("segment-"))
    if len(names) < LEAST_SEGMENTS or not set(names) <= set(channels):
        return None
    every = max(1, round(channels[names[0]].sampling_rate_hz / SAMPLES_PER_S))
    samples = np.stack([channels[name].samples[::every] for name in names])
    samples = samples[:, np.isfinite(samples).all(axis=0)]
    return samples if samples.shape[1] else None


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
SWING = Check(
    name="segment-swing",
    title="Every segment empties",
    level=Level.RUN,
    measure=least_swing,
    unit="1",
    limits=Limits(
        suspect_below=0.5,
        fail_below=0.33,
        basis="house default: walls move unevenly by a half; at a third the basal segment takes a tenth off stroke volume (derived)",
    ),
    reason="a segment swings by {value:.0%} of what the others do for their size, as one partly beyond a valve (limit {limit:.0%})",
    remedy="leave segments near the valves out of segments_used, or place the catheter again",
    spoils=VOLUME_SHAPE,
)
