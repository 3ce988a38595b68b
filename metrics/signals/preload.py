"""Which beats of a preload-reduction run may carry a slope: from the onset of the fall to the reflex or the nadir.

Beats before the onset repeat one load, the deflation runs back up another path, and once heart rate answers the baroreflex changes
contractility: heart rate within 10 % of its value before the occlusion (customary, from memory), on a median of 5 beats so that one
premature beat does not end the window. In declared atrial fibrillation there is no reflex cut. No limit on the length.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from metrics.arrays import BoolArray, FloatArray, running_median
from metrics.signals.beats import Beats
from metrics.signals.facts import RunFacts

MEDIAN_BEATS = 5
REFLEX_SHARE = 0.10
ONSET_SHARE = 0.05
"""The onset is where EDV has gone 5 % of the whole fall; house default."""


@dataclass(frozen=True, slots=True)
class PreloadWindow:
    """``inside`` has shape (n_beats,). ``onset_at`` and ``last_at`` are beat positions; ``ended_by`` is nadir, reflex or deflation."""

    inside: BoolArray
    onset_at: int
    last_at: int
    ended_by: str
    found_by: str


def preload_window(beats: Beats, facts: RunFacts) -> PreloadWindow | None:
    """Return the usable window of a preload-reduction run, None without at least three beats."""
    if len(beats) < 3 or not np.isfinite(beats.edv_ml).any():
        return None
    load_ml = _bridged(running_median(beats.edv_ml, MEDIAN_BEATS))
    onset, nadir, found_by = _onset_and_nadir(beats, load_ml, facts)
    last, ended_by = _deflated(beats, facts, onset, nadir)
    reflex = _first_reflex_beat(beats, onset, facts)
    if reflex is not None and reflex <= last:
        last, ended_by = max(reflex - 1, onset), "reflex"
    position = np.arange(len(beats))
    return PreloadWindow((position >= onset) & (position <= last), onset, last, ended_by, found_by)


def _bridged(values: FloatArray) -> FloatArray:
    finite = np.isfinite(values)
    return np.interp(np.arange(values.size), np.flatnonzero(finite), values[finite])


def _onset_and_nadir(beats: Beats, load_ml: FloatArray, facts: RunFacts) -> tuple[int, int, str]:
    """Return onset and nadir from the declared events, or from the load itself."""
    start_s = beats.start.astype(np.float64)
    nadir = int(np.argmin(load_ml))
    ons = sorted(at for at, kind in facts.events if kind == "occlusion-on")
    rate = facts.sampling_rate_hz
    if ons and rate > 0.0:
        onsets = [int(np.searchsorted(start_s / rate, at)) for at in ons]
        before = [onset for onset in onsets if onset <= nadir]
        if before:
            onset = before[-1]
            return onset, onset + int(np.argmin(load_ml[onset:])), "event"
    top = float(np.max(load_ml[: nadir + 1]))
    full = np.flatnonzero(load_ml[: nadir + 1] >= top - ONSET_SHARE * (top - load_ml[nadir]))
    return int(full[-1]), nadir, "load"


def _deflated(beats: Beats, facts: RunFacts, onset: int, nadir: int) -> tuple[int, str]:
    """Return the last beat before the deflation, or the nadir."""
    offs = [at for at, kind in facts.events if kind == "occlusion-off" and at * facts.sampling_rate_hz > beats.start[onset]]
    if offs:
        released = int(np.searchsorted(beats.end, min(offs) * facts.sampling_rate_hz, side="right")) - 1
        if onset <= released < nadir:
            return released, "deflation"
    return nadir, "nadir"


def _first_reflex_beat(beats: Beats, onset: int, facts: RunFacts) -> int | None:
    """Return the first beat whose heart rate left the band around its value before the onset, None where that cannot be told."""
    if facts.rhythm == "atrial-fibrillation":
        return None
    before = beats.rr_s[max(0, onset - 2 * MEDIAN_BEATS) : onset + 1]
    usual_s = float(np.nanmedian(before)) if np.isfinite(before).any() else float("nan")
    rate_change = usual_s / running_median(beats.rr_s, MEDIAN_BEATS) - 1.0
    out = np.flatnonzero(np.abs(rate_change[onset + 1 :]) > REFLEX_SHARE)
    return None if out.size == 0 else onset + 1 + int(out[0])
