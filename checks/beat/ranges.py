"""Hard physiological ranges: a beat outside them is not a beat of a human ventricle.

One card a quantity over one measure. The bounds are house defaults, wide on purpose: they reject units and sensors, not patients.
Children and animals need a protocol of their own.
"""

from __future__ import annotations

from collections.abc import Callable

from checks.check import Check, Level, Limits, Measured
from checks.subject import RunSubject

_BASIS = "house default, wide on purpose"


def beat_quantity(name: str) -> Callable[[RunSubject], Measured]:
    """Return the measure that gives one quantity of `Beats`, shape (n_beats,)."""

    def measure(subject: RunSubject) -> Measured:
        return Measured(getattr(subject.known_beats(), name), subject.start_s())

    return measure


def _range(
    quantity: str,
    column: str,
    index: str,
    title: str,
    unit: str,
    shown: str,
    left: tuple[float, float],
    right: tuple[float, float] | None = None,
) -> Check:
    """Return the card of one quantity: fail outside ``left`` (LV) or ``right`` (RV)."""
    return Check(
        name=f"range-{quantity}",
        title=f"{title} possible",
        level=Level.BEAT,
        measure=beat_quantity(column),
        unit=unit,
        limits=Limits(fail_below=left[0], fail_above=left[1], basis=_BASIS),
        limits_rv=None if right is None else Limits(fail_below=right[0], fail_above=right[1], basis=_BASIS),
        reason=f"{title[0].lower()}{title[1:]} of {{value:{shown} lies beyond what a ventricle does (limit {{limit:g}})",
        remedy="check the channel's unit, gain and calibration",
        concerns=frozenset({index}),
    )


PEAK_PRESSURE = _range("pressure", "pmax_mmhg", "Pmax", "Peak pressure", "mm[Hg]", ".0f} mmHg", (20.0, 320.0), (8.0, 150.0))
END_DIASTOLIC_PRESSURE = _range("edp", "edp_mmhg", "EDP", "End-diastolic pressure", "mm[Hg]", ".1f} mmHg", (-15.0, 60.0), (-10.0, 60.0))
END_DIASTOLIC_VOLUME = _range("edv", "edv_ml", "EDV", "End-diastolic volume", "mL", ".0f} mL", (10.0, 600.0))
STROKE_VOLUME = _range("stroke-volume", "sv_ml", "SV", "Stroke volume", "mL", ".1f} mL", (2.0, 250.0))
EJECTION_FRACTION = _range("ejection-fraction", "ef", "EF", "Ejection fraction", "1", ".2f}", (0.03, 0.95))
STEEPEST_RISE = _range(
    "dpdt-max", "dpdt_max_mmhg_per_s", "dPdt_max", "Largest dP/dt", "mm[Hg]/s", ".0f} mmHg/s", (200.0, 6000.0), (80.0, 1500.0)
)
STROKE_WORK = _range("stroke-work", "sw_mmhg_ml", "SW", "Stroke work", "mm[Hg].mL", ".0f} mmHg mL", (100.0, 30000.0), (20.0, 10000.0))
