"""Checks on what holds for a whole acquisition: its calibration, its sensors, its runs."""

from checks.acquisition import (
    alpha,
    calibration_age,
    copied_signal,
    pressure_gain,
    pressure_linearity,
    pressure_sensor,
    pressure_zero,
    reference,
    replicates_agree,
    required_runs,
    saline_agreement,
    volume_calibration,
    zero_drift,
)

ALL = (
    required_runs.CHECK,
    pressure_zero.CHECK,
    zero_drift.CHECK,
    pressure_gain.CHECK,
    pressure_linearity.CHECK,
    pressure_sensor.CHECK,
    volume_calibration.GAIN_KNOWN,
    volume_calibration.OFFSET_KNOWN,
    alpha.PLAUSIBLE,
    alpha.PARALLEL_PLAUSIBLE,
    calibration_age.CHECK,
    saline_agreement.CHECK,
    reference.STROKE_VOLUME,
    reference.VOLUMES,
    replicates_agree.CHECK,
    copied_signal.CHECK,
)
