"""From recorded channels to one calibrated, filtered time base.

The order: two-point line, zero drift, declared delay, conductance or raw volume to mL, then the common
filter. Baan 1984, Circulation 70:812 (read in abstract) for conductance; the two-point line and the linear zero
drift are common practice, no source.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from metrics.arrays import BoolArray, FloatArray, IntArray, robust_sd, span
from metrics.signals.facts import PressureCalibration, RunFacts, VolumeCalibration
from metrics.signals.filters import slope_per_s, steadied, zero_phase
from metrics.signals.recording import Channel, Recording

MAXIMUM_STRETCH = 20.0
"""A time base that claims more than this many times the samples it holds is broken, not gappy; house default."""


@dataclass(frozen=True)
class Signals:
    """One run on a uniform time base; every array has shape (n,).

    Pressure and volume are calibrated and filtered; ``missing`` marks grid samples the file holds no value for (they were bridged by a
    straight line). ``recorded_at`` gives, per channel name, the grid index of each recorded sample. The noises are the robust standard
    deviations of what the filter took away.
    """

    sampling_rate_hz: float
    pressure_mmhg: FloatArray
    volume_ml: FloatArray
    dpdt_mmhg_per_s: FloatArray
    missing: BoolArray
    pressure_noise_mmhg: float
    volume_noise_ml: float
    recorded_at: dict[str, IntArray]
    ecg_mv: FloatArray | None = None

    @property
    def time_s(self) -> FloatArray:
        """Return seconds from the run's first sample, shape (n,)."""
        return np.arange(self.pressure_mmhg.size) / self.sampling_rate_hz

    @cached_property
    def pressure_reach_mmhg(self) -> float:
        """Return what pressure moves by (`metrics.arrays.span`)."""
        return span(self.pressure_mmhg)

    @cached_property
    def volume_reach_ml(self) -> float:
        """Return what volume moves by (`metrics.arrays.span`)."""
        return span(self.volume_ml)

    @cached_property
    def steadied_pressure_mmhg(self) -> FloatArray:
        """Return the pressure that landmarks are read from, shape (n,)."""
        return steadied(self.pressure_mmhg, self.sampling_rate_hz)

    @cached_property
    def steadied_volume_ml(self) -> FloatArray:
        """Return the volume that landmarks are read from, shape (n,)."""
        return steadied(self.volume_ml, self.sampling_rate_hz)


def two_point_line(points: tuple[tuple[float, float], ...]) -> tuple[float, float]:
    """Return (k, b) of read = k * applied + b by least squares; (1, 0) with fewer than two distinct applied pressures.

    Raises ValueError when the readings do not answer to the pressure at all: such a line cannot be turned round.

    >>> two_point_line(((0.0, 0.1), (100.0, 1.1)))
    (0.01, 0.1)
    """
    applied = np.array([p[0] for p in points], dtype=np.float64)
    read = np.array([p[1] for p in points], dtype=np.float64)
    if np.unique(applied).size < 2:
        return 1.0, 0.0
    centred = applied - applied.mean()
    k = round(float(np.sum(centred * (read - read.mean())) / np.sum(centred**2)), 12)
    if k == 0.0:
        message = "the pressure sensor reads the same at every applied pressure"
        raise ValueError(message)
    return k, round(float(read.mean() - k * applied.mean()), 12)


def zero_error_mmhg(time_s: FloatArray, calibration: PressureCalibration) -> FloatArray:
    """Return the error of zero at each time, shape of ``time_s``: readings pass the two-point line, then straight lines between them.

    Interpolation is broken at each re-zero; outside the readings the nearest one holds. One reading is a constant; readings without a
    clock give their mean. Without readings the error is taken as 0 (a check says that it is unknown).

    >>> from metrics.signals.facts import ZeroReading
    >>> drift = PressureCalibration(zeros=(ZeroReading(0.5, 0.0), ZeroReading(3.5, 3600.0)))
    >>> zero_error_mmhg(np.array([1200.0]), drift).tolist()
    [1.5]
    """
    k, b = two_point_line(calibration.points)
    if not calibration.zeros:
        return np.zeros_like(time_s)
    error = np.array([(zero.mmhg - b) / k for zero in calibration.zeros])
    if any(zero.at_s is None for zero in calibration.zeros):
        return np.full_like(time_s, float(error.mean()))
    at_s = np.array([zero.at_s for zero in calibration.zeros], dtype=np.float64)
    order = np.argsort(at_s, kind="stable")
    at_s, error = at_s[order], error[order]
    breaks = np.array(sorted(calibration.re_zeros_s), dtype=np.float64)
    piece_of_reading = np.searchsorted(breaks, at_s, side="right")
    piece_of_time = np.searchsorted(breaks, time_s, side="right")
    found = np.zeros_like(time_s)
    for piece in np.unique(piece_of_time):
        readings = piece_of_reading == piece
        if readings.any():
            here = piece_of_time == piece
            found[here] = np.interp(time_s[here], at_s[readings], error[readings])
    return found


def calibrated_pressure_mmhg(recorded: FloatArray, time_s: FloatArray, calibration: PressureCalibration) -> FloatArray:
    """Return (recorded - b) / k minus the zero error, shape of ``recorded``, in mmHg."""
    k, b = two_point_line(calibration.points)
    return (recorded - b) / k - zero_error_mmhg(time_s, calibration)


def calibrated_volume_ml(recorded: FloatArray, unit: str, calibration: VolumeCalibration) -> FloatArray:
    """Return volume in mL, shape of ``recorded``.

    A calibrated channel is taken as it is. Raw volume gives (raw - alpha_vc_ml) / alpha; a conductance channel (mS) first becomes raw
    volume by Baan's rho * L^2 * G. An unknown gain or parallel volume is taken as 1 and 0 (checks say so and withhold what it reaches).

    Raises ValueError for a conductance channel without electrode spacing and blood resistivity.
    """
    raw = recorded
    if unit == "mS":
        if calibration.electrode_spacing_cm is None or calibration.blood_resistivity_ohm_cm is None:
            message = "conductance needs electrode_spacing_cm and blood_resistivity_ohm_cm of the volume sensor"
            raise ValueError(message)
        raw = calibration.blood_resistivity_ohm_cm * calibration.electrode_spacing_cm**2 * recorded * 1e-3
    elif calibration.calibrated:
        return recorded.copy()
    alpha = 1.0 if calibration.alpha is None else calibration.alpha
    parallel_ml = 0.0 if calibration.alpha_vc_ml is None else calibration.alpha_vc_ml
    return (raw - parallel_ml) / alpha


def calibrated(recording: Recording, facts: RunFacts) -> Signals:
    """Return the run's signals on the time base of its pressure channel.

    Raises ValueError when time runs backwards or is broken, when a channel holds no value, or when conductance lacks its constants.
    """
    pressure = recording.channels["pressure"]
    sampling_rate_hz = observed_rate_hz(pressure)
    count = _grid_length(pressure, sampling_rate_hz)
    time_s = np.arange(count) / sampling_rate_hz
    on_grid, missing, recorded_at = {}, np.zeros(count, dtype=bool), {}
    for name, channel in recording.channels.items():
        values, lost, positions = _placed(channel, time_s, sampling_rate_hz)
        on_grid[name], recorded_at[name] = values, positions
        if name in {"pressure", "volume"} or name.startswith("segment-"):
            missing |= lost
    recorded_volume, volume_unit = _total_volume(on_grid, recording, facts.segments_used)
    pressure_mmhg = calibrated_pressure_mmhg(on_grid["pressure"], time_s, facts.pressure)
    volume_ml = calibrated_volume_ml(recorded_volume, volume_unit, facts.volume)
    smooth_pressure, smooth_volume = zero_phase(pressure_mmhg, sampling_rate_hz), zero_phase(volume_ml, sampling_rate_hz)
    return Signals(
        sampling_rate_hz=sampling_rate_hz,
        pressure_mmhg=smooth_pressure,
        volume_ml=smooth_volume,
        dpdt_mmhg_per_s=slope_per_s(smooth_pressure, sampling_rate_hz, facts.chamber),
        missing=missing,
        pressure_noise_mmhg=robust_sd((pressure_mmhg - smooth_pressure)[~missing]),
        volume_noise_ml=robust_sd((volume_ml - smooth_volume)[~missing]),
        recorded_at=recorded_at,
        ecg_mv=on_grid.get("ecg"),
    )


def observed_rate_hz(channel: Channel) -> float:
    """Return the sampling rate the time stamps show (one over their median step), or the declared one without time stamps."""
    if channel.time_s is None or channel.time_s.size < 2:
        return channel.sampling_rate_hz
    steps = np.diff(channel.time_s)
    forward = steps[steps > 0.0]
    if forward.size == 0:
        return channel.sampling_rate_hz
    typical = float(np.median(forward))
    # stamps rounded to a few decimals: the mean of the ordinary steps is finer than any single one
    ordinary = forward[np.abs(forward - typical) <= 0.5 * typical]
    return 1.0 / float(ordinary.mean())


def _grid_length(channel: Channel, sampling_rate_hz: float) -> int:
    if channel.time_s is None:
        return channel.samples.size
    if np.any(np.diff(channel.time_s) < 0.0):
        message = "time stamps run backwards"
        raise ValueError(message)
    length = round(float(channel.time_s[-1]) * sampling_rate_hz) + 1
    if length > MAXIMUM_STRETCH * channel.samples.size:
        message = f"the time stamps span {channel.time_s[-1]:.6g} s but hold only {channel.samples.size} samples"
        raise ValueError(message)
    return length


def _placed(channel: Channel, time_s: FloatArray, sampling_rate_hz: float) -> tuple[FloatArray, BoolArray, IntArray]:
    """Return the channel on the grid, which grid samples it has no value for, and the grid index of each recorded sample."""
    stamps = np.arange(channel.samples.size) / channel.sampling_rate_hz if channel.time_s is None else channel.time_s
    stamps = stamps - channel.delay_s
    positions = np.clip(np.rint(stamps * sampling_rate_hz), 0, time_s.size - 1).astype(np.int64)
    there = np.isfinite(channel.samples)
    if not there.any():
        message = "a channel holds no value"
        raise ValueError(message)
    known_s, first = np.unique(stamps[there], return_index=True)
    values = np.interp(time_s, known_s, channel.samples[there][first])
    # a grid sample is missing when no recorded value lies within one recorded step (not one grid step) of it
    step_s = max(1.0 / channel.sampling_rate_hz, 1.0 / sampling_rate_hz)
    after = np.clip(np.searchsorted(known_s, time_s), 0, known_s.size - 1)
    before = np.maximum(after - 1, 0)
    away_s = np.minimum(np.abs(known_s[after] - time_s), np.abs(time_s - known_s[before]))
    return values, away_s > 0.75 * step_s, positions


def _total_volume(on_grid: dict[str, FloatArray], recording: Recording, segments_used: tuple[int, ...]) -> tuple[FloatArray, str]:
    """Return the volume channel, or the sum of the segments in use where there is none, with its unit."""
    if "volume" in on_grid:
        return on_grid["volume"], recording.channels["volume"].unit
    names = [f"segment-{number}" for number in segments_used] or sorted(name for name in on_grid if name.startswith("segment-"))
    if not names or not set(names) <= set(on_grid):
        message = "neither a volume channel nor the segments it is the sum of"
        raise ValueError(message)
    total: FloatArray = np.sum([on_grid[name] for name in names], axis=0)
    return total, recording.channels[names[0]].unit
