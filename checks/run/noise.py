"""Noise: what is left of it after the common filter, against what is read from the channel.

The largest of noisy values lies above the largest value, the smallest below the smallest: noise raises dP/dt maximum and peak pressure,
lowers end-systolic volume, and flattens slopes through end-systolic points. By how much depends on what passes the filter. That is
worked out from what the filter took away, as if the noise were white; coloured noise is underestimated. A channel too slow to be filtered
shows no noise and is not evaluated. Hum is taken out first: it has checks of its own.
"""

from __future__ import annotations

import functools

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import END_DIASTOLE, INTERCEPTS, PRESSURE_EXTREMES, STEEPEST, VOLUME_END_SYSTOLE, WORK_SLOPES
from checks.subject import RunSubject, once_a_run
from metrics.signals.filters import slope_per_s, steadied, zero_phase
from metrics.signals.mains import Mains

SINE = 1.1
"""The robust SD of a sine of amplitude 1 is 1.05 (computed), a little more with its third harmonic."""

LEAST_LEFT = 0.3
"""The difference of two nearly equal squares is no noise: less than this share of it counts as none; house default."""


@functools.lru_cache(maxsize=16)
def responses(sampling_rate_hz: float, chamber: str) -> tuple[float, float, float]:
    """Return the SD that the filtered channel, its landmarks and its slope have for each unit of SD that the filter takes away.

    NaN where the filter takes nothing away.
    """
    impulse = np.zeros(2 * round(sampling_rate_hz) + 1)
    impulse[impulse.size // 2] = 1.0
    smooth = zero_phase(impulse, sampling_rate_hz)
    taken_away = float(np.linalg.norm(impulse - smooth))
    if taken_away == 0.0:
        return float("nan"), float("nan"), float("nan")
    left = (smooth, steadied(smooth, sampling_rate_hz), slope_per_s(smooth, sampling_rate_hz, chamber))
    at_all, at_landmarks, in_slope = (float(np.linalg.norm(one)) / taken_away for one in left)
    return at_all, at_landmarks, in_slope


def without_hum(taken_away: float, found: Mains, reach: float) -> float:
    """Return the SD that the filter took away less what hum had of it, 0 where that is nearly all; ``reach`` is the calibrated span."""
    square = taken_away**2 - sum((SINE * reach * share * (1.0 - through)) ** 2 for share, through in found.recorded)
    return float(np.sqrt(square)) if square > LEAST_LEFT * taken_away**2 else 0.0


@once_a_run
def pressure_noise(subject: RunSubject) -> tuple[float, float]:
    """Return the SD of the noise in filtered pressure over what pressure moves by, and in dP/dt over its median maximum."""
    signals, beats = subject.known_signals(), subject.known_beats()
    reach_mmhg = signals.pressure_reach_mmhg
    taken_mmhg = without_hum(signals.pressure_noise_mmhg, subject.mains("pressure"), reach_mmhg)
    left, _, steep = responses(signals.sampling_rate_hz, subject.facts.chamber)
    most = beats.dpdt_max_mmhg_per_s[np.isfinite(beats.dpdt_max_mmhg_per_s)]
    return taken_mmhg * left / reach_mmhg, taken_mmhg * steep / abs(float(np.median(most))) if most.size else float("nan")


def noise_of_pressure(subject: RunSubject) -> Measured:
    """Return the SD of noise in the filtered pressure over what pressure moves by, shape ()."""
    return single(pressure_noise(subject)[0])


def noise_of_slope(subject: RunSubject) -> Measured:
    """Return the SD of noise in dP/dt over its median maximum, shape ()."""
    return single(pressure_noise(subject)[1])


def noise_of_volume(subject: RunSubject) -> Measured:
    """Return the SD of noise in a volume read at a landmark over what volume moves by, shape ()."""
    signals = subject.known_signals()
    reach_ml = signals.volume_reach_ml
    taken_ml = without_hum(signals.volume_noise_ml, subject.mains("volume"), reach_ml)
    return single(taken_ml * responses(signals.sampling_rate_hz, subject.facts.chamber)[1] / reach_ml)


PRESSURE = Check(
    name="pressure-noise",
    title="Pressure is quiet",
    level=Level.RUN,
    measure=noise_of_pressure,
    unit="1",
    limits=Limits(
        suspect_above=0.018, fail_above=0.025, basis="an extreme of noisy values lies about 2 SD out: 5 % of the pulse; house default"
    ),
    reason="noise has an SD of {value:.1%} of the pulse in the filtered pressure (limit {limit:.0%})",
    remedy="look for a loose connector, air in a line, or an amplifier's gain set too low",
    spoils=PRESSURE_EXTREMES | WORK_SLOPES,
)
SLOPE = Check(
    name="dpdt-noise",
    title="Slope of pressure is quiet",
    level=Level.RUN,
    measure=noise_of_slope,
    unit="1",
    limits=Limits(suspect_above=0.045, fail_above=0.06, basis="the largest of noisy slopes lies about 1 SD above the largest (computed)"),
    limits_rv=Limits(
        suspect_above=0.10,
        fail_above=0.12,
        basis="read at an instant a longer window chooses, so that half as much noise counts (computed)",
    ),
    reason="noise has an SD of {value:.1%} of the largest dP/dt (limit {limit:.0%})",
    remedy="look for a loose connector, or record with a finer converter",
    spoils=STEEPEST | END_DIASTOLE,
)
VOLUME = Check(
    name="volume-noise",
    title="Volume is quiet",
    level=Level.RUN,
    measure=noise_of_volume,
    unit="1",
    limits=Limits(
        suspect_above=0.02,
        fail_above=0.028,
        basis="the smallest of noisy volumes lies 1.5 to 2 SD below: 5 % of the stroke; end-diastole is no extreme (computed)",
    ),
    reason="noise has an SD of {value:.1%} of what volume moves by (limit {limit:.1%})",
    remedy="look for a loose electrode contact or an excitation current set too low",
    spoils=VOLUME_END_SYSTOLE,
)
INTERCEPT = Check(
    name="volume-noise-intercept",
    title="Volume is quiet enough to extrapolate",
    level=Level.RUN,
    measure=noise_of_volume,
    unit="1",
    limits=Limits(
        suspect_above=0.015,
        fail_above=0.018,
        basis="noise flattens lines through volumes: 1.8 % moves the intercept by 3 mL (computed)",
    ),
    reason="noise has an SD of {value:.1%} of what volume moves by, too much for a line's intercept (limit {limit:.1%})",
    remedy="look for a loose electrode contact or an excitation current set too low",
    spoils=INTERCEPTS,
)
