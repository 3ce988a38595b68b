"""ECG leak: the electrogram does not show in the volume.

The heart's own electricity leaks into a conductance measurement while the ventricle depolarises: McGuirk 2009 (J Biomed Sci Eng 2:491,
read) found -12 % to +9 % of volume. Around the R wave true volume hardly moves, and never as sharply as the QRS. The mean over beats from
40 ms before to 40 ms after R is put together from a slow curve and the electrogram as the filter leaves it; what it has of the latter is
the leak, in mL for each mV. Held against stroke volume is what leaks at the height of the R wave. What a leaking T wave does to
end-systolic points shows in the line's intercept first.
"""

from __future__ import annotations

import math

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.run.noise import responses
from checks.spoils import ECG_LEAK, VOLUME_SHAPE
from checks.subject import RunSubject, once_a_run
from metrics.arrays import FloatArray, IntArray, median_of_known
from metrics.signals.filters import zero_phase

AVERAGED_S = 0.300
AROUND_R_S = 0.040
SLOW_DEGREE = 2
LEAST_BEATS = 5
MOST_BEATS = 30
OF_MEDIAN = 1.25
"""The standard error of a median over that of a mean, of normal values (from memory)."""

LEAST_LIKENESS = 0.8
"""Correlation of volume with the electrogram, the slow curve apart, below which there is no leak; house default."""

MOST_BY_CHANCE = 5.0
"""Of the slope's standard error: filtered noise keeps its neighbours, and the best of several lags is taken; house default."""

LAGS_S = np.arange(-0.020, 0.021, 0.004)
"""A declared delay has moved the volume against the electrogram by now, and a conditioner has delays of its own."""


def leak(volume_ml: FloatArray, lead_mv: FloatArray, half: int, lags: IntArray, noise_ml: float = 0.0) -> float:
    """Return how many mL of each mV leak from ``lead_mv`` into ``volume_ml``, 0 where they are not alike; R lies in the middle of both.

    ``noise_ml`` is the SD of the noise in ``volume_ml``: a leak that it could well make by chance counts as none.

    >>> time_s = np.arange(-75, 76) / 250.0
    >>> lead = np.exp(-(time_s / 0.010) ** 2)
    >>> round(leak(100.0 - 50.0 * time_s + 3.0 * np.roll(lead, 2), lead, 10, np.array([0, 2])), 1)
    3.0
    """
    middle = np.arange(lead_mv.size // 2 - half, lead_mv.size // 2 + half + 1)
    shapes = np.polynomial.legendre.legvander(np.linspace(-1.0, 1.0, middle.size), SLOW_DEGREE)
    quick = np.eye(middle.size) - shapes @ np.linalg.pinv(shapes)
    sharp_mv, sharp_ml = quick @ lead_mv[middle], quick @ volume_ml[middle[:, None] + lags]
    both = sharp_mv @ sharp_ml
    sizes = np.linalg.norm(sharp_mv) * np.linalg.norm(sharp_ml, axis=0)
    likeness = np.abs(both) / np.where(sizes > 0.0, sizes, np.inf)
    best = int(np.argmax(likeness))
    found, by_chance = float(both[best] / (sharp_mv @ sharp_mv)), noise_ml / max(float(np.linalg.norm(sharp_mv)), 1e-12)
    return found if likeness[best] >= LEAST_LIKENESS and abs(found) > MOST_BY_CHANCE * by_chance else 0.0


@once_a_run
def leak_share(subject: RunSubject) -> Measured:
    """Return what leaks into volume at the height of the R wave over stroke volume, shape (); NaN without five R waves.

    0 where volume does not resemble the electrogram.
    """
    signals, beats = subject.known_signals(), subject.known_beats()
    rate_hz, ecg_mv = signals.sampling_rate_hz, signals.ecg_mv
    wide, half = round(AVERAGED_S * rate_hz), round(AROUND_R_S * rate_hz)
    r_at = beats.r_at[(beats.r_at >= wide) & (beats.r_at < signals.volume_ml.size - wide)]
    if ecg_mv is None or r_at.size < LEAST_BEATS or half < SLOW_DEGREE + 2:
        return single(np.nan)
    r_at = r_at[:: -(-r_at.size // MOST_BEATS)]
    places = r_at[:, None] + np.arange(-wide, wide + 1)
    volume_ml, lead_mv = np.median(signals.volume_ml[places], axis=0), zero_phase(np.median(ecg_mv[places], axis=0), rate_hz)
    noise_ml = OF_MEDIAN * signals.volume_noise_ml * responses(rate_hz, subject.facts.chamber)[0] / math.sqrt(r_at.size)
    ml_per_mv = leak(volume_ml, lead_mv, half, np.unique(np.rint(LAGS_S * rate_hz)).astype(np.int64), noise_ml)
    height_mv = float(np.max(np.abs(lead_mv - np.median(lead_mv))))
    stroke_ml = abs(median_of_known(beats.sv_ml))
    return single(abs(ml_per_mv) * height_mv / stroke_ml, float(r_at[0]) / rate_hz)


CHECK = Check(
    name="ecg-leak",
    title="The electrogram stays out of the volume",
    level=Level.RUN,
    measure=leak_share,
    unit="1",
    limits=Limits(suspect_above=0.04, fail_above=0.10, basis="a T wave is a third of the R wave: 3 % of stroke volume moves the intercept"),
    reason="the electrogram leaks into volume by {value:.0%} of stroke volume at the R wave (limit {limit:.0%})",
    remedy="raise the excitation frequency or filter the conductance signal at its source",
    spoils=ECG_LEAK,
)
LARGE = Check(
    name="ecg-leak-large",
    title="The electrogram does not drown the volume",
    level=Level.RUN,
    measure=leak_share,
    unit="1",
    limits=Limits(suspect_above=0.25, fail_above=0.40, basis="a T wave is a third of the R wave: 13 % of stroke volume moves end-systole"),
    reason="the electrogram leaks into volume by {value:.0%} of stroke volume at the R wave (limit {limit:.0%})",
    remedy="raise the excitation frequency or filter the conductance signal at its source",
    spoils=VOLUME_SHAPE,
)
