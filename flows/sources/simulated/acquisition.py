"""A whole acquisition from a recipe: runs of a heart through catheters, and what the site would declare about them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from datetime import datetime, timedelta
from typing import Any

import numpy as np

from flows.sources.simulated.activation import FloatArray
from flows.sources.simulated.catheter import Catheter
from flows.sources.simulated.heart import Heart
from flows.sources.simulated.recorded import ORDINARY, RecordedRun, recorded_run
from flows.sources.simulated.rhythm import Conditions, Occlusion
from flows.sources.simulated.truth import RunTruth

Facts = dict[str, Any]
"""A table of acquisition.json as it will be written: texts, numbers, lists and tables."""

TIME, PRESSURE, VOLUME, ECG, AORTA = "t_s", "p_ventricle", "v_ventricle", "ecg", "p_aorta"
DECIMALS = {TIME: 4, PRESSURE: 2, VOLUME: 2, ECG: 3, AORTA: 2}

RECORDING_HOUR = 0.35
ZERO_AFTER_HOUR = 1.25
"""Hour 0 is the zero reading before; recording begins at `RECORDING_HOUR`, the zero is read again at `ZERO_AFTER_HOUR`."""


@dataclass(frozen=True, slots=True)
class Identity:
    """Whose acquisition this is; ``recorded_at`` carries the offset of the site's clock."""

    study: str
    site: str
    subject: str
    visit: str
    acquisition: str
    recorded_at: datetime


@dataclass(frozen=True, slots=True)
class RunPlan:
    """One run to be recorded ``hour`` hours after the first zero; ``heart`` where a stage has another than the acquisition's."""

    run: str
    conditions: Conditions
    hour: float
    stage: str = "baseline"
    heart: Heart | None = None


@dataclass(frozen=True, slots=True)
class Recipe:
    """Everything an acquisition follows from; the same recipe makes the same acquisition.

    ``raw_volume`` writes the volume before its calibration and declares gain and parallel volume; ``reference`` names the method
    that measured volumes beside it, None where there was none; ``with_time`` writes a column of time stamps. ``points_mmhg`` are the
    pressures applied to calibrate the sensor; ``with_aorta`` records the pressure behind the outlet valve with another sensor.
    """

    identity: Identity
    heart: Heart
    runs: tuple[RunPlan, ...]
    catheter: Catheter = ORDINARY
    rate_hz: float = 250.0
    seed: int = 0
    raw_volume: bool = False
    with_ecg: bool = True
    with_time: bool = True
    reference: str | None = "CMR"
    bsa_m2: float | None = 1.9
    points_mmhg: tuple[int, ...] = (0, 100)
    with_aorta: bool = False


@dataclass(frozen=True, slots=True)
class Acquisition:
    """A recorded acquisition: ``manifest`` as declared, ``columns`` of each run's file by name, and the truth of each run."""

    recipe: Recipe
    manifest: Facts
    columns: Mapping[str, Mapping[str, FloatArray]]
    truth: Mapping[str, RunTruth]

    def run_of_kind(self, kind: str) -> str:
        """Return the name of the first run of that kind.

        Raises LookupError when there is none.
        """
        for run in self.manifest["runs"]:
            if run["kind"] == kind:
                return str(run["run"])
        message = f"no run of kind {kind}"
        raise LookupError(message)


def rest_and_ramp(stage: str = "baseline", hour: float = RECORDING_HOUR, heart: Heart | None = None) -> tuple[RunPlan, RunPlan]:
    """Return the plan of a steady run and an occlusion a few minutes later, both of one stage."""
    rest = RunPlan(f"{stage}-rest", Conditions(duration_s=24.0), hour, stage, heart)
    occlusion = Occlusion(onset_s=4.0, deflation_s=14.0)
    return rest, RunPlan(f"{stage}-ramp", Conditions(duration_s=17.0, occlusion=occlusion), hour + 0.08, stage, heart)


def made(recipe: Recipe) -> Acquisition:
    """Return the acquisition of a recipe."""
    runs = {
        plan.run: recorded_run(
            plan.heart or recipe.heart,
            plan.run,
            plan.conditions,
            catheter=recipe.catheter,
            rate_hz=recipe.rate_hz,
            seed=recipe.seed + number,
            hour=plan.hour,
        )
        for number, plan in enumerate(recipe.runs)
    }
    truth = {name: run.truth for name, run in runs.items()}
    columns = {name: _columns(run, recipe) for name, run in runs.items()}
    return Acquisition(recipe, _manifest(recipe, runs), columns, truth)


def remade(acquisition: Acquisition, **changes: Any) -> Acquisition:  # noqa: ANN401  (the fields of a recipe have no common type)
    """Return the acquisition made anew from its recipe with these fields changed."""
    return made(replace(acquisition.recipe, **changes))


def _columns(run: RecordedRun, recipe: Recipe) -> dict[str, FloatArray]:
    signals = run.signals
    columns = {TIME: signals.time_s} if recipe.with_time else {}
    columns |= {PRESSURE: signals.pressure_mmhg, VOLUME: signals.volume_ml}
    columns |= {ECG: signals.ecg_mv} if recipe.with_ecg else {}
    return columns | ({AORTA: signals.aortic_pressure_mmhg} if recipe.with_aorta else {})


def _at(recipe: Recipe, hour: float) -> str:
    """Return the clock at an hour after the first zero, as a site writes it."""
    clock = recipe.identity.recorded_at + timedelta(milliseconds=round(3.6e6 * (hour - RECORDING_HOUR)))
    return clock.isoformat(timespec="milliseconds" if clock.microsecond else "seconds")


def _manifest(recipe: Recipe, runs: Mapping[str, RecordedRun]) -> Facts:
    identity = recipe.identity
    fibrillating = any(plan.conditions.fibrillating for plan in recipe.runs)
    return {
        "format": 1,
        "study": identity.study,
        "site": identity.site,
        "subject": identity.subject,
        "visit": identity.visit,
        "acquisition": identity.acquisition,
        "recorded_at": identity.recorded_at.isoformat(timespec="seconds"),
        "chamber": recipe.heart.chamber,
        "rhythm": "atrial-fibrillation" if fibrillating else "sinus",
        "subject_facts": _subject_facts(recipe),
        "sensors": {"pressure": {"kind": "tip-manometer"}, "volume": {"kind": "conductance"}},
        "calibration": {"pressure": _pressure_calibration(recipe), "volume": _volume_calibration(recipe, runs)},
        "runs": [_run_facts(recipe, plan, runs[plan.run]) for plan in recipe.runs],
    }


def _subject_facts(recipe: Recipe) -> Facts:
    facts: Facts = {} if recipe.bsa_m2 is None else {"bsa_m2": recipe.bsa_m2}
    return facts | ({"conditions": list(recipe.heart.conditions)} if recipe.heart.conditions else {})


def _pressure_calibration(recipe: Recipe) -> Facts:
    catheter = recipe.catheter
    line = replace(catheter, zero_error_mmhg=0.0, drift_mmhg_per_hour=0.0)
    return {
        "zero_before": {"at": _at(recipe, 0.0), "mmhg": round(catheter.zero_shown_mmhg(0.0), 2)},
        "zero_after": {"at": _at(recipe, ZERO_AFTER_HOUR), "mmhg": round(catheter.zero_shown_mmhg(ZERO_AFTER_HOUR), 2)},
        "zero_sd_mmhg": 0.3,
        "points": [
            {"applied_mmhg": applied, "read_mmhg": round(line.pressure_shown_mmhg(float(applied), 0.0), 2)}
            for applied in recipe.points_mmhg
        ],
    }


def _volume_calibration(recipe: Recipe, runs: Mapping[str, RecordedRun]) -> Facts:
    catheter = recipe.catheter
    facts: Facts = {"method": "saline", "at": _at(recipe, 0.15)} if recipe.raw_volume else {}
    if recipe.raw_volume:
        facts |= {"alpha": catheter.volume_gain, "alpha_sd": 0.02, "alpha_vc_ml": catheter.volume_shift_ml, "alpha_vc_sd_ml": 2.0}
    steady = next((run for run in runs.values() if run.kind == "steady"), None)
    if recipe.reference is not None and steady is not None:
        # Another method reads the same heart with an error of its own, about 2 % of each volume.
        error = 1.0 + 0.015 * np.clip(np.random.default_rng([recipe.seed, 7]).standard_normal(2), -1.5, 1.5)
        edv, esv = round(steady.truth.edv_ml * float(error[0]), 1), round(steady.truth.esv_ml * float(error[1]), 1)
        facts["reference"] = {"source": recipe.reference, "edv_ml": edv, "esv_ml": esv, "sv_ml": round(edv - esv, 1), "sv_sd_ml": 4.0}
    return facts


def _run_facts(recipe: Recipe, plan: RunPlan, run: RecordedRun) -> Facts:
    facts: Facts = {
        "run": plan.run,
        "kind": run.kind,
        "stage": plan.stage,
        "file": f"{plan.run}.csv",
        "sampling_rate_hz": recipe.rate_hz,
        "started_at": _at(recipe, plan.hour),
        "ended_at": _at(recipe, plan.hour + plan.conditions.duration_s / 3600.0),
        "heart_rate_per_min": round(60.0 / float(np.mean(run.truth.beats.rr_s))),
        "respiration": "held" if plan.conditions.breathing is None else "free",
        "channels": _channels(recipe),
    }
    if run.kind == "preload-reduction":
        facts["manoeuvre"] = "caval-balloon"
    if run.events:
        facts["events"] = [{"at_s": at_s, "kind": kind} for at_s, kind in run.events]
    return facts


def _channels(recipe: Recipe) -> Facts:
    catheter = recipe.catheter
    volume: Facts = {"column": VOLUME, "unit": "mL", "calibrated": not recipe.raw_volume}
    if catheter.volume_delay_s:
        volume["delay_ms"] = round(1000.0 * catheter.volume_delay_s, 3)
    pressure: Facts = {"column": PRESSURE, "unit": "mm[Hg]"}
    if catheter.pressure_delay_s:
        pressure["delay_ms"] = round(1000.0 * catheter.pressure_delay_s, 3)
    channels: Facts = {"time": {"column": TIME, "unit": "s"}} if recipe.with_time else {}
    channels |= {"pressure": pressure, "volume": volume}
    channels |= {"ecg": {"column": ECG, "unit": "mV"}} if recipe.with_ecg else {}
    return channels | ({"aortic_pressure": {"column": AORTA, "unit": "mm[Hg]"}} if recipe.with_aorta else {})
