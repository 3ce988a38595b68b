"""Faults that add to a channel or bend it: mains, noise, bursts, the fluid-filled line, the ECG in the volume.

Each reaches every run of the heart. Severities are amplitudes as recorded; what is random depends on the recipe's seed alone.
"""

from __future__ import annotations

import math

import numpy as np
from scipy.signal import bilinear, lfilter

from flows.sources.simulated.acquisition import ECG, PRESSURE, VOLUME, Acquisition
from flows.sources.simulated.activation import FloatArray
from flows.sources.simulated.faults import Expected, Injected
from flows.sources.simulated.run_faults import OFTEN_S, Change, changed, heart_runs, injected, pieces, run_rng

BURST_S = 0.3


def hum(acquisition: Acquisition, amplitude: float, column: str, mains_hz: float, check: str) -> Injected:
    """Add the mains to a column, with a tenth of it at the third harmonic where the rate can hold that."""

    def change(run: str, values: FloatArray) -> FloatArray:
        rate_hz = acquisition.recipe.rate_hz
        phase = 2.0 * np.pi * mains_hz * np.arange(values.size) / rate_hz + run_rng(acquisition, run, 37).uniform(0.0, 2.0 * np.pi)
        third = 0.1 * np.sin(3.0 * phase) if 3.0 * mains_hz < 0.5 * rate_hz else 0.0
        return np.asarray(values + amplitude * (np.sin(phase) + third), dtype=np.float64)

    return injected(acquisition, column, change, check)


def pressure_hum_50(acquisition: Acquisition, mmhg: float) -> Injected:
    """Add ``mmhg`` of 50 Hz to the pressure."""
    return hum(acquisition, mmhg, PRESSURE, 50.0, "edp-hum")


def pressure_hum_60(acquisition: Acquisition, mmhg: float) -> Injected:
    """Add ``mmhg`` of 60 Hz to the pressure."""
    return hum(acquisition, mmhg, PRESSURE, 60.0, "dpdt-hum")


def volume_hum_50(acquisition: Acquisition, ml: float) -> Injected:
    """Add ``ml`` of 50 Hz to the volume."""
    return hum(acquisition, ml, VOLUME, 50.0, "volume-hum")


def ecg_hum_60(acquisition: Acquisition, mv: float) -> Injected:
    """Add ``mv`` of 60 Hz to the ECG: R waves are found all the same, or beats by their pressure."""
    return Injected(hum(acquisition, mv, ECG, 60.0, "").acquisition, ())


def pressure_noisy(acquisition: Acquisition, sd_mmhg: float) -> Injected:
    """Add white noise to the pressure."""
    return injected(acquisition, PRESSURE, _white(acquisition, sd_mmhg), "dpdt-noise")


def volume_noisy(acquisition: Acquisition, sd_ml: float) -> Injected:
    """Add white noise to the volume."""
    return injected(acquisition, VOLUME, _white(acquisition, sd_ml), "volume-noise")


def ecg_noisy(acquisition: Acquisition, sd_mv: float) -> Injected:
    """Add white noise to the ECG: R waves are found all the same, or beats by their pressure."""
    return Injected(changed(acquisition, ECG, _white(acquisition, sd_mv)), ())


def _white(acquisition: Acquisition, sd: float) -> Change:
    return lambda run, values: values + sd * run_rng(acquisition, run, 41).standard_normal(values.size)


def pressure_bursts(acquisition: Acquisition, sd_mmhg: float) -> Injected:
    """Add bursts of noise to the pressure, `BURST_S` long, one every few seconds; the beats they fall into are named."""

    def change(run: str, values: FloatArray) -> FloatArray:
        noise = sd_mmhg * run_rng(acquisition, run, 43).standard_normal(values.size)
        return values + noise * pieces(acquisition, run, BURST_S / OFTEN_S)

    broken = changed(acquisition, PRESSURE, change)
    touched = {run: _beats_within(acquisition, run, pieces(acquisition, run, BURST_S / OFTEN_S)) for run in heart_runs(acquisition)}
    return Injected(broken, tuple(Expected("noise-bursts", run, instants_s) for run, instants_s in touched.items()))


def _beats_within(acquisition: Acquisition, run: str, where: FloatArray) -> tuple[float, ...]:
    beats, at_s = acquisition.truth[run].beats, np.flatnonzero(where) / acquisition.recipe.rate_hz
    held = np.searchsorted(at_s, beats.end_s) > np.searchsorted(at_s, beats.start_s)
    return tuple(beats.middle_s[held].tolist())


def line_ringing(acquisition: Acquisition, natural_hz: float) -> Injected:
    """Lead the pressure through a fluid-filled line that rings at ``natural_hz`` (damping ratio 0.15), declared as a tip sensor."""
    return injected(acquisition, PRESSURE, _line(acquisition, natural_hz, 0.15), "ringing")


def line_overdamped(acquisition: Acquisition, damping: float) -> Injected:
    """Lead the pressure through a fluid-filled line of 20 Hz with that ``damping`` ratio, declared as a tip sensor."""
    return injected(acquisition, PRESSURE, _line(acquisition, 20.0, damping), "damping")


def _line(acquisition: Acquisition, natural_hz: float, damping: float) -> Change:
    return lambda _, values: led(values, acquisition.recipe.rate_hz, natural_hz, damping)


def led(pressure: FloatArray, rate_hz: float, natural_hz: float, damping: float) -> FloatArray:
    """Return a pressure as a fluid-filled line passes it on: a system of second order; common practice, no source.

    It was filled before the run began: an odd continuation backwards keeps it from starting at rest.
    """
    omega = 2.0 * rate_hz * math.tan(min(math.pi * natural_hz / rate_hz, 1.5))  # where the bilinear rule puts it back at natural_hz
    top, bottom = bilinear([omega**2], [1.0, 2.0 * damping * omega, omega**2], fs=rate_hz)
    before = 2.0 * pressure[0] - pressure[round(min(0.9, pressure.size / rate_hz / 2.0) * rate_hz) : 0 : -1]
    passed = lfilter(top, bottom, np.concatenate([before, pressure]) - before[0]) + before[0]
    return np.asarray(passed[before.size :], dtype=np.float64)


def ecg_leaking(acquisition: Acquisition, ml_per_mv: float) -> Injected:
    """Let the ECG leak into the volume."""
    return injected(acquisition, VOLUME, lambda run, values: values + ml_per_mv * acquisition.columns[run][ECG], "ecg-leak")
