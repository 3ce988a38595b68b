"""From a manifest and a protocol to plain facts: clock times become seconds from a run's start and ages in hours."""

from __future__ import annotations

from collections import Counter
from datetime import datetime

from flows.study.manifest import Manifest, ManifestRun
from flows.study.protocol import Protocol
from metrics.signals.facts import (
    AcquisitionFacts,
    PressureCalibration,
    ReferenceVolumes,
    RunFacts,
    VolumeCalibration,
    ZeroReading,
)


def run_facts(manifest: Manifest, run: ManifestRun) -> RunFacts:
    """Return what the site declared about one run."""
    started = run.started_at
    duration_s = None if started is None or run.ended_at is None else (run.ended_at - started).total_seconds()
    return RunFacts(
        run=run.run,
        kind=run.kind,
        chamber=manifest.chamber,
        stage=run.stage,
        manoeuvre=run.manoeuvre,
        sampling_rate_hz=run.sampling_rate_hz,
        duration_s=duration_s,
        heart_rate_per_min=run.heart_rate_per_min,
        rhythm=manifest.rhythm,
        respiration=run.respiration,
        conditions=frozenset(manifest.subject_facts.conditions),
        events=tuple((event.at_s, event.kind) for event in run.events),
        segments_used=manifest.segments_used(run),
        pressure=_pressure(manifest, run),
        volume=_volume(manifest, run),
    )


def acquisition_facts(manifest: Manifest, protocol: Protocol) -> AcquisitionFacts:
    """Return what the site declared about the acquisition, and what the protocol demands of it and it lacks."""
    reference = manifest.calibration.volume.reference
    first = manifest.runs[0]
    return AcquisitionFacts(
        chamber=manifest.chamber,
        rhythm=manifest.rhythm,
        conditions=frozenset(manifest.subject_facts.conditions),
        pressure_kind=manifest.sensors.pressure.kind,
        volume_kind=manifest.sensors.volume.kind,
        pressure=_pressure(manifest, first),
        volume=_volume(manifest, first),
        reference=None
        if reference is None
        else ReferenceVolumes(reference.source, reference.edv_ml, reference.esv_ml, reference.sv_ml, reference.sv_sd_ml),
        bsa_m2=manifest.subject_facts.bsa_m2,
        runs_by_kind=dict(Counter(run.kind for run in manifest.runs)),
        missing_required=missing_required(manifest, protocol),
        reference_stage=protocol.reference_stage,
    )


def missing_required(manifest: Manifest, protocol: Protocol) -> tuple[str, ...]:
    """Return the run kinds and stages the protocol demands of this visit and the manifest lacks, in the protocol's order."""
    visit = next((visit for visit in protocol.visits if visit.name == manifest.visit), None)
    if visit is None:
        return ()
    lacking = Counter(visit.required_runs) - Counter(run.kind for run in manifest.runs)
    stages = {run.stage for run in manifest.runs}
    return (*lacking.elements(), *(stage for stage in visit.required_stages if stage not in stages))


def _pressure(manifest: Manifest, run: ManifestRun) -> PressureCalibration:
    calibration = manifest.calibration_of(run).pressure
    return PressureCalibration(
        points=tuple((point.applied_mmhg, point.read_mmhg) for point in calibration.points),
        zeros=tuple(ZeroReading(zero.mmhg, _since(run.started_at, zero.at)) for zero in calibration.readings()),
        re_zeros_s=_re_zeros_s(manifest, run),
        zero_sd_mmhg=calibration.zero_sd_mmhg,
    )


def _volume(manifest: Manifest, run: ManifestRun) -> VolumeCalibration:
    calibration = manifest.calibration_of(run).volume
    channels = (run.channels.volume,) if run.channels.volume is not None else run.channels.segments
    age_s = _since(calibration.at, run.started_at)
    return VolumeCalibration(
        calibrated=not any(channel.is_raw for channel in channels),
        method=calibration.method,
        alpha=calibration.alpha,
        alpha_sd=calibration.alpha_sd,
        alpha_vc_ml=calibration.alpha_vc_ml,
        alpha_vc_sd_ml=calibration.alpha_vc_sd_ml,
        age_hours=None if age_s is None else age_s / 3600.0,
        electrode_spacing_cm=manifest.sensors.volume.electrode_spacing_cm,
        blood_resistivity_ohm_cm=manifest.sensors.volume.blood_resistivity_ohm_cm,
    )


def _re_zeros_s(manifest: Manifest, run: ManifestRun) -> tuple[float, ...]:
    """Return when the recorder was re-zeroed, in seconds of this run: events of every run whose clock is known."""
    found = []
    for other in manifest.runs:
        offset_s = 0.0 if other is run else _since(run.started_at, other.started_at)
        if offset_s is not None:
            found += [offset_s + event.at_s for event in other.events if event.kind == "re-zero"]
    return tuple(sorted(found))


def _since(start: datetime | None, instant: datetime | None) -> float | None:
    return None if start is None or instant is None else (instant - start).total_seconds()
