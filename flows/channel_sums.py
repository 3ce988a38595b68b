"""The sum of each channel's content: by it the same recording is known again under another run, acquisition or subject."""

from __future__ import annotations

import hashlib
from collections.abc import Iterable

import numpy as np

from checks.subject import RunSubject
from metrics.arrays import FloatArray

Row = dict[str, object]


def channel_sum(samples: FloatArray) -> str | None:
    """Return the SHA-256 of the samples as little-endian float32, every missing one alike; None for a channel that shows nothing.

    >>> channel_sum(np.array([1.0, 2.0])) == channel_sum(np.array([1.0, 2.0 + 1e-9])), channel_sum(np.zeros(9))
    (True, None)
    """
    canonical = np.asarray(samples, dtype="<f4") + np.float32(0.0)
    known = canonical[np.isfinite(canonical)]
    if known.size == 0 or known.min() == known.max():
        return None
    canonical[np.isnan(canonical)] = np.nan
    return hashlib.sha256(canonical.tobytes()).hexdigest()


def channel_rows(runs: Iterable[RunSubject], site: str, acquisition: str) -> list[Row]:
    """Return a row for each pressure, volume and segment of the runs: site, acquisition, run, channel, sha256."""
    sums = [
        (run.facts.run, name, channel_sum(channel.samples))
        for run in runs
        if run.recording is not None
        for name, channel in sorted(run.recording.channels.items())
        if name in {"pressure", "volume"} or name.startswith("segment-")
    ]
    return [
        {"site": site, "acquisition": acquisition, "run": run, "channel": name, "sha256": sha256} for run, name, sha256 in sums if sha256
    ]
