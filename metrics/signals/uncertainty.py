"""How uncertain the calibration of a run is, from what its manifest declares.

Calibration errors are common to all beats of a run and do not shrink with their number, so they are kept apart from the fit's own
uncertainty and joined last. First order, derived; the terms follow from the calibration's own equations.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np

from metrics.signals.calibrate import two_point_line
from metrics.signals.facts import PressureCalibration, VolumeCalibration

FEWEST_RESIDUALS = 3


@dataclass(frozen=True, slots=True)
class CalibrationUncertainty:
    """Standard uncertainties of the calibration; None where the manifest gives nothing to tell one by.

    Gains are relative (0.03 is 3 %); ``pressure_mmhg`` and ``volume_ml`` are those of what is added to every sample.
    """

    pressure_gain: float | None = None
    pressure_mmhg: float | None = None
    volume_gain: float | None = None
    volume_ml: float | None = None

    def joined(self, other: CalibrationUncertainty) -> CalibrationUncertainty:
        """Return the larger of each: runs of one stage share sensors, so their errors do not average out.

        Where runs have calibrations of their own they may in part; the larger is then what no mean of theirs exceeds.
        """
        return CalibrationUncertainty(
            _larger(self.pressure_gain, other.pressure_gain),
            _larger(self.pressure_mmhg, other.pressure_mmhg),
            _larger(self.volume_gain, other.volume_gain),
            _larger(self.volume_ml, other.volume_ml),
        )


@lru_cache(maxsize=64)
def calibration_uncertainty(pressure: PressureCalibration, volume: VolumeCalibration) -> CalibrationUncertainty:
    """Return how uncertain a run's calibration is.

    The zero has the declared SD of a zero reading, and where readings have no clock, so that their mean stands for all, half their
    difference beside it. The gain has the SD of a reading over the spread of the applied pressures, or without one what three points or
    more leave over their line. Both went through that line. The volume has the declared SD of alpha and of the parallel volume, as alpha
    divides both.

    >>> facts = VolumeCalibration(calibrated=False, alpha=0.8, alpha_sd=0.04, alpha_vc_ml=40.0, alpha_vc_sd_ml=2.0)
    >>> calibration_uncertainty(PressureCalibration(((0.0, 0.0), (100.0, 80.0)), zero_sd_mmhg=0.4), facts)
    CalibrationUncertainty(pressure_gain=0.007071, pressure_mmhg=0.5, volume_gain=0.05, volume_ml=2.5)
    """
    alpha = volume.alpha or 1.0
    return CalibrationUncertainty(
        pressure_gain=_gain(pressure),
        pressure_mmhg=_zero_mmhg(pressure),
        volume_gain=None if volume.alpha_sd is None else round(volume.alpha_sd / alpha, 6),
        volume_ml=None if volume.alpha_vc_sd_ml is None else round(volume.alpha_vc_sd_ml / alpha, 6),
    )


def _zero_mmhg(pressure: PressureCalibration) -> float | None:
    """Return the standard uncertainty of the zero, None where neither an SD nor two readings without a clock tell of it."""
    slope = _slope(pressure)
    terms = [] if pressure.zero_sd_mmhg is None else [pressure.zero_sd_mmhg]
    if len(pressure.zeros) > 1 and any(zero.at_s is None for zero in pressure.zeros):
        terms.append(float(np.ptp([zero.mmhg for zero in pressure.zeros])) / 2.0)
    return round(float(np.hypot.reduce(terms)) / slope, 6) if terms and slope > 0.0 else None


def _gain(pressure: PressureCalibration) -> float | None:
    points = np.array(pressure.points, dtype=np.float64).reshape(-1, 2)
    spread, slope = (float(np.sum((points[:, 0] - points[:, 0].mean()) ** 2)) if points.size else 0.0), _slope(pressure)
    if spread == 0.0 or slope == 0.0:
        return None
    reading_sd = pressure.zero_sd_mmhg
    if reading_sd is None:
        if len(points) < FEWEST_RESIDUALS:
            return None
        left = points[:, 1] - np.polyval(np.polyfit(points[:, 0], points[:, 1], 1), points[:, 0])
        reading_sd = float(np.sqrt(np.sum(left**2) / (len(points) - 2)))
    return round(reading_sd / float(np.sqrt(spread)) / slope, 6)


def _slope(pressure: PressureCalibration) -> float:
    """Return the size of the two-point line's slope, 0 where the sensor does not answer."""
    try:
        return abs(two_point_line(pressure.points)[0])
    except ValueError:
        return 0.0


def _larger(one: float | None, other: float | None) -> float | None:
    return None if one is None or other is None else max(one, other)
