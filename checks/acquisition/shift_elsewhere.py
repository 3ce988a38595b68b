"""Shift elsewhere: a sensor that jumps or drifts in one run is not trusted in an occlusion that would not show it.

An occlusion moves pressure and volume by much and lasts a dozen beats, so it shows a shift of its sensors far worse than a run at rest;
and a slope suffers from it more than any median. What one run shows of a sensor therefore counts for the occlusions of the same
acquisition too: a step of that size, or a drift at that rate through the window, unless their own beats would have told it.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Measured, single
from checks.run.sensor_step import LIMITS
from checks.spoils import PRELOAD_SLOPES, PRESSURE_MOVED, VOLUME_MOVED
from checks.stakes import pressure_at_stake_mmhg, volume_at_stake_ml
from checks.subject import AcquisitionSubject, RunSubject


def hidden_shift(step: float, rate_per_s: float, span_s: float, window_s: float, step_open: float, drift_open: float) -> float:
    """Return the largest shift in a window that a run would not have told, of a sensor that shifts so in another run.

    ``span_s`` is how long the run was looked at; it tells steps above ``step_open`` and drifts above ``drift_open``.

    >>> hidden_shift(2.0, 0.1, 15.0, 9.0, 3.0, 1.0), hidden_shift(2.0, 0.1, 15.0, 9.0, 1.0, 1.0)
    (2.0, 0.0)
    """
    hidden_step = abs(step) if abs(step) < step_open else 0.0
    hidden_drift = abs(rate_per_s) * window_s if abs(rate_per_s) * span_s < drift_open else 0.0
    return max(hidden_step, hidden_drift)


def pressure_elsewhere(subject: AcquisitionSubject) -> Measured:
    """Return the largest shift of pressure that an occlusion may hide, over its range of peak pressure; NaN without two runs."""
    return _worst(subject, is_pressure=True)


def volume_elsewhere(subject: AcquisitionSubject) -> Measured:
    """Return the largest shift of volume that an occlusion may hide, over its range of end-systolic volume; NaN without two runs."""
    return _worst(subject, is_pressure=False)


def _worst(subject: AcquisitionSubject, *, is_pressure: bool) -> Measured:
    runs = [run for run in subject.runs if run.beats is not None and run.signals is not None]
    ramps = [run for run in runs if run.window is not None and "Ees" not in subject.spoiled.get(run.facts.run, frozenset())]
    found = [_hidden_share(ramp, run, is_pressure=is_pressure) for ramp in ramps for run in runs if run is not ramp]
    known = [share for share in found if np.isfinite(share)]
    return single(max(known) if known else np.nan)


def _hidden_share(ramp: RunSubject, other: RunSubject, *, is_pressure: bool) -> float:
    """Return what share of a ramp's range the other run's shift comes to, 0 where the ramp would have told it."""
    own, seen, window = ramp.course, other.course, ramp.window
    if window is None or np.isnan(own.first_s + seen.first_s):
        return float("nan")
    start_s = ramp.start_s()
    window_s = float(start_s[window.last_at] - start_s[window.onset_at])
    seen_s = seen.last_s - seen.first_s
    if is_pressure:
        step, drift, stake = seen.pressure_step_mmhg, seen.pressure_drift_mmhg, pressure_at_stake_mmhg(ramp)
        step_open, drift_open = own.pressure_step_open_mmhg, own.pressure_drift_open_mmhg
    else:
        step, drift, stake = seen.volume_step_ml, seen.volume_drift_ml, volume_at_stake_ml(ramp)
        step_open, drift_open = own.volume_step_open_ml, own.volume_drift_open_ml
    return (
        hidden_shift(np.nan_to_num(step), np.nan_to_num(drift) / seen_s, own.last_s - own.first_s, window_s, step_open, drift_open) / stake
    )


PRESSURE = Check(
    name="pressure-shift-elsewhere",
    title="No run shows a shift of pressure that an occlusion would hide",
    level=Level.ACQUISITION,
    measure=pressure_elsewhere,
    unit="1",
    limits=LIMITS,
    reason="pressure jumps or drifts in one run; an occlusion may hide such a shift, {value:.0%} of its range (limit {limit:.0%})",
    remedy="let the transducer settle and repeat the occlusions, with a zero right before and after each",
    spoils=PRESSURE_MOVED & PRELOAD_SLOPES,
)
VOLUME = Check(
    name="volume-shift-elsewhere",
    title="No run shows a shift of volume that an occlusion would hide",
    level=Level.ACQUISITION,
    measure=volume_elsewhere,
    unit="1",
    limits=LIMITS,
    reason="volume jumps or drifts in one run; an occlusion may hide such a shift, {value:.0%} of its range (limit {limit:.0%})",
    remedy="let the volume signal settle and repeat the occlusions, with ten seconds at rest before each",
    spoils=VOLUME_MOVED & PRELOAD_SLOPES,
)
