"""Damping: pressure follows the ventricle without lag.

A fluid-filled line or a low-pass of the recorder makes every change slower and later: one of natural frequency f and damping ratio z is
late by z / (pi f) (second-order system, common practice, no source), and what it takes off dP/dt goes with the square of that. How steep
or how long an upstroke is cannot tell: a failing heart rises as slowly as a healthy one behind such a line. Two signs can, both by the
volume. Ejection begins as dP/dt reaches its maximum, so pressure behind volume is late or slow; a pure delay of the pressure channel
cannot be told from a slow line and is judged alike. And a ventricle fills only once its pressure is below the atrium's: pressure that
is still high when a tenth of the stroke has come back has not followed. Both together are no stiff heart and no mere delay.

Lines that are late by less than 13 ms, in the right ventricle 25 ms, are not seen: healthy valves differ by as much.
"""

from __future__ import annotations

import numpy as np

from checks.check import Check, Level, Limits, Measured, single
from checks.run.channel_delay import volume_late_ms
from checks.spoils import END_SYSTOLE, PRESSURE_EXTREMES, PRESSURE_LATE
from checks.subject import RunSubject, once_a_run

LATE_MS = {"LV": 13.0, "RV": 15.0}
"""What bears out that pressure has not followed, where it is high when filling begins."""

REMEDY = "confirm the kind of the pressure sensor and the recorder's filter; flush the line, or use a tip manometer"


def pressure_late_ms(subject: RunSubject) -> Measured:
    """Return by how much pressure comes later than usual behind volume, ms, below 0 where it is early; shape ()."""
    return single(-volume_late_ms(subject))


@once_a_run
def pressure_left(subject: RunSubject) -> Measured:
    """Return how much of its range pressure still has to fall once the ventricle fills, shape (); borne out where pressure is late too."""
    late = np.array(-volume_late_ms(subject) > LATE_MS[subject.facts.chamber])
    return Measured(np.array(subject.pressure_when_filling), None, late)


CHECK = Check(
    name="damping",
    title="Pressure keeps up with volume",
    level=Level.RUN,
    measure=pressure_late_ms,
    unit="ms",
    limits=Limits(
        suspect_above=10.0, fail_above=13.0, basis="a critically damped line that is 16 ms late takes 6 % off dP/dt minimum (computed)"
    ),
    limits_rv=Limits(
        suspect_above=20.0,
        fail_above=25.0,
        basis="a stiff right ventricle fills to near its artery's pressure and ejects as it begins to contract, 20 ms early (computed)",
    ),
    reason="pressure is {value:.0f} ms late behind the onset of ejection, as behind a slow line (limit {limit:g} ms)",
    remedy=REMEDY,
    spoils=PRESSURE_LATE,
    after_beats=True,
)
LATE = Check(
    name="pressure-late",
    title="Pressure not far behind volume",
    level=Level.RUN,
    measure=pressure_late_ms,
    unit="ms",
    limits=Limits(fail_above=45.0, basis="60 ms move end-systolic pressure by 4-12 %, 25 ms by 1-4 % (computed)"),
    reason="pressure is {value:.0f} ms late, too far for a pressure read at an instant that volume tells (limit {limit:g} ms)",
    remedy=REMEDY,
    spoils=END_SYSTOLE,
    after_beats=True,
)
PEAK = Check(
    name="damping-peak",
    title="Pressure reaches its peak",
    level=Level.RUN,
    measure=pressure_left,
    unit="1",
    limits=Limits(
        fail_above=0.10, basis="an atrium at 30 mmHg over an early diastolic 20, 10 of 100: so much is left at filling; house default"
    ),
    limits_rv=Limits(
        fail_above=0.15, basis="an atrium at 8 mmHg over an early diastolic 4, 4 of 27: so much is left at filling; house default"
    ),
    reason="{value:.0%} of the pulse is still to fall when the ventricle fills, and pressure is late (limit {limit:.0%})",
    remedy=REMEDY,
    spoils=frozenset({"Pmax"}),
    after_beats=True,
)
GROSS = Check(
    name="damping-gross",
    title="Pressure falls before the ventricle fills",
    level=Level.RUN,
    measure=pressure_left,
    unit="1",
    limits=Limits(
        fail_above=0.25, basis="a line with a time constant of 0.1 s leaves a third; end-systolic pressure is 7-15 % low (computed)"
    ),
    limits_rv=Limits(
        fail_above=0.30, basis="a line with a time constant of 0.1 s leaves 0.4; end-systolic pressure is 8-16 % low (computed)"
    ),
    reason="{value:.0%} of the pulse is still to fall when the ventricle fills, and pressure is late (limit {limit:.0%})",
    remedy=REMEDY,
    spoils=PRESSURE_EXTREMES,
    after_beats=True,
)
