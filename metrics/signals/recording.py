"""A run as it was recorded: its channels in base units, before anything is corrected."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from metrics.arrays import FloatArray

BASE_UNITS = ("mm[Hg]", "mL", "mS", "mV")
"""UCUM units a reader converts to: pressures, volumes, conductances, the ECG (and anything else in volts)."""


@dataclass(frozen=True, slots=True)
class Channel:
    """One channel as read.

    ``samples`` has shape (n,), in ``unit`` (one of `BASE_UNITS`), NaN where the file holds no value.
    ``time_s`` holds the recorded time stamps, first sample at 0; None where the declared rate is the time base.
    ``delay_s`` is how late the channel is, as declared by the site.
    """

    samples: FloatArray
    unit: str
    sampling_rate_hz: float
    time_s: FloatArray | None = None
    delay_s: float = 0.0


@dataclass(frozen=True, slots=True)
class Recording:
    """One run's channels by name: ``pressure``, ``volume``, ``ecg``, ``aortic_pressure``, ``respiration``, ``segment-1`` ..."""

    run: str
    channels: Mapping[str, Channel]
