"""Which beats of a preload-reduction run may carry a slope: from the onset of the fall to the reflex or the nadir.

Beats before the onset repeat one load, the deflation runs back up another path, and once heart rate answers the baroreflex changes
contractility. The answer is told where heart rate, on a median of 5 beats so that one premature beat does not end the window, leaves its
value before the occlusion by 5 % (5 to 10 % are customary, from memory), or by four times what it varies by itself, and does not come
back as a breath's swing does; contractility has risen as long as heart rate has, so the window ends where the departure began. A rhythm
that varies as much as a reflex would change it tells of none, as declared atrial fibrillation does not.
No limit on the length.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from metrics.arrays import BoolArray, FloatArray, robust_sd, running_median
from metrics.signals.beats import Beats
from metrics.signals.facts import RunFacts

MEDIAN_BEATS = 5
REFLEX_SHARE = 0.05
"""The least by which heart rate must change to be a reflex: 5 to 10 % are customary (from memory)."""

OWN_VARIATIONS = 4.0
"""How many standard deviations of the change from beat to beat: neighbours go together, so it must be many."""

STAYS_SHARE = 0.5
"""A reflex lasts as long as the load is low: heart rate stays beyond half of what told it until the window ends; house default."""

BEGUN_SHARE = 0.025
"""In a calm rhythm a departure that tells a reflex has begun where it came half way, else where it is told; house default."""

ONSET_SHARE = 0.05
"""The onset is where EDV has gone 5 % of the whole fall; house default."""

EVENT_EARLY_BEATS, EVENT_LATE_BEATS = 6, 3
"""A balloon takes a few beats to fill, so an event may come so much before the fall, and a hand so much after it; house default."""


@dataclass(frozen=True, slots=True)
class PreloadWindow:
    """``inside`` has shape (n_beats,). ``onset_at`` and ``last_at`` are beat positions; ``ended_by`` is nadir, reflex or deflation."""

    inside: BoolArray
    onset_at: int
    last_at: int
    ended_by: str
    found_by: str


def preload_window(beats: Beats, facts: RunFacts, sampling_rate_hz: float) -> PreloadWindow | None:
    """Return the usable window of a preload-reduction run, None without at least three beats.

    ``sampling_rate_hz`` is that of the signals the beats were found in, which need not be the declared one.
    """
    if len(beats) < 3 or not np.isfinite(beats.edv_ml).any():
        return None
    load_ml = _bridged(running_median(beats.edv_ml, MEDIAN_BEATS))
    onset, nadir, found_by = _onset_and_nadir(beats, load_ml, _event_samples(facts, "occlusion-on", sampling_rate_hz))
    last, ended_by = _deflated(beats, _event_samples(facts, "occlusion-off", sampling_rate_hz), onset, nadir)
    reflex = _first_reflex_beat(beats, onset, last, facts)
    if reflex is not None:
        last, ended_by = max(reflex - 1, onset), "reflex"
    position = np.arange(len(beats))
    return PreloadWindow((position >= onset) & (position <= last), onset, last, ended_by, found_by)


def _bridged(values: FloatArray) -> FloatArray:
    finite = np.isfinite(values)
    return np.interp(np.arange(values.size), np.flatnonzero(finite), values[finite])


def _event_samples(facts: RunFacts, kind: str, sampling_rate_hz: float) -> list[float]:
    """Return where the declared events of one kind lie, in samples, ascending."""
    return sorted(at_s * sampling_rate_hz for at_s, event in facts.events if event == kind)


def _onset_and_nadir(beats: Beats, load_ml: FloatArray, ons: list[float]) -> tuple[int, int, str]:
    """Return onset and nadir: from a declared event where the load bears it out, else from the load itself.

    An event more than a few beats from where the load begins to fall was timed by another clock; it must not place the window.
    """
    nadir = int(np.argmin(load_ml))
    onsets = [int(np.searchsorted(beats.start, on)) for on in ons]
    before = [onset for onset in onsets if onset <= nadir]
    if before:
        nadir = before[-1] + int(np.argmin(load_ml[before[-1] :]))
    top = float(np.max(load_ml[: nadir + 1]))
    full = np.flatnonzero(load_ml[: nadir + 1] >= top - ONSET_SHARE * (top - load_ml[nadir]))
    falls = int(full[-1])
    if before and -EVENT_LATE_BEATS <= falls - before[-1] <= EVENT_EARLY_BEATS:
        return before[-1], nadir, "event"
    return falls, nadir, "load"


def _deflated(beats: Beats, offs: list[float], onset: int, nadir: int) -> tuple[int, str]:
    """Return the last beat before the deflation, or the nadir."""
    after = [off for off in offs if off > beats.start[onset]]
    if after:
        released = int(np.searchsorted(beats.end, after[0], side="right")) - 1
        if onset <= released < nadir:
            return released, "deflation"
    return nadir, "nadir"


def is_at_usual_rate(beats: Beats, onset: int, facts: RunFacts) -> BoolArray:
    """Return which beats come at the rate before the onset, shape (n_beats,); all where that cannot be told."""
    change, bound, _ = _rate_change(beats, onset, facts)
    return np.asarray(~(np.abs(change) > bound), dtype=bool)


def _rate_change(beats: Beats, onset: int, facts: RunFacts) -> tuple[FloatArray, float, float]:
    """Return by how much of it heart rate is above that before the onset, shape (n_beats,), and what tells a reflex, and its beginning."""
    if facts.rhythm == "atrial-fibrillation":
        return np.zeros(len(beats)), REFLEX_SHARE, BEGUN_SHARE
    before = beats.rr_s[max(0, onset - 2 * MEDIAN_BEATS) : onset + 1]
    usual_s = float(np.nanmedian(before)) if np.isfinite(before).any() else float("nan")
    steps = np.diff(beats.rr_s)
    # white variation doubles its variance in differences, and a trend leaves them
    own = robust_sd(steps[np.isfinite(steps)]) / float(np.sqrt(2.0)) / usual_s if np.isfinite(steps).any() else 0.0
    told = max(OWN_VARIATIONS * own, REFLEX_SHARE)
    begun = told if told > REFLEX_SHARE else BEGUN_SHARE
    return usual_s / running_median(beats.rr_s, MEDIAN_BEATS) - 1.0, told, begun


def _first_reflex_beat(beats: Beats, onset: int, last: int, facts: RunFacts) -> int | None:
    """Return the beat at which heart rate begins to leave its band for the rest of the window, None where it does not."""
    change, bound, begun = _rate_change(beats, onset, facts)
    sign = np.sign(change[last])
    back = np.flatnonzero(~(sign * change[onset + 1 : last + 1] > STAYS_SHARE * bound))
    away = onset + 1 if back.size == 0 else onset + 2 + int(back[-1])
    out = np.flatnonzero(sign * change[away : last + 1] > bound)
    if out.size == 0:
        return None
    told = away + int(out[0])
    calm = np.flatnonzero(~(sign * change[onset:told] > begun))
    return onset + 1 + int(calm[-1]) if calm.size else onset + 1
