"""Faults of what the heart did while it was recorded: not steady, not in the rhythm declared, not held, not let down far enough.

All make the acquisition anew from its recipe; what is declared stays as it was.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

from flows.sources.simulated.acquisition import Acquisition, Facts, made
from flows.sources.simulated.declared import declared_run
from flows.sources.simulated.faults import Expected, Injected, with_facts
from flows.sources.simulated.recorded import kind_of
from flows.sources.simulated.rhythm import Breathing, Conditions, Occlusion

REFLEX_FORCE_SHARE = 0.6
"""How much of the reflex goes into force, as a share of what goes into rate; a house choice."""

Change = Callable[[Conditions], Conditions]


def respiration_undeclared(acquisition: Acquisition, depth: float) -> Injected:
    """Let the patient breathe through the steady runs, swinging the filling pressure by ``depth``, where the breath is declared held."""
    change: Change = lambda now: replace(now, breathing=Breathing(depth=depth, sinus_depth=0.25 * depth))  # noqa: E731  (typed)
    return replace(_under(acquisition, "steady", change, "respiration-as-declared"), truth_is_its_own=True)


def rhythm_undeclared(acquisition: Acquisition, irregularity: float) -> Injected:
    """Let the atria fibrillate, cycles spread by ``irregularity``, where sinus rhythm is declared."""
    change: Change = lambda now: replace(now, fibrillating=True, irregularity=irregularity)  # noqa: E731  (typed)
    broken = _under(acquisition, None, change, "rhythm-as-declared")

    def declare(manifest: Facts) -> None:
        manifest["rhythm"] = acquisition.manifest["rhythm"]

    return replace(broken, acquisition=with_facts(broken.acquisition, declare), truth_is_its_own=True)


def steady_ramping(acquisition: Acquisition, per_s: float) -> Injected:
    """Let the filling pressure fall by the fraction ``per_s`` each second of the runs called steady."""
    return _under(acquisition, "steady", lambda now: replace(now, filling_trend_per_s=-per_s), "steadiness")


def occlusion_too_shallow(acquisition: Acquisition, floor: float) -> Injected:
    """Let every occlusion leave ``floor`` (a fraction) of the filling pressure."""
    return _under(acquisition, "preload-reduction", _occlusion(lambda one: replace(one, floor=floor)), "preload-adequacy")


def occlusion_recorded_late(acquisition: Acquisition, seconds: float) -> Injected:
    """Begin to record ``seconds`` later: more and more of the occlusion is over, until only the deflation is left."""

    def later(one: Occlusion) -> Occlusion:
        deflation_s = None if one.deflation_s is None else one.deflation_s - seconds
        return replace(one, onset_s=one.onset_s - seconds, deflation_s=deflation_s)

    broken = _under(acquisition, "preload-reduction", _occlusion(later), "preload-adequacy")

    def declare(manifest: Facts) -> None:
        for run in manifest["runs"]:
            if "events" in run:
                run["events"] = [event for event in run["events"] if event["at_s"] >= 0.0]

    return replace(broken, acquisition=with_facts(broken.acquisition, declare))


def reflex(acquisition: Acquisition, share: float) -> Injected:
    """Let the heart answer every occlusion from the third second on: faster by ``share`` and stronger by a part of it."""
    force = REFLEX_FORCE_SHARE * share
    change = _occlusion(lambda one: replace(one, reflex=share, reflex_force=force, reflex_delay_s=2.0))
    return _under(acquisition, "preload-reduction", change, "preload-adequacy")


def _occlusion(change: Callable[[Occlusion], Occlusion]) -> Change:
    return lambda now: now if now.occlusion is None else replace(now, occlusion=change(now.occlusion))


def _under(acquisition: Acquisition, kind: str | None, change: Change, check: str) -> Injected:
    """Return the acquisition with the conditions of the runs of that kind changed (None: all), respiration declared as before."""
    recipe = acquisition.recipe
    reached = {plan.run for plan in recipe.runs if kind in {None, kind_of(plan.conditions)}}
    plans = tuple(replace(plan, conditions=change(plan.conditions)) if plan.run in reached else plan for plan in recipe.runs)
    broken = made(replace(recipe, runs=plans))

    def declare(manifest: Facts) -> None:
        for run in manifest["runs"]:
            run["respiration"] = declared_run(acquisition.manifest, run["run"])["respiration"]

    return Injected(with_facts(broken, declare), tuple(Expected(check, run) for run in broken.columns if run in reached))
