"""Flat line: a signal that stands still while the heart does not.

Quantised diastasis and plateaus are flat in health, so only identical raw samples for more than 0.4 of the beat count. A coarse
converter is flat for longer than that on an empty ventricle, but it arrives and leaves by single steps: a stretch counts only if it
begins or ends with a jump of more than three steps, lies at an edge of the run, or holds a whole beat. Without that, hearts recorded
in steps of 0.5 mmHg and 0.5 mL lost 7 % of their beats during occlusions, in steps of 1 mmHg and 1 mL 15 % (measured on simulated ones).
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured
from checks.subject import RunSubject
from metrics.signals.stillness import has_jump, still_stretches


def still_share(subject: RunSubject) -> Measured:
    """Return the longest still stretch of pressure or volume over the beat's length, and when it begins; shape (n_beats,).

    A stretch without a jump at either end counts only in beats that it covers from end to end.
    """
    beats, signals = subject.known_beats(), subject.known_signals()
    share, at_s = np.zeros(len(beats)), np.full(len(beats), np.nan)
    length = (beats.end - beats.start).astype(np.float64)
    for name in ("pressure", "volume"):
        if subject.recording is None or name not in subject.recording.channels:
            continue
        samples = subject.channel(name).samples
        first, stop = still_stretches(samples)
        positions = signals.recorded_at[name]
        begin, end = positions[first], positions[stop - 1]
        # the part of each stretch inside each beat it touches
        from_beat = np.searchsorted(beats.end, begin, side="right")
        to_beat = np.searchsorted(beats.start, end, side="right")
        touched = np.maximum(to_beat - from_beat, 0)
        stretch = np.repeat(np.arange(begin.size), touched)
        beat = np.repeat(from_beat, touched) + np.arange(stretch.size) - np.repeat(np.cumsum(touched) - touched, touched)
        inside = np.minimum(end[stretch], beats.end[beat]) - np.maximum(begin[stretch], beats.start[beat])
        counts = has_jump(samples, first, stop)[stretch] | (inside >= length[beat] - 1.0)
        worst = np.where(counts, inside / length[beat], 0.0)
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
