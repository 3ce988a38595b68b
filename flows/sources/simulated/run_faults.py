"""Faults of channels that last a whole run or more: units, wiring, clocks, lost samples, steps, drift, delay; `noise_faults` has the rest.

Each reaches every run with a heart in steady state or an occlusion, unless it says a ``share`` of the runs. Severities of pressure are
in mmHg and of volume in mL as recorded, before any calibration. Random faults depend on the recipe's seed alone.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable
from dataclasses import replace

import numpy as np

from flows.sources.simulated.acquisition import PRESSURE, TIME, VOLUME, Acquisition, Facts
from flows.sources.simulated.activation import FloatArray
from flows.sources.simulated.declared import declared_run
from flows.sources.simulated.faults import Expected, Injected, with_columns, with_facts
from flows.sources.simulated.forms import as_segments

KPA_PER_MMHG = 0.133322387415
CMH2O_PER_MMHG = KPA_PER_MMHG / 0.0980665
OFTEN_S = 3.0
"""How often a burst or a dropout comes."""

Change = Callable[[str, FloatArray], FloatArray]


def heart_runs(acquisition: Acquisition) -> list[str]:
    """Return the runs that indices come from: all but saline injections."""
    return [run for run in acquisition.columns if declared_run(acquisition.manifest, run)["kind"] != "saline"]


def changed(acquisition: Acquisition, column: str, change: Change, runs: Iterable[str] | None = None) -> Acquisition:
    """Return the acquisition with ``change(run, samples)`` for a column of these runs, by default those of the heart."""
    for run in heart_runs(acquisition) if runs is None else runs:
        acquisition = with_columns(acquisition, run, {column: change(run, acquisition.columns[run][column])})
    return acquisition


def injected(sound: Acquisition, column: str, change: Change, check: str) -> Injected:
    """Return a fault of one column in every run of the heart."""
    return Injected(changed(sound, column, change), tuple(Expected(check, run) for run in heart_runs(sound)))


def first_runs(acquisition: Acquisition, share: float) -> list[str]:
    """Return the first ``share`` of the runs of the heart, rounded up."""
    runs = heart_runs(acquisition)
    return runs[: math.ceil(share * len(runs) - 1e-9)]


def in_some(sound: Acquisition, share: float, column: str, change: Change, check: str) -> Injected:
    """Return a fault of one column in the first ``share`` of the heart's runs."""
    runs = first_runs(sound, share)
    return Injected(changed(sound, column, change, runs), tuple(Expected(check, run) for run in runs))


def pressure_sent_in_kpa(acquisition: Acquisition, share: float) -> Injected:
    """Write the pressure of a ``share`` of the runs in kPa, declared as mmHg."""
    return in_some(acquisition, share, PRESSURE, lambda _, values: values * KPA_PER_MMHG, "pressure-units")


def pressure_sent_in_cmh2o(acquisition: Acquisition, share: float) -> Injected:
    """Write the pressure of a ``share`` of the runs in cmH2O, declared as mmHg: runs disagree, and a second pressure does with it."""
    broken = in_some(acquisition, share, PRESSURE, lambda _, values: values * CMH2O_PER_MMHG, "pressure-units")
    in_aorta = tuple(replace(one, check="aortic-agreement") for one in broken.expected)
    return replace(broken, expected=(*broken.expected, *in_aorta, Expected("runs-agree-pressure")))


def volume_calibrated_twice(acquisition: Acquisition, share: float) -> Injected:
    """Send the volume of a ``share`` of the runs in mL, declared raw: gain and parallel volume are taken out once more."""
    catheter = acquisition.recipe.catheter
    broken = changed(
        acquisition, VOLUME, lambda _, raw: (raw - catheter.volume_shift_ml) / catheter.volume_gain, first_runs(acquisition, share)
    )
    names = ("runs-agree-volume", "runs-agree-stroke-volume", "reference-stroke-volume", "reference-volumes")
    return Injected(broken, tuple(Expected(name) for name in names))


def volume_sent_in_litres(acquisition: Acquisition, share: float) -> Injected:
    """Write the volume of a ``share`` of the runs in L, declared as mL."""
    return in_some(acquisition, share, VOLUME, lambda _, values: values / 1000.0, "volume-units")


def channels_swapped(acquisition: Acquisition, share: float) -> Injected:
    """Write pressure under volume's column and the other way round, in a ``share`` of the runs."""
    runs = first_runs(acquisition, share)
    for run in runs:
        columns = acquisition.columns[run]
        acquisition = with_columns(acquisition, run, {PRESSURE: columns[VOLUME], VOLUME: columns[PRESSURE]})
    return Injected(acquisition, tuple(Expected("swapped-channels", run) for run in runs))


def channels_swapped_without_ecg(acquisition: Acquisition, share: float) -> Injected:
    """Exchange pressure and volume as in `channels_swapped` where no electrogram was sent, so that nothing tells which fault it is."""
    swapped = channels_swapped(acquisition, share)

    def change(manifest: Facts) -> None:
        for run in manifest["runs"]:
            run["channels"].pop("ecg", None)

    broken = with_facts(swapped.acquisition, change)
    return Injected(broken, tuple(Expected("loop-direction", one.run) for one in swapped.expected))


def runs_cut_short(acquisition: Acquisition, share: float) -> Injected:
    """Break every run of the heart off after all but a ``share`` of it; begin and end are declared as they were."""
    runs = heart_runs(acquisition)
    for run in runs:
        columns = acquisition.columns[run]
        kept = max(1, round((1.0 - share) * columns[TIME].size))
        acquisition = with_columns(acquisition, run, {name: values[:kept] for name, values in columns.items()})
    return Injected(acquisition, tuple(Expected(check, run) for run in runs for check in ("duration", "beats-found")))


def pressure_inverted(acquisition: Acquisition, share: float) -> Injected:
    """Write the pressure of a ``share`` of the runs with the wrong sign."""
    return in_some(acquisition, share, PRESSURE, lambda _, values: -values, "pressure-inverted")


def volume_inverted(acquisition: Acquisition, share: float) -> Injected:
    """Turn the volume of a ``share`` of the runs upside down about its mean: it rises while the ventricle empties."""
    return in_some(acquisition, share, VOLUME, lambda _, values: 2.0 * float(np.nanmean(values)) - values, "volume-inverted")


def clock_stretched(acquisition: Acquisition, factor: float) -> Injected:
    """Let time stamps and declared rate agree on a clock that ran ``factor`` times too fast; begin, end and heart rate say otherwise."""
    broken = changed(acquisition, TIME, lambda _, values: values / factor, acquisition.columns)

    def change(manifest: Facts) -> None:
        for run in manifest["runs"]:
            run["sampling_rate_hz"] = run["sampling_rate_hz"] * factor

    runs = tuple(acquisition.columns)
    expected = tuple(Expected(check, run) for run in runs for check in ("duration", "heart-rate-agreement", "clock-agreement"))
    return Injected(with_facts(broken, change), expected)


def stamps_stretched(acquisition: Acquisition, factor: float) -> Injected:
    """Let the time stamps alone come from a clock that ran ``factor`` times too fast; the declared rate is right."""
    broken = changed(acquisition, TIME, lambda _, values: values / factor, acquisition.columns)
    return Injected(broken, tuple(Expected("sampling-rate", run) for run in heart_runs(acquisition)))


def pressure_gone(acquisition: Acquisition, share: float) -> Injected:
    """Let the pressure stand still for the last ``share`` of every run."""
    return injected(acquisition, PRESSURE, lambda _, values: _stopped(values, share), "pressure-flat")


def volume_gone(acquisition: Acquisition, share: float) -> Injected:
    """Let the volume stand still for the last ``share`` of every run."""
    return injected(acquisition, VOLUME, lambda _, values: _stopped(values, share), "volume-flat")


def _stopped(values: FloatArray, share: float) -> FloatArray:
    last = round((1.0 - share) * (values.size - 1))
    return np.where(np.arange(values.size) > last, values[last], values)


def pressure_dropped_out(acquisition: Acquisition, share: float) -> Injected:
    """Leave out pieces of the pressure, one every few seconds, a ``share`` of all samples."""
    return injected(acquisition, PRESSURE, lambda run, values: np.where(pieces(acquisition, run, share), np.nan, values), "time-gaps")


def pressure_held(acquisition: Acquisition, share: float) -> Injected:
    """Repeat the last good pressure in pieces, one every few seconds, a ``share`` of all samples."""
    return injected(acquisition, PRESSURE, lambda run, values: _held(values, pieces(acquisition, run, share)), "pressure-dropout")


def volume_held(acquisition: Acquisition, share: float) -> Injected:
    """Repeat the last good volume in pieces, one every few seconds, a ``share`` of all samples."""
    return injected(acquisition, VOLUME, lambda run, values: _held(values, pieces(acquisition, run, share)), "volume-dropout")


def _held(values: FloatArray, lost: FloatArray) -> FloatArray:
    known = np.where(lost, 0, np.arange(values.size))
    return np.asarray(values[np.maximum.accumulate(known)], dtype=np.float64)


def pieces(acquisition: Acquisition, run: str, share: float) -> FloatArray:
    """Return where, as 0 and 1, each stretch of `OFTEN_S` has a piece of that ``share`` at a place of its own."""
    rng = run_rng(acquisition, run, 31)
    rate_hz, count = acquisition.recipe.rate_hz, acquisition.columns[run][PRESSURE].size
    lost = np.zeros(count, dtype=bool)
    for number in range(math.ceil(count / (OFTEN_S * rate_hz))):
        first = round((number + rng.uniform(0.0, 1.0 - min(share, 1.0))) * OFTEN_S * rate_hz)
        lost[max(first, 1) : first + round(share * OFTEN_S * rate_hz)] = True
    return np.asarray(lost, dtype=np.float64)


def pressure_coarse(acquisition: Acquisition, step_mmhg: float) -> Injected:
    """Write the pressure in steps of ``step_mmhg``."""
    return injected(acquisition, PRESSURE, lambda _, values: _on_steps(values, step_mmhg), "edp-quantisation")


def volume_coarse(acquisition: Acquisition, step_ml: float) -> Injected:
    """Write the volume in steps of ``step_ml``."""
    return injected(acquisition, VOLUME, lambda _, values: _on_steps(values, step_ml), "volume-quantisation")


def _on_steps(values: FloatArray, step: float) -> FloatArray:
    return np.asarray(np.round(values / step) * step, dtype=np.float64) if step else values


def pressure_step(acquisition: Acquisition, mmhg: float) -> Injected:
    """Let the pressure jump by ``mmhg`` in the middle of every run, and stay."""
    return injected(acquisition, PRESSURE, lambda _, values: values + mmhg * _later_half(values), "pressure-step")


def volume_step(acquisition: Acquisition, ml: float) -> Injected:
    """Let the volume jump by ``ml`` in the middle of every run, and stay."""
    return injected(acquisition, VOLUME, lambda _, values: values + ml * _later_half(values), "volume-step")


def _later_half(values: FloatArray) -> FloatArray:
    return np.asarray(np.arange(values.size) >= values.size // 2, dtype=np.float64)


def pressure_drifting(acquisition: Acquisition, mmhg: float) -> Injected:
    """Let the pressure drift by ``mmhg`` from begin to end of every run."""
    return injected(acquisition, PRESSURE, lambda _, values: values + mmhg * np.linspace(0.0, 1.0, values.size), "pressure-drift")


def volume_drifting(acquisition: Acquisition, ml: float) -> Injected:
    """Let the volume drift by ``ml`` from begin to end of every run."""
    return injected(acquisition, VOLUME, lambda _, values: values + ml * np.linspace(0.0, 1.0, values.size), "volume-drift")


def volume_late(acquisition: Acquisition, ms: float) -> Injected:
    """Let the volume be ``ms`` late beyond what is declared."""
    return Injected(_delayed(acquisition, VOLUME, ms), tuple(Expected("channel-delay", run) for run in heart_runs(acquisition)))


def pressure_late(acquisition: Acquisition, ms: float) -> Injected:
    """Let the pressure be ``ms`` late beyond what is declared."""
    expected = tuple(Expected("channel-delay", run) for run in heart_runs(acquisition))
    return Injected(_delayed(acquisition, PRESSURE, ms), expected, pressure_late_s=ms / 1000.0)


def volume_late_as_declared(acquisition: Acquisition, ms: float) -> Injected:
    """Let the volume be ``ms`` later, and declare so: nothing is wrong."""
    broken = _delayed(acquisition, VOLUME, ms)

    def change(manifest: Facts) -> None:
        for run in manifest["runs"]:
            volume = run["channels"]["volume"]
            volume["delay_ms"] = volume.get("delay_ms", 0.0) + ms

    return Injected(with_facts(broken, change), ())


def _delayed(acquisition: Acquisition, column: str, ms: float) -> Acquisition:
    def change(_: str, values: FloatArray) -> FloatArray:
        at = np.arange(values.size, dtype=np.float64)
        return np.interp(at - ms / 1000.0 * acquisition.recipe.rate_hz, at, values)

    return changed(acquisition, column, change, acquisition.columns)


def segment_astray(acquisition: Acquisition, share: float) -> Injected:
    """Send segments, a ``share`` of the basal one beyond the valve, where it fills while the ventricle empties."""
    runs = tuple(acquisition.columns)
    return Injected(as_segments(acquisition, share), tuple(Expected("segment-phase", run) for run in runs))


def run_rng(acquisition: Acquisition, run: str, number: int) -> np.random.Generator:
    """Return the random numbers of one fault in one run: the same for the same recipe."""
    return np.random.default_rng([acquisition.recipe.seed, list(acquisition.columns).index(run), number])
