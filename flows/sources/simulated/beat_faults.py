"""Faults of single beats: three in every run of the heart, at known places, unless a fault says other.

The beats are named by an instant in their middle, in seconds of the recording.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from flows.sources.simulated.acquisition import PRESSURE, VOLUME, Acquisition, made
from flows.sources.simulated.activation import FloatArray
from flows.sources.simulated.faults import Expected, Injected, with_columns
from flows.sources.simulated.run_faults import heart_runs

PLACES = (0.3, 0.55, 0.8)
WHIP_HZ, WHIP_FADES_S = 18.0, 0.08
ABERRANT_AT_S = (5.0, 10.0, 15.0)

Change = Callable[[FloatArray, FloatArray, float, float], FloatArray]
"""Samples of a beat, their seconds since its begin, when its systole ends and how long it lasts -> samples."""


def _in_beats(acquisition: Acquisition, columns: tuple[str, ...], change: Change, check: str) -> Injected:
    expected = []
    for run in heart_runs(acquisition):
        beats, rate_hz = acquisition.truth[run].beats, acquisition.recipe.rate_hz
        chosen = sorted({round(place * (len(beats) - 1)) for place in PLACES})
        for column in columns:
            values = acquisition.columns[run][column].copy()
            for beat in chosen:
                low, high = (int(np.ceil(at_s * rate_hz)) for at_s in (beats.start_s[beat], beats.end_s[beat]))
                since_s = np.arange(low, min(high, values.size)) / rate_hz - beats.start_s[beat]
                ends_s = float(beats.end_systole_s[beat] - beats.start_s[beat])
                lasts_s = float(beats.end_s[beat] - beats.start_s[beat])
                values[low:high] = change(values[low:high], since_s, ends_s, lasts_s)
            acquisition = with_columns(acquisition, run, {column: values})
        expected.append(Expected(check, run, tuple(beats.middle_s[chosen].tolist())))
    return Injected(acquisition, tuple(expected))


def whip(acquisition: Acquisition, mmhg: float) -> Injected:
    """Let the catheter whip as the ventricle begins to eject: a swing of ``mmhg`` that dies away."""

    def change(values: FloatArray, since_s: FloatArray, ends_s: float, lasts_s: float) -> FloatArray:
        del lasts_s
        after = np.clip(since_s - 0.35 * ends_s, 0.0, None)
        return np.asarray(values + mmhg * np.exp(-after / WHIP_FADES_S) * np.sin(2.0 * np.pi * WHIP_HZ * after), dtype=np.float64)

    return _in_beats(acquisition, (PRESSURE,), change, "whip")


def entrapment(acquisition: Acquisition, mmhg: float) -> Injected:
    """Let the wall close upon the sensor late in systole: a broad hump of ``mmhg`` while the volume is smallest."""
    return _in_beats(acquisition, (PRESSURE,), _hump(mmhg, 0.07), "entrapment")


def late_spike(acquisition: Acquisition, mmhg: float) -> Injected:
    """Let something strike the sensor late in systole: a spike of ``mmhg``, some hundredths of a second wide."""
    return _in_beats(acquisition, (PRESSURE,), _hump(mmhg, 0.015), "late-spike")


def _hump(mmhg: float, half_width_s: float) -> Change:
    def change(values: FloatArray, since_s: FloatArray, ends_s: float, lasts_s: float) -> FloatArray:
        del lasts_s
        away = np.clip(np.abs(since_s - ends_s) / half_width_s, 0.0, 1.0)
        return np.asarray(values + mmhg * 0.5 * (1.0 + np.cos(np.pi * away)), dtype=np.float64)

    return change


def volume_jump(acquisition: Acquisition, ml: float) -> Injected:
    """Let the volume jump by ``ml`` in mid-ejection, back where the beat ends."""

    def change(values: FloatArray, since_s: FloatArray, ends_s: float, lasts_s: float) -> FloatArray:
        del lasts_s
        return np.where(since_s > 0.6 * ends_s, values + ml, values)

    return _in_beats(acquisition, (VOLUME,), change, "volume-jump")


def beat_dropped_out(acquisition: Acquisition, share: float) -> Injected:
    """Lose a ``share`` of each beat's samples of pressure and volume, from a quarter of it on."""

    def change(values: FloatArray, since_s: FloatArray, ends_s: float, lasts_s: float) -> FloatArray:
        del ends_s
        within = since_s / lasts_s - 0.25
        return np.where((within >= 0.0) & (within < share), np.nan, values)

    return _in_beats(acquisition, (PRESSURE, VOLUME), change, "missing-samples")


def beat_clipped(acquisition: Acquisition, share: float) -> Injected:
    """Cut the top ``share`` of each beat's pressure off."""

    def change(values: FloatArray, since_s: FloatArray, ends_s: float, lasts_s: float) -> FloatArray:
        del since_s, ends_s, lasts_s
        low, high = float(values.min()), float(values.max())
        return np.minimum(values, high - share * (high - low))

    return _in_beats(acquisition, (PRESSURE,), change, "clipped-beat")


def aberrant_beats(acquisition: Acquisition, loss: float) -> Injected:
    """Let three beats of the first steady run be conducted another way, on time, and lose ``loss`` (a fraction) of force. Made anew."""
    run = acquisition.run_of_kind("steady")
    plans = tuple(
        replace(plan, conditions=replace(plan.conditions, aberrant_s=ABERRANT_AT_S, aberrant_force=1.0 - loss)) if plan.run == run else plan
        for plan in acquisition.recipe.runs
    )
    broken = made(replace(acquisition.recipe, runs=plans))
    beats = broken.truth[run].beats
    return Injected(broken, (Expected("aberrant-beat", run, tuple(beats.middle_s[np.asarray(beats.aberrant)].tolist())),))
