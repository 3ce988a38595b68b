"""Quantisation: the converter's step is fine against what is read from the channel.

Rounding to a step q is an error of SD q / sqrt(12) (Bennett 1948, Bell Syst Tech J 27:446, from memory). Noise spreads it over many
samples and averages it away; on a quiet plateau, as in diastole, it stays, and every beat's end-diastolic pressure falls on a step.
The step is the smallest difference between neighbouring samples that differ, so a channel that was resampled shows none.
"""

from __future__ import annotations

import math

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.spoils import END_DIASTOLE, END_SYSTOLE, PEAK, STEEPEST, VOLUME_SHAPE
from checks.subject import RunSubject
from metrics.arrays import FloatArray

MOST_SAMPLES = 30_000
"""A converter shows its step in any half a minute."""


def converter_step(samples: FloatArray) -> float:
    """Return the smallest difference between two neighbouring samples that differ; NaN where none do.

    >>> converter_step(np.array([1.0, 1.5, 1.5, np.nan, 4.0, 2.0]))
    0.5
    """
    middle = max(0, samples.size - MOST_SAMPLES) // 2
    steps = np.abs(np.diff(samples[middle : middle + MOST_SAMPLES]))
    steps = steps[steps > 0.0]
    return float(steps.min()) if steps.size else float("nan")


def step_share(subject: RunSubject, name: str) -> float:
    """Return the converter's step over what the channel moves by; NaN for a channel that stands still."""
    return converter_step(subject.channel(name).samples) / subject.reach(name)


def rounding_of_pressure(subject: RunSubject) -> Measured:
    """Return the SD of rounding over what pressure moves by, shape ()."""
    return single(step_share(subject, "pressure") / math.sqrt(12.0))


def step_of_pressure(subject: RunSubject) -> Measured:
    """Return the converter's step in mmHg of calibrated pressure, shape ()."""
    return single(step_share(subject, "pressure") * subject.known_signals().pressure_reach_mmhg)


def rounding_of_volume(subject: RunSubject) -> Measured:
    """Return the SD of rounding over what volume moves by, shape ()."""
    return single(step_share(subject, "volume") / math.sqrt(12.0))


DIASTOLE = Check(
    name="edp-quantisation",
    title="Pressure steps are fine against end-diastole",
    level=Level.RUN,
    measure=step_of_pressure,
    unit="mm[Hg]",
    limits=Limits(
        suspect_above=1.2, fail_above=1.5, basis="steps of 1 mmHg are common; half a step of 1.5 is 5 to 10 % of a usual EDP; house default"
    ),
    reason="pressure was recorded in steps of {value:.2g} mmHg, too coarse for end-diastolic pressure (limit {limit:g} mmHg)",
    remedy="record pressure with a finer converter or a narrower range",
    spoils=END_DIASTOLE,
)
PRESSURE = Check(
    name="pressure-quantisation",
    title="Pressure steps are fine against the pulse",
    level=Level.RUN,
    measure=rounding_of_pressure,
    unit="1",
    limits=Limits(
        suspect_above=0.015, fail_above=0.025, basis="2.5 % is a step of 9 % of the pulse, so an error of up to 4 % of it; house default"
    ),
    reason="rounding to the converter's step has an SD of {value:.1%} of the pulse (limit {limit:.1%})",
    remedy="record pressure with a finer converter or a narrower range",
    spoils=PEAK | END_SYSTOLE | {"V0"},
)
SLOPE = Check(
    name="dpdt-quantisation",
    title="Pressure steps are fine against its slope",
    level=Level.RUN,
    measure=rounding_of_pressure,
    unit="1",
    limits=Limits(
        suspect_above=0.0075, fail_above=0.010, basis="1 % is a step of a 29th of the pulse, where dP/dt begins to move (computed)"
    ),
    reason="rounding to the converter's step has an SD of {value:.1%} of the pulse, too much for dP/dt (limit {limit:.1%})",
    remedy="record pressure with a finer converter or a narrower range",
    spoils=STEEPEST,
)
VOLUME = Check(
    name="volume-quantisation",
    title="Volume steps are fine against what it moves by",
    level=Level.RUN,
    measure=rounding_of_volume,
    unit="1",
    limits=Limits(
        suspect_above=0.015, fail_above=0.030, basis="3 % is a step of a tenth of a stroke, so an error of up to 5 % at each end"
    ),
    reason="rounding to the converter's step has an SD of {value:.1%} of what volume moves by (limit {limit:.1%})",
    remedy="record volume with a finer converter or a narrower range",
    spoils=VOLUME_SHAPE,
)
