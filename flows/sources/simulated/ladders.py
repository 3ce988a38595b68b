"""Every fault with severities that grow from hardly noticeable to gross."""

from __future__ import annotations

from dataclasses import dataclass

from flows.sources.simulated import (
    absence_faults,
    beat_faults,
    calibration_faults,
    faults,
    heart_faults,
    identity_faults,
    noise_faults,
    run_faults,
    signal_faults,
)
from flows.sources.simulated.faults import Fault


@dataclass(frozen=True, slots=True)
class Ladder:
    """A fault and its ``severities``, in ``unit``, from the mildest to the grossest."""

    name: str
    inject: Fault
    unit: str
    severities: tuple[float, ...]


LADDERS = (
    Ladder("zero-drift", faults.zero_drift, "mm[Hg]", (0.5, 1.5, 3.0, 6.0, 9.0)),
    Ladder("zero-missing", faults.zero_missing, "mm[Hg]", (0.0, 4.0, 10.0)),
    Ladder("gain-shown", faults.gain_shown, "1", (0.01, 0.05, 0.12, 0.25, 0.4)),
    Ladder("volume-gain-wrong", faults.volume_gain_wrong, "1", (0.02, 0.1, 0.2, 0.35, 0.6)),
    Ladder("parallel-volume-wrong", faults.parallel_volume_wrong, "mL", (2.0, 8.0, 20.0, 40.0, 70.0)),
    Ladder("alpha-missing", faults.alpha_missing, "1", (0.9, 0.8, 0.6)),
    Ladder("alpha-vc-missing", faults.alpha_vc_missing, "1", (0.9, 0.8, 0.6)),
    Ladder("fluid-filled", faults.fluid_filled, "Hz", (40.0, 20.0, 10.0)),
    Ladder("ramp-missing", faults.ramp_missing, "1", (1.0,)),
    Ladder("occlusion-shallow", faults.occlusion_shallow, "1", (0.3, 0.5, 0.7, 0.85, 0.95)),
    Ladder("premature-beats", faults.premature_beats, "1", (0.92, 0.8, 0.7, 0.6, 0.55)),
    Ladder("rate-misdeclared", faults.rate_misdeclared, "1", (1.0, 1.02, 1.1, 1.25, 2.0)),
    Ladder("clock-misdeclared", faults.clock_misdeclared, "1", (1.0, 1.02, 1.1, 1.25, 2.0)),
    Ladder("heart-rate-misdeclared", faults.heart_rate_misdeclared, "1", (1.0, 1.05, 1.15, 1.3, 1.8)),
    Ladder("column-misnamed", faults.column_misnamed, "1", (1.0,)),
    Ladder("samples-lost", signal_faults.samples_lost, "s", (0.02, 0.1, 0.4, 1.5)),
    Ladder("samples-scattered", signal_faults.samples_scattered, "1", (0.005, 0.02, 0.08, 0.2)),
    Ladder("stamps-repeated", signal_faults.stamps_repeated, "s", (0.05, 0.3, 1.5)),
    Ladder("time-backwards", signal_faults.time_backwards, "s", (0.2, 2.0)),
    Ladder("end-misdeclared", signal_faults.end_misdeclared, "s", (0.2, 2.0, 6.0, 20.0)),
    Ladder("flat-line", signal_faults.flat_line, "s", (0.1, 0.5, 1.0, 2.5)),
    Ladder("pressure-clipped", signal_faults.pressure_clipped, "1", (0.0, 0.05, 0.15, 0.3)),
    Ladder("volume-clipped", signal_faults.volume_clipped, "1", (0.0, 0.05, 0.15, 0.3)),
    Ladder("volume-stepped", signal_faults.volume_stepped, "mL", (1.0, 6.0, 15.0, 30.0)),
    Ladder("pressure-in-kpa", signal_faults.pressure_in_kpa, "1", (1.0,)),
    Ladder("volume-times", signal_faults.volume_times, "1", (1.0, 3.0, 10.0)),
)

SHARES = (0.0, 0.2, 0.4, 0.6, 0.8, 1.0)
"""Of the runs, or of a run, where a fault is there or not: the first ones have it."""

MMHG = (0.0, 0.5, 2.0, 5.0, 10.0, 20.0)
ML = (0.0, 1.0, 4.0, 10.0, 20.0, 40.0)
EXCESS = (0.0, 0.03, 0.08, 0.15, 0.3, 0.6)
ALPHAS = (1.0, 0.9, 0.8, 0.7, 0.6, 0.5)
FACTOR = (1.0, 1.01, 1.04, 1.1, 1.3, 2.0)

ACQUISITION_LADDERS = (
    Ladder("zero-drift", faults.zero_drift, "mm[Hg]", (0.0, 0.5, 1.5, 3.0, 6.0, 12.0)),
    Ladder("zero-missing", faults.zero_missing, "mm[Hg]", MMHG),
    Ladder("offset-shown", calibration_faults.offset_shown, "mm[Hg]", MMHG),
    Ladder("rezeroed", calibration_faults.rezeroed, "mm[Hg]", MMHG),
    Ladder("rezeroed-silently", calibration_faults.rezeroed_silently, "mm[Hg]", MMHG),
    Ladder("gain-shown", faults.gain_shown, "1", (0.0, 0.02, 0.05, 0.12, 0.25, 0.5)),
    Ladder("points-missing", calibration_faults.points_missing, "1", (0.0, 0.02, 0.05, 0.12, 0.25, 0.5)),
    Ladder("pressure-bent", calibration_faults.pressure_bent, "mm[Hg]", (0.0, 0.5, 1.5, 4.0, 8.0, 15.0)),
    Ladder("alpha-wrong", calibration_faults.alpha_wrong, "1", (0.0, 0.03, 0.08, 0.15, 0.6, 2.0)),
    Ladder("alpha-vc-wrong", calibration_faults.alpha_vc_wrong, "mL", ML),
    Ladder("alpha-vc-small", calibration_faults.alpha_vc_small, "1", (0.0, 0.1, 0.3, 0.6, 0.9, 0.99)),
    Ladder("alpha-vc-sign-wrong", calibration_faults.alpha_vc_sign_wrong, "1", SHARES),
    Ladder("resistivity-wrong", calibration_faults.resistivity_wrong, "1", EXCESS),
    Ladder("calibration-stale", calibration_faults.calibration_stale, "h", (0.0, 1.0, 4.0, 12.0, 36.0, 96.0)),
    Ladder("calibration-stale-no-saline", calibration_faults.calibration_stale_without_saline, "h", (0.0, 1.0, 4.0, 12.0, 36.0, 96.0)),
    Ladder("alpha-missing", faults.alpha_missing, "1", ALPHAS),
    Ladder("alpha-vc-missing", faults.alpha_vc_missing, "1", ALPHAS),
    Ladder("fluid-filled", faults.fluid_filled, "Hz", (100.0, 60.0, 40.0, 20.0, 15.0, 10.0)),
    Ladder("saline-disagrees", calibration_faults.saline_disagrees, "mL", ML),
    Ladder("reference-gain-wrong", calibration_faults.reference_gain_wrong, "1", EXCESS),
    Ladder("reference-offset-wrong", calibration_faults.reference_offset_wrong, "mL", ML),
    Ladder("run-copied", identity_faults.run_copied, "1", SHARES),
    Ladder("run-copied-with-new-noise", identity_faults.run_copied_with_new_noise, "1", SHARES),
    Ladder("run-copied-with-new-ecg", identity_faults.run_copied_with_new_ecg, "1", SHARES),
    Ladder("subject-swapped", identity_faults.subject_swapped, "1", SHARES),
    Ladder("ramps-missing", absence_faults.ramps_missing, "1", SHARES),
    Ladder("rest-as-ramp", identity_faults.rest_as_ramp, "1", SHARES),
    Ladder("replicate-differs", identity_faults.replicate_differs, "1", EXCESS),
    Ladder("replicate-shifted", identity_faults.replicate_shifted, "mL", ML),
)
"""Faults of a whole acquisition, six severities each, the first harmless."""

RUN_LADDERS = (
    Ladder("pressure-sent-in-kpa", run_faults.pressure_sent_in_kpa, "1", SHARES),
    Ladder("pressure-sent-in-cmh2o", run_faults.pressure_sent_in_cmh2o, "1", SHARES),
    Ladder("volume-sent-in-litres", run_faults.volume_sent_in_litres, "1", SHARES),
    Ladder("volume-calibrated-twice", run_faults.volume_calibrated_twice, "1", SHARES),
    Ladder("channels-swapped", run_faults.channels_swapped, "1", SHARES),
    Ladder("channels-swapped-without-ecg", run_faults.channels_swapped_without_ecg, "1", SHARES),
    Ladder("pressure-inverted", run_faults.pressure_inverted, "1", SHARES),
    Ladder("volume-inverted", run_faults.volume_inverted, "1", SHARES),
    Ladder("rate-misdeclared", faults.rate_misdeclared, "1", FACTOR),
    Ladder("clock-misdeclared", faults.clock_misdeclared, "1", FACTOR),
    Ladder("clock-stretched", run_faults.clock_stretched, "1", FACTOR),
    Ladder("stamps-stretched", run_faults.stamps_stretched, "1", FACTOR),
    Ladder("time-backwards", signal_faults.time_backwards, "s", (0.0, 0.02, 0.1, 0.5, 2.0, 8.0)),
    Ladder("columns-misnamed", absence_faults.columns_misnamed, "1", SHARES),
    Ladder("end-misdeclared", signal_faults.end_misdeclared, "s", (0.0, 0.2, 1.0, 3.0, 8.0, 20.0)),
    Ladder("runs-cut-short", run_faults.runs_cut_short, "1", (0.0, 0.1, 0.3, 0.6, 0.85, 0.97)),
    Ladder("pressure-gone", run_faults.pressure_gone, "1", SHARES),
    Ladder("volume-gone", run_faults.volume_gone, "1", SHARES),
    Ladder("pressure-dropped-out", run_faults.pressure_dropped_out, "1", (0.0, 0.01, 0.05, 0.15, 0.4, 0.8)),
    Ladder("pressure-held", run_faults.pressure_held, "1", (0.0, 0.01, 0.05, 0.15, 0.4, 0.8)),
    Ladder("volume-held", run_faults.volume_held, "1", (0.0, 0.01, 0.05, 0.15, 0.4, 0.8)),
    Ladder("pressure-clipped", signal_faults.pressure_clipped, "1", (0.0, 0.02, 0.05, 0.1, 0.2, 0.4)),
    Ladder("volume-clipped", signal_faults.volume_clipped, "1", (0.0, 0.02, 0.05, 0.1, 0.2, 0.4)),
    Ladder("pressure-clipped-low", signal_faults.pressure_clipped_low, "1", (0.0, 0.02, 0.05, 0.1, 0.2, 0.4)),
    Ladder("volume-clipped-low", signal_faults.volume_clipped_low, "1", (0.0, 0.02, 0.05, 0.1, 0.2, 0.4)),
    Ladder("pressure-coarse", run_faults.pressure_coarse, "mm[Hg]", (0.0, 0.1, 0.5, 2.0, 5.0, 12.0)),
    Ladder("volume-coarse", run_faults.volume_coarse, "mL", (0.0, 0.1, 0.5, 2.0, 5.0, 12.0)),
    Ladder("pressure-hum-50", noise_faults.pressure_hum_50, "mm[Hg]", MMHG),
    Ladder("pressure-hum-60", noise_faults.pressure_hum_60, "mm[Hg]", MMHG),
    Ladder("volume-hum-50", noise_faults.volume_hum_50, "mL", (0.0, 2.0, 8.0, 25.0, 60.0, 150.0)),
    Ladder("ecg-hum-60", noise_faults.ecg_hum_60, "mV", (0.0, 0.02, 0.1, 0.3, 1.0, 3.0)),
    Ladder("pressure-noisy", noise_faults.pressure_noisy, "mm[Hg]", MMHG),
    Ladder("volume-noisy", noise_faults.volume_noisy, "mL", (0.0, 0.5, 2.0, 5.0, 10.0, 20.0)),
    Ladder("ecg-noisy", noise_faults.ecg_noisy, "mV", (0.0, 0.02, 0.05, 0.15, 0.4, 1.0)),
    Ladder("pressure-bursts", noise_faults.pressure_bursts, "mm[Hg]", (0.0, 1.0, 3.0, 8.0, 20.0, 50.0)),
    Ladder("line-ringing", noise_faults.line_ringing, "Hz", (100.0, 50.0, 30.0, 20.0, 12.0, 8.0)),
    Ladder("line-overdamped", noise_faults.line_overdamped, "1", (0.65, 1.0, 1.6, 2.5, 4.0, 7.0)),
    Ladder("ecg-leaking", noise_faults.ecg_leaking, "mL/mV", (0.0, 0.5, 1.5, 4.0, 10.0, 25.0)),
    Ladder("pressure-step", run_faults.pressure_step, "mm[Hg]", MMHG),
    Ladder("volume-step", run_faults.volume_step, "mL", ML),
    Ladder("pressure-drifting", run_faults.pressure_drifting, "mm[Hg]", MMHG),
    Ladder("volume-drifting", run_faults.volume_drifting, "mL", ML),
    Ladder("volume-late", run_faults.volume_late, "ms", (0.0, 2.0, 6.0, 12.0, 25.0, 60.0)),
    Ladder("pressure-late", run_faults.pressure_late, "ms", (0.0, 2.0, 6.0, 12.0, 25.0, 60.0)),
    Ladder("volume-late-as-declared", run_faults.volume_late_as_declared, "ms", (0.0, 2.0, 6.0, 12.0, 25.0, 60.0)),
    Ladder("segment-astray", run_faults.segment_astray, "1", SHARES),
    Ladder("respiration-undeclared", heart_faults.respiration_undeclared, "1", (0.0, 0.03, 0.06, 0.12, 0.2, 0.35)),
    Ladder("rhythm-undeclared", heart_faults.rhythm_undeclared, "1", (0.01, 0.03, 0.07, 0.12, 0.18, 0.26)),
    Ladder("steady-ramping", heart_faults.steady_ramping, "/s", (0.0, 0.0005, 0.002, 0.005, 0.012, 0.03)),
    Ladder("occlusion-too-shallow", heart_faults.occlusion_too_shallow, "1", (0.3, 0.5, 0.7, 0.85, 0.95, 1.0)),
    Ladder("occlusion-recorded-late", heart_faults.occlusion_recorded_late, "s", (0.0, 2.0, 4.0, 6.0, 9.0, 12.0)),
    Ladder("reflex", heart_faults.reflex, "1", (0.0, 0.03, 0.08, 0.15, 0.3, 0.5)),
)
"""Faults of whole runs, six severities each, the first harmless."""

BEAT_LADDERS = (
    Ladder("whip", beat_faults.whip, "mm[Hg]", (0.0, 1.0, 4.0, 10.0, 25.0, 50.0)),
    Ladder("entrapment", beat_faults.entrapment, "mm[Hg]", (0.0, 2.0, 8.0, 20.0, 50.0, 100.0)),
    Ladder("late-spike", beat_faults.late_spike, "mm[Hg]", (0.0, 2.0, 8.0, 20.0, 50.0, 100.0)),
    Ladder("volume-jump", beat_faults.volume_jump, "mL", (0.0, 1.0, 4.0, 10.0, 20.0, 40.0)),
    Ladder("beat-dropped-out", beat_faults.beat_dropped_out, "1", (0.0, 0.02, 0.05, 0.15, 0.3, 0.6)),
    Ladder("beat-clipped", beat_faults.beat_clipped, "1", (0.0, 0.02, 0.05, 0.1, 0.25, 0.5)),
    Ladder("premature-beats", faults.premature_beats, "1", (0.98, 0.92, 0.85, 0.75, 0.65, 0.55)),
    Ladder("aberrant-beats", beat_faults.aberrant_beats, "1", (0.0, 0.08, 0.15, 0.25, 0.4, 0.6)),
)
"""Faults of single beats, six severities each, the first harmless or nearly so."""
