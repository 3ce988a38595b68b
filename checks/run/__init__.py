"""Checks on one run as a whole: its time base, its channels, its preload window."""

from checks.run import (
    beats_found,
    clipping,
    duration,
    heart_rate_agreement,
    preload_adequacy,
    readable,
    sampling_rate,
    time_base,
    time_gaps,
)

ALL = (
    readable.CHECK,
    time_base.CHECK,
    sampling_rate.CHECK,
    duration.CHECK,
    time_gaps.CHECK,
    beats_found.CHECK,
    heart_rate_agreement.CHECK,
    clipping.PRESSURE,
    clipping.VOLUME,
    preload_adequacy.ADEQUACY,
    preload_adequacy.BEATS,
)
