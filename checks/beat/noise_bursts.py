"""Noise bursts: a loose contact or a diathermy shakes the pressure for part of a beat.

Noise of the whole run is another check's; a burst is known by the run's own quiet: third differences of the recorded samples, in which a
heart hardly shows, reach in two neighbouring windows of 30 ms three times what they reach in the quietest quarter of beats. There are
two windows with a gap between them, because a single jump of the signal is no noise. How much that matters is told by what the noise does
to dP/dt, as for a whole run (`checks.run.noise`): the beats that are touched are rejected, the others stay as they are.
"""

from __future__ import annotations

import math

import numpy as np

from checks.check import Check, Level, Limits, Measured
from checks.run.noise import responses
from checks.subject import RunSubject
from metrics.arrays import FloatArray, median_of_known

WINDOW_S = 0.030
LEAST_WINDOW = 6
GAP = 4
"""Samples that one jump moves third differences in."""

STANDS_OUT = 3.0
QUIET_PERCENT = 25.0
"""Of the beats, the quietest quarter tells the run's own noise: bursts may touch half of them."""

PER_SD = math.sqrt(20.0 * 2.0 / math.pi)
"""The mean size of third differences of white noise of SD 1 (derived)."""

REACH_S = 0.020
"""So far the common filter carries a burst beyond its end."""


def shaking(samples: FloatArray, sampling_rate_hz: float) -> FloatArray:
    """Return, for each sample, the SD of white noise that third differences show in the quieter of two windows from there on; shape (n,).

    >>> still = np.linspace(0.0, 50.0, 400)
    >>> still[200:260] += np.tile([1.0, -1.0], 30)
    >>> bool(shaking(still, 250.0).max() > 1.0), bool(shaking(np.where(np.arange(400) < 200, 0.0, 30.0), 250.0).max() > 0.0)
    (True, False)
    """
    width = max(LEAST_WINDOW, round(WINDOW_S * sampling_rate_hz))
    found = np.zeros(samples.size)
    if samples.size < 2 * width + GAP + 3:
        return found
    sizes = np.diff(samples, 3)
    np.abs(sizes, out=sizes)
    sizes[np.isnan(sizes)] = 0.0
    summed = np.zeros(sizes.size + 1)
    np.cumsum(sizes, out=summed[1:])
    inside = summed[width:] - summed[:-width]
    quieter = found[: inside.size - width - GAP]
    np.minimum(inside[: -width - GAP], inside[width + GAP :], out=quieter)
    quieter /= width * PER_SD
    return found


def bursts(subject: RunSubject) -> Measured:
    """Return the SD that the loudest burst of each beat has in dP/dt over its median maximum, shape (n_beats,); 0 without a burst."""
    channel, signals, beats = subject.channel("pressure"), subject.known_signals(), subject.known_beats()
    rate_hz, at = channel.sampling_rate_hz, signals.recorded_at["pressure"]
    loud = shaking(channel.samples, rate_hz)
    length = 2 * max(LEAST_WINDOW, round(WINDOW_S * rate_hz)) + GAP + round(REACH_S * rate_hz)
    first = np.maximum(np.searchsorted(at, beats.start) - length, 0)
    stop = np.minimum(np.searchsorted(at, beats.end) + round(REACH_S * rate_hz), loud.size)
    # every second stretch lies between two beats' own, and is of no interest
    edges = np.minimum(np.column_stack([first, np.maximum(stop, first + 1)]).ravel(), loud.size)
    loudest = np.maximum.reduceat(np.append(loud, 0.0), edges)[::2] if edges.size else np.empty(0)
    quiet = float(np.percentile(loudest, QUIET_PERCENT)) if loudest.size else 0.0
    steep = responses(signals.sampling_rate_hz, subject.facts.chamber)[2]
    moved = np.ptp(channel.samples[np.isfinite(channel.samples)])
    scale = np.ptp(signals.pressure_mmhg) / moved if moved > 0.0 else np.nan
    share = loudest * scale * steep / abs(median_of_known(beats.dpdt_max_mmhg_per_s))
    return Measured(np.where(loudest > STANDS_OUT * quiet, share, np.where(np.isfinite(share), 0.0, np.nan)))


CHECK = Check(
    name="noise-bursts",
    title="No burst of noise in the pressure",
    level=Level.BEAT,
    measure=bursts,
    unit="1",
    limits=Limits(fail_above=0.20, basis="the largest of noisy slopes lies about 1 SD above the largest: 20 % in one beat (computed)"),
    reason="a burst of noise shakes the pressure, by {value:.0%} of dP/dt maximum (limit {limit:.0%})",
    remedy="none for the beat; look for a loose connector or diathermy",
)
