"""Every fault with severities that grow from hardly noticeable to gross."""

from __future__ import annotations

from dataclasses import dataclass

from flows.sources.simulated import faults, signal_faults
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
