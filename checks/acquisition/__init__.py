"""Checks on what holds for a whole acquisition: its calibration, its sensors, its runs."""

from checks.acquisition import (
    pressure_gain,
    pressure_sensor,
    pressure_zero,
    reference,
    required_runs,
    volume_calibration,
    zero_drift,
)

ALL = (
    required_runs.CHECK,
    pressure_zero.CHECK,
    zero_drift.CHECK,
    pressure_gain.CHECK,
    pressure_sensor.CHECK,
    volume_calibration.GAIN_KNOWN,
    volume_calibration.OFFSET_KNOWN,
    reference.STROKE_VOLUME,
    reference.VOLUMES,
)
