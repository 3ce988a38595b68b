"""Runs recorded in memory, with their truth beside them."""

from __future__ import annotations

import functools
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np

from flows.sources.simulated.catheter import Catheter, Signals, record
from flows.sources.simulated.circulation import Solution, solve
from flows.sources.simulated.heart import Heart, heart_named
from flows.sources.simulated.rhythm import Conditions, Occlusion
from flows.sources.simulated.truth import RunTruth, run_truth

NOISELESS = Catheter()
ORDINARY = Catheter(pressure_noise_mmhg=0.4, volume_noise_ml=0.5, ecg_noise_mv=0.015)

REST_AND_RAMP: Mapping[str, Conditions] = MappingProxyType(
    {"rest": Conditions(duration_s=25.0), "ramp": Conditions(duration_s=18.0, occlusion=Occlusion(onset_s=5.0))}
)
"""A steady run, and one with an occlusion from 5 s on."""


@dataclass(frozen=True, slots=True)
class RecordedRun:
    """One run: what the recorder wrote, and what is true. ``kind`` and ``events`` are in the words of the contract."""

    run: str
    kind: str
    chamber: str
    sampling_rate_hz: float
    signals: Signals
    truth: RunTruth
    events: tuple[tuple[float, str], ...] = ()


def recorded(
    heart: Heart | str,
    runs: Mapping[str, Conditions] = REST_AND_RAMP,
    *,
    catheter: Catheter = ORDINARY,
    rate_hz: float = 250.0,
    seed: int = 0,
) -> dict[str, RecordedRun]:
    """Return the runs of a heart by name, recorded at ``rate_hz``; a run with an occlusion is of kind preload-reduction.

    Raises KeyError for the name of a heart that does not exist.
    """
    subject = heart_named(heart) if isinstance(heart, str) else heart
    return {
        name: recorded_run(subject, name, conditions, catheter=catheter, rate_hz=rate_hz, seed=seed + number)
        for number, (name, conditions) in enumerate(runs.items())
    }


def kind_of(conditions: Conditions) -> str:
    """Return the kind of a run under these conditions, in the word of the contract."""
    if conditions.injection is not None:
        return "saline"
    return "steady" if conditions.occlusion is None else "preload-reduction"


@functools.lru_cache(maxsize=24)
def _solved(heart: Heart, conditions: Conditions, seed: int) -> tuple[Solution, RunTruth]:
    """Return a run solved once, for every catheter, rate and fault of the sensors that looks at it; nobody may write into it."""
    solution = solve(heart, conditions, seed)
    for name in ("pressure_mmhg", "volume_ml", "aortic_pressure_mmhg"):
        getattr(solution, name).setflags(write=False)
    return solution, run_truth(solution)


def recorded_run(
    heart: Heart, run: str, conditions: Conditions, *, catheter: Catheter, rate_hz: float, seed: int, hour: float = 0.0
) -> RecordedRun:
    """Return one run of a heart, beginning ``hour`` hours into the acquisition."""
    solution, truth = _solved(heart, conditions, seed)
    occlusion = conditions.occlusion
    events: tuple[tuple[float, str], ...] = ()
    if occlusion is not None:
        events = ((occlusion.onset_s, "occlusion-on"),)
        if occlusion.deflation_s is not None:
            events += ((occlusion.deflation_s, "occlusion-off"),)
    if conditions.injection is not None:
        events += ((conditions.injection.onset_s, "injection"),)
    return RecordedRun(
        run=run,
        kind=kind_of(conditions),
        chamber=heart.chamber,
        sampling_rate_hz=rate_hz,
        signals=record(solution, catheter, rate_hz, np.random.default_rng([seed, 1]), hour),
        truth=truth,
        events=events,
    )
