"""Hum: the mains in a channel, by what is left of it where something is read.

What matters is how much passes the common low-pass (half of 50 Hz, a third of 60 Hz) and, for volumes and end-systolic pressures, the
averaging over 40 ms of `metrics.signals.filters.steadied`, which takes away most of that. A line of amplitude A raises whatever is read
at an extreme by up to A, and steers instants that are found by a threshold: end-diastole above all. The loop's area, the heart rate and
the slope of end-systolic points average over it.
"""

from __future__ import annotations

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import END_DIASTOLE, END_SYSTOLE, PEAK, STEEPEST, VOLUME_SHAPE
from checks.subject import RunSubject
from metrics.arrays import median_of_known


def pressure_hum(subject: RunSubject) -> Measured:
    """Return the amplitude of the mains in the filtered pressure over what pressure moves by, shape ()."""
    return single(subject.mains("pressure").left)


def end_systolic_hum(subject: RunSubject) -> Measured:
    """Return the amplitude of the mains in a pressure read at end-systole over what pressure moves by, shape ()."""
    return single(subject.mains("pressure").at_landmarks)


def dpdt_hum(subject: RunSubject) -> Measured:
    """Return the amplitude of the mains in dP/dt over its median maximum, shape ()."""
    most = subject.known_beats().dpdt_max_mmhg_per_s
    reach_mmhg = subject.known_signals().pressure_reach_mmhg
    return single(subject.mains("pressure").slope * reach_mmhg / abs(median_of_known(most)))


def volume_hum(subject: RunSubject) -> Measured:
    """Return the amplitude of the mains in a volume read at a landmark over what volume moves by, shape ()."""
    return single(subject.mains("volume").at_landmarks)


REMEDY = "look for a missing earth or a heating mat; keep the transducer's cable away from mains"

DIASTOLE = Check(
    name="edp-hum",
    title="End-diastole is free of the mains",
    level=Level.RUN,
    measure=pressure_hum,
    unit="1",
    limits=Limits(
        suspect_above=0.004,
        fail_above=0.008,
        basis="end-diastole is found by a threshold of dP/dt, so its pressure moves by the amplitude: 0.8 % of the pulse is a tenth of EDP",
    ),
    reason="mains hum of {value:.1%} of the pulse is left in the filtered pressure and steers end-diastole (limit {limit:.1%})",
    remedy=REMEDY,
    spoils=END_DIASTOLE,
)
PRESSURE = Check(
    name="pressure-hum",
    title="Peak pressure is free of the mains",
    level=Level.RUN,
    measure=pressure_hum,
    unit="1",
    limits=Limits(
        suspect_above=0.02, fail_above=0.05, basis="a pressure read at an extreme moves by up to the amplitude; 5 % of the pulse matters"
    ),
    reason="mains hum of {value:.1%} of the pulse is left in the filtered pressure (limit {limit:.1%})",
    remedy=REMEDY,
    spoils=PEAK,
)
END_SYSTOLIC = Check(
    name="end-systole-hum",
    title="End-systolic pressure is free of the mains",
    level=Level.RUN,
    measure=end_systolic_hum,
    unit="1",
    limits=Limits(suspect_above=0.02, fail_above=0.05, basis="a pressure read at an instant moves by up to the amplitude; 5 % matters"),
    reason="mains hum of {value:.1%} of the pulse is left in pressures read at end-systole (limit {limit:.1%})",
    remedy=REMEDY,
    spoils=END_SYSTOLE | {"V0"},
)
SLOPE = Check(
    name="dpdt-hum",
    title="Slope of pressure free of the mains",
    level=Level.RUN,
    measure=dpdt_hum,
    unit="1",
    limits=Limits(suspect_above=0.025, fail_above=0.05, basis="dP/dt maximum moves by up to the amplitude; 5 % of it matters"),
    reason="mains hum has an amplitude of {value:.1%} of dP/dt maximum (limit {limit:.1%})",
    remedy=REMEDY,
    spoils=STEEPEST,
)
VOLUME = Check(
    name="volume-hum",
    title="Volume is free of the mains",
    level=Level.RUN,
    measure=volume_hum,
    unit="1",
    limits=Limits(suspect_above=0.015, fail_above=0.025, basis="a stroke has two ends, each off by up to the amplitude: 5 % of it"),
    reason="mains hum of {value:.1%} of what volume moves by is left in volumes read at landmarks (limit {limit:.1%})",
    remedy="look for a missing earth; check the conductance unit's shielding",
    spoils=VOLUME_SHAPE,
)
