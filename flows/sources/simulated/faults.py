"""Faults of calibration, protocol and clocks, each with a severity; `signal_faults` holds those inside the signals.

A fault takes an acquisition and a severity and returns the acquisition that has it, with what is truly touched. Faults that make
the acquisition anew from its recipe (said in their docstring) undo faults that were put in before them, so they come first.
"""

from __future__ import annotations

import copy
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace

import numpy as np
from scipy.signal import bilinear, lfilter

from flows.sources.simulated.acquisition import PRESSURE, TIME, VOLUME, ZERO_AFTER_HOUR, Acquisition, Facts, made
from flows.sources.simulated.activation import FloatArray

PREMATURE_AT_S = (8.0, 16.0)


@dataclass(frozen=True, slots=True)
class Expected:
    """What a check should find: its name, the run (None: the acquisition), and an instant inside each beat truly touched."""

    check: str
    run: str | None = None
    instants_s: tuple[float, ...] = ()


@dataclass(frozen=True, slots=True)
class Injected:
    """An acquisition with a fault in it, and what should be found.

    ``other`` is the acquisition whose signals were sent, where they are not this one's; ``pressure_late_s`` how late the pressure is
    beyond what is declared. Where the heart itself was in another state than declared, and its indices are what was measured, its
    ``truth_is_its_own``.
    """

    acquisition: Acquisition
    expected: tuple[Expected, ...]
    other: Acquisition | None = None
    pressure_late_s: float = 0.0
    truth_is_its_own: bool = False


Fault = Callable[[Acquisition, float], Injected]


def with_facts(acquisition: Acquisition, change: Callable[[Facts], None]) -> Acquisition:
    """Return the acquisition with its manifest changed; the one given is left as it is."""
    manifest = copy.deepcopy(acquisition.manifest)
    change(manifest)
    return replace(acquisition, manifest=manifest)


def with_columns(acquisition: Acquisition, run: str, columns: Mapping[str, FloatArray]) -> Acquisition:
    """Return the acquisition with these columns of a run replaced."""
    return replace(acquisition, columns={**acquisition.columns, run: {**acquisition.columns[run], **columns}})


def scaled(acquisition: Acquisition, column: str, gain: float, shift: float = 0.0) -> Acquisition:
    """Return the acquisition with a column of every run multiplied by ``gain`` and moved by ``shift``."""
    for run, columns in acquisition.columns.items():
        acquisition = with_columns(acquisition, run, {column: columns[column] * gain + shift})
    return acquisition


def zero_drift(acquisition: Acquisition, mmhg: float) -> Injected:
    """Move the pressure zero by ``mmhg`` between its two readings, which both show it. Made anew."""
    catheter = replace(acquisition.recipe.catheter, drift_mmhg_per_hour=mmhg / ZERO_AFTER_HOUR)
    return Injected(made(replace(acquisition.recipe, catheter=catheter)), (Expected("zero-drift"),))


def zero_missing(acquisition: Acquisition, mmhg: float) -> Injected:
    """Raise the pressure by ``mmhg`` and leave no zero reading that would tell."""

    def change(manifest: Facts) -> None:
        for name in ("zero_before", "zero_after", "zero_sd_mmhg"):
            manifest["calibration"]["pressure"].pop(name)

    return Injected(with_facts(scaled(acquisition, PRESSURE, 1.0, mmhg), change), (Expected("pressure-zero"),))


def gain_shown(acquisition: Acquisition, excess: float) -> Injected:
    """Let the pressure sensor show ``excess`` (a fraction) too much, as its two points say. Made anew."""
    catheter = replace(acquisition.recipe.catheter, pressure_gain=1.0 + excess)
    return Injected(made(replace(acquisition.recipe, catheter=catheter)), (Expected("pressure-gain"),))


def volume_gain_wrong(acquisition: Acquisition, excess: float) -> Injected:
    """Enlarge all volumes by ``excess`` (a fraction): the stroke volume contradicts the reference."""
    return Injected(scaled(acquisition, VOLUME, 1.0 + excess), (Expected("reference-stroke-volume"),))


def parallel_volume_wrong(acquisition: Acquisition, ml: float) -> Injected:
    """Raise all volumes by ``ml``: the volumes contradict the reference, the stroke volume does not."""
    return Injected(scaled(acquisition, VOLUME, 1.0, ml), (Expected("reference-volumes"),))


def alpha_missing(acquisition: Acquisition, alpha: float) -> Injected:
    """Write the volume raw (gain ``alpha``) and declare no gain. Made anew."""
    return Injected(_raw(acquisition, alpha, "alpha"), (Expected("volume-gain-known"),))


def alpha_vc_missing(acquisition: Acquisition, alpha: float) -> Injected:
    """Write the volume raw (gain ``alpha``) and declare no parallel volume. Made anew."""
    return Injected(_raw(acquisition, alpha, "alpha_vc_ml"), (Expected("volume-offset-known"),))


def _raw(acquisition: Acquisition, alpha: float, missing: str) -> Acquisition:
    catheter = replace(acquisition.recipe.catheter, volume_gain=alpha, volume_shift_ml=40.0)
    raw = made(replace(acquisition.recipe, catheter=catheter, raw_volume=True, reference=None))

    def change(manifest: Facts) -> None:
        for name in (missing, missing.replace("_ml", "") + ("_sd_ml" if missing.endswith("_ml") else "_sd")):
            manifest["calibration"]["volume"].pop(name)

    return with_facts(raw, change)


def fluid_filled(acquisition: Acquisition, natural_hz: float) -> Injected:
    """Lead the pressure through a fluid-filled line that rings at ``natural_hz`` with a damping of 0.2.

    The second-order response of catheter-manometer systems; common practice, no source.
    """
    omega = 2.0 * np.pi * natural_hz
    for run, columns in acquisition.columns.items():
        top, bottom = bilinear([omega**2], [1.0, 0.4 * omega, omega**2], fs=acquisition.recipe.rate_hz)
        # The line was filled before the run began: an odd continuation backwards keeps it from starting at rest.
        pressure = columns[PRESSURE]
        before = 2.0 * pressure[0] - pressure[round(0.5 * acquisition.recipe.rate_hz) : 0 : -1]
        led = lfilter(top, bottom, np.concatenate([before, pressure]) - before[0]) + before[0]
        acquisition = with_columns(acquisition, run, {PRESSURE: led[before.size :]})

    def change(manifest: Facts) -> None:
        manifest["sensors"]["pressure"]["kind"] = "fluid-filled"

    return Injected(with_facts(acquisition, change), (Expected("pressure-sensor"),))


def ramp_missing(acquisition: Acquisition, _severity: float = 1.0) -> Injected:
    """Record no preload-reduction run, though the visit requires one. Made anew."""
    runs = tuple(plan for plan in acquisition.recipe.runs if plan.conditions.occlusion is None)
    return Injected(made(replace(acquisition.recipe, runs=runs)), (Expected("required-runs"),))


def occlusion_shallow(acquisition: Acquisition, floor: float) -> Injected:
    """Let the occlusion leave ``floor`` (a fraction) of the filling pressure. Made anew."""
    run = acquisition.run_of_kind("preload-reduction")
    plans = []
    for plan in acquisition.recipe.runs:
        occlusion = plan.conditions.occlusion
        shallow = (
            plan if occlusion is None else replace(plan, conditions=replace(plan.conditions, occlusion=replace(occlusion, floor=floor)))
        )
        plans.append(shallow)
    return Injected(made(replace(acquisition.recipe, runs=tuple(plans))), (Expected("preload-adequacy", run),))


def premature_beats(acquisition: Acquisition, coupling: float) -> Injected:
    """Put two beats of the first steady run at ``coupling`` of the cycle length, each followed by a pause. Made anew."""
    run = acquisition.run_of_kind("steady")
    plans = tuple(
        replace(plan, conditions=replace(plan.conditions, premature_s=PREMATURE_AT_S, coupling=coupling)) if plan.run == run else plan
        for plan in acquisition.recipe.runs
    )
    broken = made(replace(acquisition.recipe, runs=plans))
    beats = broken.truth[run].beats
    early = np.flatnonzero(beats.premature)
    after = early[early + 1 < len(beats)] + 1
    middle = beats.middle_s
    return Injected(
        broken,
        (Expected("cycle-length", run, tuple(middle[early].tolist())), Expected("post-premature", run, tuple(middle[after].tolist()))),
    )


def rate_misdeclared(acquisition: Acquisition, factor: float) -> Injected:
    """Declare every run at ``factor`` times its rate; its time stamps say otherwise."""
    return Injected(_declared_rate(acquisition, factor), tuple(Expected("sampling-rate", run) for run in acquisition.columns))


def clock_misdeclared(acquisition: Acquisition, factor: float) -> Injected:
    """Declare every run at ``factor`` times its rate, without time stamps: only clock and heart rate contradict it."""
    broken = _declared_rate(acquisition, factor)
    for run, columns in broken.columns.items():
        broken = replace(broken, columns={**broken.columns, run: {name: values for name, values in columns.items() if name != TIME}})

    def change(manifest: Facts) -> None:
        for run in manifest["runs"]:
            run["channels"].pop("time", None)

    runs = tuple(broken.columns)
    expected = tuple(Expected(check, run) for run in runs for check in ("duration", "heart-rate-agreement", "clock-agreement"))
    return Injected(with_facts(broken, change), expected)


def _declared_rate(acquisition: Acquisition, factor: float) -> Acquisition:
    def change(manifest: Facts) -> None:
        for run in manifest["runs"]:
            run["sampling_rate_hz"] = run["sampling_rate_hz"] * factor

    return with_facts(acquisition, change)


def heart_rate_misdeclared(acquisition: Acquisition, factor: float) -> Injected:
    """Declare ``factor`` times the true heart rate for every run."""

    def change(manifest: Facts) -> None:
        for run in manifest["runs"]:
            run["heart_rate_per_min"] = round(run["heart_rate_per_min"] * factor)

    runs = tuple(acquisition.columns)
    return Injected(with_facts(acquisition, change), tuple(Expected("heart-rate-agreement", run) for run in runs))


def column_misnamed(acquisition: Acquisition, _severity: float = 1.0) -> Injected:
    """Declare the first steady run's pressure under a column that its file does not hold."""
    run = acquisition.run_of_kind("steady")

    def change(manifest: Facts) -> None:
        for declared in manifest["runs"]:
            if declared["run"] == run:
                declared["channels"]["pressure"]["column"] = PRESSURE[::-1]

    return Injected(with_facts(acquisition, change), (Expected("readable", run),))
