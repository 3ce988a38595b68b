"""Indices by body surface area: volumes, stroke volume and output over it, arterial elastance times it.

``EaI = ESP / SVI = Ea x BSA`` (derived): a stiffness falls as a body grows, so it is multiplied where a volume is divided. Common practice,
no source. The area is taken as declared: a manifest carries no uncertainty of it, so none is in the interval.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

from metrics.indices import arterial_elastance, cardiac_output, volumes
from metrics.indices.card import Estimate, Index, Sensitivity, StageBeats, Withheld

Factor = Callable[[float], float]


def over_area(area_m2: float) -> float:
    """Return what a volume is multiplied by, per m2."""
    return 1.0 / area_m2


def times_area(area_m2: float) -> float:
    """Return what an elastance is multiplied by, m2."""
    return area_m2


def _scaled(estimate: Estimate, factor: float) -> Estimate:
    low, high = (None if bound is None else factor * bound for bound in (estimate.fit_low, estimate.fit_high))
    return replace(estimate, value=factor * estimate.value, fit_low=low, fit_high=high)


def _area_m2(stage: StageBeats) -> float:
    if stage.bsa_m2 is None:
        message = "no body surface area is declared"
        raise Withheld(message)
    return stage.bsa_m2


def by_body_surface(index: Index, name: str, title: str, unit: str, factor: Factor) -> Index:
    """Return the card of an index scaled by body surface area; its value is `Withheld` where none is declared."""

    def compute(stage: StageBeats) -> Estimate:
        return _scaled(index.compute(stage), factor(_area_m2(stage)))

    def sensitivity(stage: StageBeats, value: float) -> Sensitivity:
        by = factor(_area_m2(stage))
        whole = index.sensitivity(stage, value / by)
        return Sensitivity(by * whole.pressure_gain, by * whole.pressure_mmhg, by * whole.volume_gain, by * whole.volume_ml)

    return replace(
        index,
        name=name,
        title=title,
        unit=unit,
        compute=compute,
        needs=f"{index.needs}; a declared body surface area",
        sensitivity=sensitivity,
        by_body_surface=True,
    )


END_DIASTOLIC_VOLUME_INDEX = by_body_surface(
    volumes.END_DIASTOLIC_VOLUME, "EDVI", "End-diastolic volume by body surface", "mL/m2", over_area
)
END_SYSTOLIC_VOLUME_INDEX = by_body_surface(volumes.END_SYSTOLIC_VOLUME, "ESVI", "End-systolic volume by body surface", "mL/m2", over_area)
STROKE_VOLUME_INDEX = by_body_surface(volumes.STROKE_VOLUME, "SVI", "Stroke volume by body surface", "mL/m2", over_area)
CARDIAC_INDEX = by_body_surface(cardiac_output.CARDIAC_OUTPUT, "CI", "Cardiac output by body surface", "L/min/m2", over_area)
ARTERIAL_ELASTANCE_INDEX = by_body_surface(
    arterial_elastance.ARTERIAL_ELASTANCE, "EaI", "Effective arterial elastance by body surface", "mm[Hg].m2/mL", times_area
)
