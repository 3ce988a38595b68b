"""Faults inside the signals of a run, each with a severity; the truth tells which beats they truly touch."""

from __future__ import annotations

from datetime import datetime, timedelta

import numpy as np

from flows.sources.simulated.acquisition import PRESSURE, TIME, VOLUME, Acquisition, Facts
from flows.sources.simulated.activation import FloatArray
from flows.sources.simulated.faults import Expected, Injected, scaled, with_columns, with_facts

AT_SHARE = 0.45
"""Where in a run a fault begins, as a share of its beats."""

KPA_PER_MMHG = 0.133322387415


def samples_lost(acquisition: Acquisition, seconds: float) -> Injected:
    """Leave out the rows of ``seconds`` of the first steady run; the time stamps jump."""
    run, low, high = _stretch(acquisition, seconds)
    columns = {name: np.delete(values, np.s_[low:high]) for name, values in acquisition.columns[run].items()}
    return Injected(with_columns(acquisition, run, columns), (_touched(acquisition, "missing-samples", run, low, high),))


def samples_scattered(acquisition: Acquisition, share: float) -> Injected:
    """Empty the cells of a ``share`` of the first steady run's samples, in many short pieces."""
    run = acquisition.run_of_kind("steady")
    columns = acquisition.columns[run]
    count = columns[PRESSURE].size
    rng = np.random.default_rng([acquisition.recipe.seed, 11])
    piece = max(1, round(0.04 * acquisition.recipe.rate_hz))
    lost = np.zeros(count, dtype=bool)
    for first in rng.choice(count // piece, size=max(1, round(share * count / piece)), replace=False).tolist():
        lost[first * piece : (first + 1) * piece] = True
    emptied = {name: np.where(lost, np.nan, columns[name]) for name in (PRESSURE, VOLUME)}
    return Injected(with_columns(acquisition, run, emptied), (Expected("time-gaps", run),))


def stamps_repeated(acquisition: Acquisition, seconds: float) -> Injected:
    """Let the recorder's clock advance only every other sample for ``seconds`` of the first steady run: stamps stand twice."""
    run, low, high = _stretch(acquisition, seconds)
    stamps = acquisition.columns[run][TIME].copy()
    second = np.arange(low + 1, high, 2)
    stamps[second] = stamps[second - 1]
    return Injected(with_columns(acquisition, run, {TIME: stamps}), (_touched(acquisition, "duplicated-samples", run, low, high),))


def time_backwards(acquisition: Acquisition, seconds: float) -> Injected:
    """Let the time stamps of the first steady run jump back by ``seconds`` in its middle."""
    run = acquisition.run_of_kind("steady")
    stamps = acquisition.columns[run][TIME].copy()
    stamps[stamps.size // 2 :] -= seconds
    return Injected(with_columns(acquisition, run, {TIME: stamps}), (Expected("time-base", run),))


def end_misdeclared(acquisition: Acquisition, seconds: float) -> Injected:
    """Declare that the first steady run ended ``seconds`` later than it did."""
    run = acquisition.run_of_kind("steady")

    def change(manifest: Facts) -> None:
        for declared in manifest["runs"]:
            if declared["run"] == run:
                declared["ended_at"] = (datetime.fromisoformat(declared["ended_at"]) + timedelta(seconds=seconds)).isoformat()

    return Injected(with_facts(acquisition, change), (Expected("duration", run),))


def flat_line(acquisition: Acquisition, seconds: float) -> Injected:
    """Freeze pressure and volume of the first steady run for ``seconds``, beginning in mid-ejection."""
    run, low, high = _stretch(acquisition, seconds)
    columns = {name: acquisition.columns[run][name].copy() for name in (PRESSURE, VOLUME)}
    for values in columns.values():
        values[low:high] = values[low]
    return Injected(with_columns(acquisition, run, columns), (_touched(acquisition, "flat-line", run, low, high),))


def pressure_clipped(acquisition: Acquisition, share: float) -> Injected:
    """Cut the top ``share`` of the pressure's range off at the recorder's rail, in every run."""
    return _clipped(acquisition, PRESSURE, share, "pressure-clipping")


def volume_clipped(acquisition: Acquisition, share: float) -> Injected:
    """Cut the top ``share`` of the volume's range off at the recorder's rail, in every run."""
    return _clipped(acquisition, VOLUME, share, "volume-clipping")


def pressure_clipped_low(acquisition: Acquisition, share: float) -> Injected:
    """Cut the bottom ``share`` of the pressure's range off at the recorder's rail, in every run."""
    return _clipped(acquisition, PRESSURE, share, "pressure-clipping-low", top=False)


def volume_clipped_low(acquisition: Acquisition, share: float) -> Injected:
    """Cut the bottom ``share`` of the volume's range off at the recorder's rail, in every run."""
    return _clipped(acquisition, VOLUME, share, "volume-clipping-low", top=False)


def _clipped(acquisition: Acquisition, column: str, share: float, check: str, *, top: bool = True) -> Injected:
    reached = [columns[column] for columns in acquisition.columns.values()]
    high, low = max(float(values.max()) for values in reached), min(float(values.min()) for values in reached)
    rail = high - share * (high - low) if top else low + share * (high - low)
    touched = []
    for run, columns in acquisition.columns.items():
        cut = np.minimum(columns[column], rail) if top else np.maximum(columns[column], rail)
        if (cut != columns[column]).any():
            touched.append(run)
            acquisition = with_columns(acquisition, run, {column: cut})
    return Injected(acquisition, tuple(Expected(check, run) for run in touched))


def volume_stepped(acquisition: Acquisition, ml: float) -> Injected:
    """Let the volume of the first steady run jump by ``ml`` while the heart fills, and back four beats later."""
    run = acquisition.run_of_kind("steady")
    beats = acquisition.truth[run].beats
    first = round(AT_SHARE * len(beats))
    rate_hz, volume = acquisition.recipe.rate_hz, acquisition.columns[run][VOLUME].copy()
    up, down = (round((beats.start_s[beat] + 0.75 * beats.rr_s[beat]) * rate_hz) for beat in (first, first + 4))
    volume[up:down] += ml
    instants = tuple(beats.middle_s[[first, first + 4]].tolist())
    return Injected(with_columns(acquisition, run, {VOLUME: volume}), (Expected("loop-closure", run, instants),))


def pressure_in_kpa(acquisition: Acquisition, _severity: float = 1.0) -> Injected:
    """Write the pressure in kPa and declare it as mm[Hg]."""
    expected = tuple(Expected("pressure-units", run) for run in acquisition.columns)
    return Injected(scaled(acquisition, PRESSURE, KPA_PER_MMHG), expected)


def volume_times(acquisition: Acquisition, factor: float) -> Injected:
    """Write the volume ``factor`` times too large."""
    expected = tuple(Expected("volume-units", run) for run in acquisition.columns)
    return Injected(scaled(acquisition, VOLUME, factor), expected)


def _stretch(acquisition: Acquisition, seconds: float) -> tuple[str, int, int]:
    """Return the first steady run, and where in it a fault of that length begins (in mid-ejection) and ends, as row numbers."""
    run = acquisition.run_of_kind("steady")
    beats = acquisition.truth[run].beats
    begin_s = float(beats.start_s[round(AT_SHARE * len(beats))]) + 0.15
    rate_hz = acquisition.recipe.rate_hz
    low = round(begin_s * rate_hz)
    return run, low, min(low + max(1, round(seconds * rate_hz)), acquisition.columns[run][PRESSURE].size)


def _touched(acquisition: Acquisition, check: str, run: str, low: int, high: int) -> Expected:
    """Return the beats that hold a row of the half-open stretch."""
    beats, rate_hz = acquisition.truth[run].beats, acquisition.recipe.rate_hz
    inside = (beats.start_s <= (high - 1) / rate_hz) & (beats.end_s > low / rate_hz)
    return Expected(check, run, _instants(beats.middle_s[inside]))


def _instants(middle_s: FloatArray) -> tuple[float, ...]:
    return tuple(middle_s.tolist())
