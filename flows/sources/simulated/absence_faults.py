"""Faults of what is not there: occlusions never recorded, columns a file does not hold."""

from __future__ import annotations

import math
from dataclasses import replace

from flows.sources.simulated.acquisition import PRESSURE, Acquisition, Facts, made
from flows.sources.simulated.faults import Expected, Injected, with_facts
from flows.sources.simulated.run_faults import first_runs


def ramps_missing(acquisition: Acquisition, share: float) -> Injected:
    """Record only the first of the occlusions, less ``share`` of them, though the visit requires one. Made anew."""
    recipe = acquisition.recipe
    ramps = [plan for plan in recipe.runs if plan.conditions.occlusion is not None]
    kept = ramps[: len(ramps) - math.floor(share * len(ramps) + 1e-9)]
    runs = tuple(plan for plan in recipe.runs if plan in kept or plan.conditions.occlusion is None)
    return Injected(made(replace(recipe, runs=runs)) if len(kept) < len(ramps) else acquisition, (Expected("required-runs"),))


def columns_misnamed(acquisition: Acquisition, share: float) -> Injected:
    """Declare the pressure of a ``share`` of the runs under a column that their files do not hold."""
    runs = first_runs(acquisition, share)

    def change(manifest: Facts) -> None:
        for declared in manifest["runs"]:
            if declared["run"] in runs:
                declared["channels"]["pressure"]["column"] = PRESSURE[::-1]

    return Injected(with_facts(acquisition, change), tuple(Expected("readable", run) for run in runs))
