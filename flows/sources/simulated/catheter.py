"""What sensors and a recorder make of a solved run: gains, offsets, drift in clock time, delay, noise, steps of the converter."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from flows.sources.simulated.activation import FloatArray
from flows.sources.simulated.circulation import Solution
from flows.sources.simulated.electrocardiogram import ecg_mv
from flows.sources.simulated.rhythm import STEP_S, Injection, seconds


@dataclass(frozen=True, slots=True)
class Catheter:
    """A pressure sensor, a volume sensor and the recorder behind them.

    The recorder shows ``pressure_gain * (P + zero error) + pressure_shift_mmhg``; the zero error is ``zero_error_mmhg`` at hour 0 of
    the acquisition and grows by ``drift_mmhg_per_hour``. Volume is shown as ``volume_gain * V + volume_shift_ml`` (alpha and alpha
    times Vc of a raw channel). Delays are how late a channel is. Noise is white, given by its SD; a step of 0 means no quantisation.
    """

    pressure_gain: float = 1.0
    pressure_shift_mmhg: float = 0.0
    zero_error_mmhg: float = 0.0
    drift_mmhg_per_hour: float = 0.0
    volume_gain: float = 1.0
    volume_shift_ml: float = 0.0
    pressure_delay_s: float = 0.0
    volume_delay_s: float = 0.0
    pressure_noise_mmhg: float = 0.0
    volume_noise_ml: float = 0.0
    ecg_noise_mv: float = 0.0
    pressure_step_mmhg: float = 0.0
    volume_step_ml: float = 0.0

    def zero_shown_mmhg(self, hour: float) -> float:
        """Return what the recorder shows at that hour for a pressure of 0."""
        return self.pressure_shown_mmhg(0.0, hour)

    def pressure_shown_mmhg(self, applied_mmhg: float, hour: float) -> float:
        """Return what the recorder shows at that hour for an applied pressure, noise apart."""
        error = self.zero_error_mmhg + self.drift_mmhg_per_hour * hour
        return self.pressure_gain * (applied_mmhg + error) + self.pressure_shift_mmhg


@dataclass(frozen=True, slots=True)
class Signals:
    """A run as a recorder wrote it, arrays of shape (n,): seconds, mmHg, mL, mV, mmHg."""

    time_s: FloatArray
    pressure_mmhg: FloatArray
    volume_ml: FloatArray
    ecg_mv: FloatArray
    aortic_pressure_mmhg: FloatArray


def record(solution: Solution, catheter: Catheter, rate_hz: float, rng: np.random.Generator, hour: float = 0.0) -> Signals:
    """Return the run as recorded at ``rate_hz``, beginning ``hour`` hours into the acquisition."""
    count = int(np.floor(solution.conditions.duration_s * rate_hz + 1e-9))
    time_s = np.arange(count, dtype=np.float64) / rate_hz
    grid_s = solution.time_s
    zero = catheter.zero_error_mmhg + catheter.drift_mmhg_per_hour * (hour + time_s / 3600.0)
    pressure = np.interp(time_s - catheter.pressure_delay_s, grid_s, solution.pressure_mmhg)
    pressure = catheter.pressure_gain * (pressure + zero) + catheter.pressure_shift_mmhg
    volume = np.interp(time_s - catheter.volume_delay_s, grid_s, solution.volume_ml)
    injection = solution.conditions.injection
    conducted = 1.0 if injection is None else 1.0 + np.interp(time_s - catheter.volume_delay_s, grid_s, washed(solution, injection))
    # What the wall and the tissue behind it conduct does not change with the blood: the shift stays as it is.
    volume = catheter.volume_gain * volume * conducted + catheter.volume_shift_ml
    beats = solution.schedule
    r_s = seconds(beats.onset - solution.first) - solution.heart.electromechanical_delay_s
    lead = ecg_mv(time_s, r_s, beats.rr_before_s, beats.premature, atrial=not solution.conditions.fibrillating, aberrant=beats.aberrant)
    return Signals(
        time_s=time_s,
        pressure_mmhg=_stepped(pressure + catheter.pressure_noise_mmhg * rng.standard_normal(count), catheter.pressure_step_mmhg),
        volume_ml=_stepped(volume + catheter.volume_noise_ml * rng.standard_normal(count), catheter.volume_step_ml),
        ecg_mv=lead + catheter.ecg_noise_mv * rng.standard_normal(count),
        aortic_pressure_mmhg=np.interp(time_s, grid_s, solution.aortic_pressure_mmhg),
    )


def washed(solution: Solution, injection: Injection) -> FloatArray:
    """Return by what fraction the blood in the ventricle conducts better on the solution's grid: it changes with what comes in alone."""
    incoming = injection.excess(solution.time_s)
    share = STEP_S * np.clip(solution.inflow_ml_per_s, 0.0, None) / solution.volume_ml
    within, excess = 0.0, []
    for came, part in zip(incoming.tolist(), share.tolist(), strict=True):
        within += part * (came - within)
        excess.append(within)
    return np.asarray(excess, dtype=np.float64)


def _stepped(values: FloatArray, step: float) -> FloatArray:
    """Return values on the steps of a converter."""
    return values if step == 0.0 else np.asarray(np.round(values / step) * step, dtype=np.float64)
