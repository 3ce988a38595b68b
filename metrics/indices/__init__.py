"""Coupling indices: one file an index, or a family that shares one fit."""

from metrics.indices import (
    arterial_elastance,
    coupling,
    end_systolic_elastance,
    heart_rate,
    pressures,
    recruitable_work,
    stroke_work,
    volumes,
)

ALL = (
    heart_rate.HEART_RATE,
    volumes.END_DIASTOLIC_VOLUME,
    volumes.END_SYSTOLIC_VOLUME,
    volumes.STROKE_VOLUME,
    volumes.EJECTION_FRACTION,
    pressures.END_DIASTOLIC_PRESSURE,
    pressures.END_SYSTOLIC_PRESSURE,
    pressures.PEAK_PRESSURE,
    arterial_elastance.ARTERIAL_ELASTANCE,
    stroke_work.STROKE_WORK,
    pressures.STEEPEST_RISE,
    pressures.STEEPEST_FALL,
    end_systolic_elastance.END_SYSTOLIC_ELASTANCE,
    end_systolic_elastance.VOLUME_INTERCEPT,
    coupling.COUPLING,
    recruitable_work.RECRUITABLE_WORK,
)
