"""Checks on single beats, vectorised over the beats of a run."""

from checks.beat import (
    cycle_length,
    duplicated_samples,
    flat_line,
    held_signal,
    landmarks,
    loop_closure,
    missing_samples,
    noise_bursts,
    ranges,
)

ALL = (
    landmarks.CHECK,
    missing_samples.CHECK,
    duplicated_samples.CHECK,
    flat_line.CHECK,
    noise_bursts.CHECK,
    held_signal.CHECK,
    cycle_length.PREMATURE,
    cycle_length.AFTER,
    loop_closure.CHECK,
    ranges.PEAK_PRESSURE,
    ranges.END_DIASTOLIC_PRESSURE,
    ranges.END_DIASTOLIC_VOLUME,
    ranges.STROKE_VOLUME,
    ranges.EJECTION_FRACTION,
    ranges.STEEPEST_RISE,
    ranges.STROKE_WORK,
)
