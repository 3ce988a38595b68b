"""What a site declared about an acquisition, reduced to numbers: no clocks, no paths, ages in hours, times in seconds."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field


@dataclass(frozen=True, slots=True)
class ZeroReading:
    """A pressure zero as shown by the recorder; ``at_s`` counts from the run's first sample, None when a clock is missing."""

    mmhg: float
    at_s: float | None


@dataclass(frozen=True, slots=True)
class PressureCalibration:
    """Two-point line and zero readings. ``points`` are (applied, read) pairs in mmHg."""

    points: tuple[tuple[float, float], ...] = ()
    zeros: tuple[ZeroReading, ...] = ()
    re_zeros_s: tuple[float, ...] = ()
    zero_sd_mmhg: float | None = None


@dataclass(frozen=True, slots=True)
class VolumeCalibration:
    """Gain and parallel volume of a raw volume; ``alpha_vc_ml`` is the saline intercept on raw volume (alpha times Vc)."""

    calibrated: bool = True
    method: str | None = None
    alpha: float | None = None
    alpha_sd: float | None = None
    alpha_vc_ml: float | None = None
    alpha_vc_sd_ml: float | None = None
    age_hours: float | None = None
    electrode_spacing_cm: float | None = None
    blood_resistivity_ohm_cm: float | None = None


@dataclass(frozen=True, slots=True)
class ReferenceVolumes:
    """Volumes another method measured."""

    source: str
    edv_ml: float | None = None
    esv_ml: float | None = None
    sv_ml: float | None = None
    sv_sd_ml: float | None = None


@dataclass(frozen=True, slots=True)
class RunFacts:
    """What the site declared about one run. ``events`` are (at_s, kind) pairs; ``duration_s`` is ended_at minus started_at.

    ``segments_used`` numbers from 1 the segments whose sum is the volume; empty means all of them.
    """

    run: str
    kind: str
    chamber: str = "LV"
    stage: str | None = None
    manoeuvre: str | None = None
    sampling_rate_hz: float = 0.0
    duration_s: float | None = None
    heart_rate_per_min: float | None = None
    rhythm: str | None = None
    respiration: str | None = None
    conditions: frozenset[str] = frozenset()
    events: tuple[tuple[float, str], ...] = ()
    segments_used: tuple[int, ...] = ()
    pressure: PressureCalibration = field(default_factory=PressureCalibration)
    volume: VolumeCalibration = field(default_factory=VolumeCalibration)


@dataclass(frozen=True, slots=True)
class AcquisitionFacts:
    """What the site declared about one acquisition, beside its runs, and what the protocol demands of it.

    ``reference_stage`` is the stage that changes are counted from, None where the protocol names no stages.
    """

    chamber: str = "LV"
    rhythm: str | None = None
    conditions: frozenset[str] = frozenset()
    pressure_kind: str | None = None
    volume_kind: str | None = None
    pressure: PressureCalibration = field(default_factory=PressureCalibration)
    volume: VolumeCalibration = field(default_factory=VolumeCalibration)
    reference: ReferenceVolumes | None = None
    bsa_m2: float | None = None
    runs_by_kind: Mapping[str, int] = field(default_factory=dict)
    missing_required: tuple[str, ...] = ()
    reference_stage: str | None = None
