"""Faults of what a signal is the signal of: copied runs, swapped subjects, a rest sent as an occlusion, replicates that differ.

The truth beside the signals is that of what was recorded, so that its instants lie in them; the patient's own truth is the sound
acquisition's.
"""

from __future__ import annotations

import math
from dataclasses import fields, replace
from typing import Any

import numpy as np

from flows.sources.simulated.acquisition import ECG, PRESSURE, TIME, VOLUME, Acquisition, made
from flows.sources.simulated.activation import FloatArray
from flows.sources.simulated.declared import declared_run
from flows.sources.simulated.faults import Expected, Injected, with_columns
from flows.sources.simulated.heart import CLOSED_HEARTS, HEARTS
from flows.sources.simulated.truth import BeatTruth


def run_copied(acquisition: Acquisition, share: float) -> Injected:
    """Send the first ``share`` of the first occlusion once more as the beginning of the second, sample by sample."""
    return _copied(acquisition, share, *_ramps(acquisition)[:2])


def run_copied_with_new_noise(acquisition: Acquisition, share: float) -> Injected:
    """Send the first ``share`` of the first occlusion as the beginning of the second, with noise of its own."""
    return _copied(acquisition, share, *_ramps(acquisition)[:2], noisy=True)


def run_copied_with_new_ecg(acquisition: Acquisition, share: float) -> Injected:
    """Send pressure and volume of the first ``share`` of the first occlusion as the beginning of the second, beside its own ECG."""
    return _copied(acquisition, share, *_ramps(acquisition)[:2], columns=(PRESSURE, VOLUME))


def rest_as_ramp(acquisition: Acquisition, share: float) -> Injected:
    """Send the first ``share`` of the steady run as the beginning of the first occlusion; at 1 nothing of the occlusion is left."""
    source, target = acquisition.run_of_kind("steady"), _ramps(acquisition)[0]
    injected = _copied(acquisition, share, source, target)
    return replace(injected, expected=(*injected.expected, Expected("preload-adequacy", target)))


def _copied(
    acquisition: Acquisition, share: float, source: str, target: str, *, noisy: bool = False, columns: tuple[str, ...] | None = None
) -> Injected:
    own, other = acquisition.columns[target], acquisition.columns[source]
    count = min(round(share * own[PRESSURE].size), other[PRESSURE].size)
    rng, catheter = np.random.default_rng([acquisition.recipe.seed, 23]), acquisition.recipe.catheter
    noise = {PRESSURE: catheter.pressure_noise_mmhg, VOLUME: catheter.volume_noise_ml, ECG: catheter.ecg_noise_mv}
    spliced: dict[str, FloatArray] = {}
    for name in columns or tuple(name for name in own if name != TIME):
        taken = other[name][:count]
        spliced[name] = np.concatenate(
            [taken + noise.get(name, catheter.pressure_noise_mmhg) * rng.standard_normal(count) if noisy else taken, own[name][count:]]
        )
    broken = with_columns(acquisition, target, spliced)
    truths = acquisition.truth
    beats = _joined(truths[source].beats, truths[target].beats, count / acquisition.recipe.rate_hz)
    broken = replace(broken, truth={**truths, target: replace(truths[target], beats=beats)})
    return Injected(broken, (Expected("copied-signal"),))


def _joined(before: BeatTruth, after: BeatTruth, cut_s: float) -> BeatTruth:
    """Return the beats of one run that end before the cut and those of another that begin after it."""
    first, last = before.end_s <= cut_s, after.start_s >= cut_s
    parts: dict[str, Any] = {}
    for field in fields(BeatTruth):
        one, other = getattr(before, field.name), getattr(after, field.name)
        whole = np.concatenate([np.asarray(one)[first], np.asarray(other)[last]])
        parts[field.name] = tuple(whole.tolist()) if isinstance(one, tuple) else whole
    return BeatTruth(**parts)


def subject_swapped(acquisition: Acquisition, share: float) -> Injected:
    """Send the signals of another subject for ``share`` of the runs, the first ones first. Made anew for the other subject."""
    recipe = acquisition.recipe
    own = recipe.heart
    kin = [heart for heart in HEARTS + CLOSED_HEARTS if heart.chamber == own.chamber and (heart.veins is None) == (own.veins is None)]
    names = [heart.name for heart in kin]
    place = names.index(recipe.heart.name) if recipe.heart.name in names else 0
    name = f"{recipe.identity.subject}-other"
    identity = replace(recipe.identity, subject=name, acquisition=f"{name}-{recipe.identity.visit}")
    other = made(replace(recipe, heart=kin[(place + 1) % len(kin)], seed=recipe.seed + 7, identity=identity))
    runs = list(acquisition.columns)
    taken = runs[: math.ceil(share * len(runs) - 1e-9)]
    broken = replace(
        acquisition,
        columns={**acquisition.columns, **{run: other.columns[run] for run in taken}},
        truth={**acquisition.truth, **{run: other.truth[run] for run in taken}},
    )
    return Injected(broken, (Expected("copied-signal"),), other=other)


def replicate_differs(acquisition: Acquisition, excess: float) -> Injected:
    """Let the heart be stronger by ``excess`` (a fraction of Ees) in the last occlusion than in the others. Made anew."""
    recipe, last = acquisition.recipe, _ramps(acquisition)[-1]
    stronger = replace(recipe.heart, ees_mmhg_per_ml=recipe.heart.ees_mmhg_per_ml * (1.0 + excess))
    runs = tuple(replace(plan, heart=stronger) if plan.run == last else plan for plan in recipe.runs)
    return Injected(made(replace(recipe, runs=runs)), (Expected("replicates-agree"),))


def replicate_shifted(acquisition: Acquisition, ml: float) -> Injected:
    """Let the volume read ``ml`` (raw) too much in the last occlusion: the catheter moved, and its V0 with it."""
    last = _ramps(acquisition)[-1]
    moved = with_columns(acquisition, last, {VOLUME: acquisition.columns[last][VOLUME] + ml})
    return Injected(moved, (Expected("replicate-intercepts-agree"), Expected("runs-agree-volume")))


def _ramps(acquisition: Acquisition) -> list[str]:
    """Return the names of the occlusions; raises LookupError without any."""
    ramps = [run for run in acquisition.columns if declared_run(acquisition.manifest, run)["kind"] == "preload-reduction"]
    if not ramps:
        message = "no run of kind preload-reduction"
        raise LookupError(message)
    return ramps
