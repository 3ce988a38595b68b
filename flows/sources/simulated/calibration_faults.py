"""Faults of what is declared about the sensors: zeros, gains, parallel volume, their age, and the method they are held against.

Each takes a sound acquisition and a severity in the unit of its ladder, and leaves the sound one alone.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from datetime import datetime, timedelta

from flows.sources.simulated.acquisition import PRESSURE, VOLUME, Acquisition, Facts, made
from flows.sources.simulated.declared import declared_run
from flows.sources.simulated.faults import Expected, Injected, scaled, with_columns, with_facts
from flows.sources.simulated.forms import as_conductance

AGED_GAIN = 0.3
AGEING_HOURS = 24.0
"""How far the gain of an old calibration ends up off, and how fast; house choices."""


def volume_facts(change: Callable[[Facts], None]) -> Callable[[Facts], None]:
    """Return a change of the manifest that changes the acquisition's volume calibration."""
    return lambda manifest: change(manifest["calibration"]["volume"])


def offset_shown(acquisition: Acquisition, mmhg: float) -> Injected:
    """Let the pressure read ``mmhg`` too high throughout, as every zero reading shows. Made anew."""
    catheter = replace(acquisition.recipe.catheter, zero_error_mmhg=acquisition.recipe.catheter.zero_error_mmhg + mmhg)
    return Injected(made(replace(acquisition.recipe, catheter=catheter)), (Expected("pressure-zero"),))


def rezeroed(acquisition: Acquisition, mmhg: float) -> Injected:
    """Let the pressure read ``mmhg`` too high until it is zeroed again between the first run and the others, and say so."""

    def change(manifest: Facts) -> None:
        for run in manifest["runs"][1:2]:
            run.setdefault("events", []).insert(0, {"at_s": 0.0, "kind": "re-zero"})

    return Injected(with_facts(_raised_before(acquisition, mmhg), change), (Expected("zero-drift"),))


def rezeroed_silently(acquisition: Acquisition, mmhg: float) -> Injected:
    """Let the pressure read ``mmhg`` too high until it is zeroed again between the first run and the others, and say nothing."""
    return Injected(_raised_before(acquisition, mmhg), (Expected("zero-drift"),))


def _raised_before(acquisition: Acquisition, mmhg: float) -> Acquisition:
    first = acquisition.manifest["runs"][0]["run"]
    shown = mmhg * acquisition.recipe.catheter.pressure_gain
    broken = with_columns(acquisition, first, {PRESSURE: acquisition.columns[first][PRESSURE] + shown})

    def change(manifest: Facts) -> None:
        manifest["calibration"]["pressure"]["zero_before"]["mmhg"] += shown

    return with_facts(broken, change)


def points_missing(acquisition: Acquisition, excess: float) -> Injected:
    """Let the pressure sensor show ``excess`` (a fraction) too much and leave no points that would tell, unless an aortic one does."""

    def change(manifest: Facts) -> None:
        manifest["calibration"]["pressure"].pop("points")

    return Injected(with_facts(scaled(acquisition, PRESSURE, 1.0 + excess), change), (Expected("pressure-points"),))


def pressure_bent(acquisition: Acquisition, mmhg: float) -> Injected:
    """Let the sensor show ``mmhg`` too much at 50 mmHg and none at 0 and 100, as its points say."""
    gain, shift = acquisition.recipe.catheter.pressure_gain, acquisition.recipe.catheter.pressure_shift_mmhg

    def excess(applied: float) -> float:
        return mmhg * 4.0 * (applied / 100.0) * (1.0 - applied / 100.0)

    for run, columns in acquisition.columns.items():
        applied = (columns[PRESSURE] - shift) / gain
        acquisition = with_columns(
            acquisition, run, {PRESSURE: columns[PRESSURE] + mmhg * 4.0 * (applied / 100.0) * (1.0 - applied / 100.0)}
        )

    def change(manifest: Facts) -> None:
        points = [{"applied_mmhg": at, "read_mmhg": round(gain * at + shift + excess(at), 2)} for at in (0.0, 25.0, 50.0, 75.0, 100.0)]
        manifest["calibration"]["pressure"]["points"] = points

    return Injected(with_facts(acquisition, change), (Expected("pressure-linearity"),))


def alpha_wrong(acquisition: Acquisition, excess: float) -> Injected:
    """Declare a gain ``excess`` (a fraction) above the true one: volumes come out too small, against the reference."""

    def change(volume: Facts) -> None:
        volume["alpha"] = round(volume["alpha"] * (1.0 + excess), 4)

    return Injected(with_facts(acquisition, volume_facts(change)), (Expected("reference-stroke-volume"), Expected("alpha-plausible")))


def alpha_vc_wrong(acquisition: Acquisition, ml: float) -> Injected:
    """Declare a parallel volume ``ml`` too large: volumes come out too small, against reference and saline runs."""

    def change(volume: Facts) -> None:
        volume["alpha_vc_ml"] = round(volume["alpha_vc_ml"] + ml, 2)

    return Injected(with_facts(acquisition, volume_facts(change)), (Expected("reference-volumes"), Expected("saline-agreement")))


def alpha_vc_sign_wrong(acquisition: Acquisition, share: float) -> Injected:
    """Declare the parallel volume times ``1 - 2 share``: at 1 it has the wrong sign."""

    def change(volume: Facts) -> None:
        volume["alpha_vc_ml"] = round(volume["alpha_vc_ml"] * (1.0 - 2.0 * share), 2)

    expected = (Expected("reference-volumes"), Expected("saline-agreement"), Expected("alpha-vc-plausible"))
    return Injected(with_facts(acquisition, volume_facts(change)), expected)


def alpha_vc_small(acquisition: Acquisition, share: float) -> Injected:
    """Declare a parallel volume too small by a ``share`` of it: at 1 there is none."""

    def change(volume: Facts) -> None:
        volume["alpha_vc_ml"] = round(volume["alpha_vc_ml"] * (1.0 - share), 2)

    expected = (Expected("reference-volumes"), Expected("saline-agreement"), Expected("alpha-vc-plausible"))
    return Injected(with_facts(acquisition, volume_facts(change)), expected)


def calibration_stale(acquisition: Acquisition, hours: float) -> Injected:
    """Let the volume calibration be ``hours`` older than it was, and the gain have changed since: by 0.3 in the long run."""
    grown = AGED_GAIN * (1.0 - math.exp(-hours / AGEING_HOURS))
    shift = acquisition.recipe.catheter.volume_shift_ml
    broken = scaled(acquisition, VOLUME, 1.0 + grown, -grown * shift)

    def change(volume: Facts) -> None:
        volume["at"] = (datetime.fromisoformat(volume["at"]) - timedelta(hours=hours)).isoformat()

    return Injected(with_facts(broken, volume_facts(change)), (Expected("calibration-age"),))


def calibration_stale_without_saline(acquisition: Acquisition, hours: float) -> Injected:
    """Let the calibration be ``hours`` older, its parallel volume have grown with the gain, and no saline run tell. Made anew."""
    grown = AGED_GAIN * (1.0 - math.exp(-hours / AGEING_HOURS))
    recipe = acquisition.recipe
    bare = made(replace(recipe, runs=tuple(plan for plan in recipe.runs if plan.conditions.injection is None)))

    def change(volume: Facts) -> None:
        volume["at"] = (datetime.fromisoformat(volume["at"]) - timedelta(hours=hours)).isoformat()

    broken = with_facts(scaled(bare, VOLUME, 1.0 + grown), volume_facts(change))
    return Injected(broken, (Expected("calibration-age"), Expected("parallel-volume-age")))


def saline_disagrees(acquisition: Acquisition, ml: float) -> Injected:
    """Let the saline runs have been recorded with ``ml`` more parallel volume than is declared; the other runs are as declared."""
    for run in saline_runs(acquisition):
        acquisition = with_columns(acquisition, run, {VOLUME: acquisition.columns[run][VOLUME] + ml})
    return Injected(acquisition, (Expected("saline-agreement"),))


def reference_gain_wrong(acquisition: Acquisition, excess: float) -> Injected:
    """Let the other method have measured all volumes ``excess`` (a fraction) too large; the catheter is right."""

    def change(volume: Facts) -> None:
        reference = volume["reference"]
        reference |= {name: round(reference[name] * (1.0 + excess), 1) for name in ("edv_ml", "esv_ml", "sv_ml")}

    return Injected(with_facts(acquisition, volume_facts(change)), (Expected("reference-stroke-volume"),))


def reference_offset_wrong(acquisition: Acquisition, ml: float) -> Injected:
    """Let the other method have measured both volumes ``ml`` too large; the catheter is right."""

    def change(volume: Facts) -> None:
        reference = volume["reference"]
        reference |= {name: round(reference[name] + ml, 1) for name in ("edv_ml", "esv_ml")}

    return Injected(with_facts(acquisition, volume_facts(change)), (Expected("reference-volumes"),))


def resistivity_wrong(acquisition: Acquisition, excess: float) -> Injected:
    """Send conductances, and declare a resistivity of the blood ``excess`` (a fraction) too high: a factor and a shift in one."""
    broken = as_conductance(acquisition)

    def change(manifest: Facts) -> None:
        sensor = manifest["sensors"]["volume"]
        sensor["blood_resistivity_ohm_cm"] = round(sensor["blood_resistivity_ohm_cm"] * (1.0 + excess), 2)

    return Injected(with_facts(broken, change), (Expected("reference-stroke-volume"), Expected("reference-volumes")))


def saline_runs(acquisition: Acquisition) -> list[str]:
    """Return the names of the runs declared to be saline injections."""
    return [run for run in acquisition.columns if declared_run(acquisition.manifest, run)["kind"] == "saline"]
