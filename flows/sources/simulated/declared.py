"""What the signals of a run are to a reader who believes all that is declared about them.

This follows the contract's rules on units, calibration, zeros and delay, written here anew, so that what a fault does to an index can be
computed without the program under test.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import datetime

import numpy as np

from flows.sources.simulated.acquisition import TIME, Acquisition, Facts
from flows.sources.simulated.activation import FloatArray

PER_UNIT = {"mm[Hg]": 1.0, "kPa": 1.0 / 0.133322387415, "cm[H2O]": 0.0980665 / 0.133322387415, "mL": 1.0, "L": 1000.0, "mS": 1.0, "S": 1e3}
"""Unit of a column -> mmHg, mL or mS in one of it."""


@dataclass(frozen=True, slots=True)
class Believed:
    """A run as declared, arrays of shape (n,): ``true_s`` is when a sample was truly taken, ``clock_s`` when it is said to be."""

    true_s: FloatArray
    clock_s: FloatArray
    pressure_mmhg: FloatArray
    volume_ml: FloatArray


def believed(acquisition: Acquisition, run: str) -> Believed:
    """Return a run with everything declared about it applied.

    Raises KeyError where a declared column is not in the file.
    """
    facts = declared_run(acquisition.manifest, run)
    columns, channels = acquisition.columns[run], facts["channels"]
    calibration: Facts = facts["calibration"] if "calibration" in facts else acquisition.manifest["calibration"]
    count = next(iter(columns.values())).size
    clock_s = columns[TIME] if "time" in channels else np.arange(count) / facts["sampling_rate_hz"]
    true_s = np.arange(count) / acquisition.recipe.rate_hz
    if "time" in channels and TIME in columns and count < round(true_duration_s(acquisition, run) * acquisition.recipe.rate_hz):
        true_s = columns[TIME]  # rows were lost; what is left kept its stamps
    pressure = _samples(columns, channels["pressure"], clock_s)
    pressure = _pressure_mmhg(pressure, acquisition.manifest, facts, calibration.get("pressure", {}))
    return Believed(
        true_s=true_s,
        clock_s=clock_s,
        pressure_mmhg=_earlier(pressure, clock_s, channels["pressure"]),
        volume_ml=_volume(acquisition, facts, calibration.get("volume", {}), clock_s),
    )


def declared_run(manifest: Facts, run: str) -> Facts:
    """Return the table of a run.

    Raises LookupError when the manifest has none of that name.
    """
    for facts in manifest["runs"]:
        if facts["run"] == run:
            return dict(facts)
    message = f"no run {run}"
    raise LookupError(message)


def true_duration_s(acquisition: Acquisition, run: str) -> float:
    """Return how long a run truly lasted."""
    return next(plan.conditions.duration_s for plan in acquisition.recipe.runs if plan.run == run)


def _pressure_mmhg(recorded: FloatArray, manifest: Facts, facts: Facts, calibration: Facts) -> FloatArray:
    gain, shift = 1.0, 0.0
    if calibration.get("points"):
        points = np.asarray([(point["applied_mmhg"], point["read_mmhg"]) for point in calibration["points"]], dtype=np.float64)
        gain, shift = (float(value) for value in np.polyfit(points[:, 0], points[:, 1], 1))
    readings = [calibration[name] for name in ("zero_before", "zero_after") if name in calibration] + list(calibration.get("zeros", ()))
    return (recorded - shift) / gain - _zero_mmhg(readings, manifest, facts, gain, shift)


def _zero_mmhg(readings: list[Facts], manifest: Facts, facts: Facts, gain: float, shift: float) -> float:
    """Return the zero error in the middle of a run by the readings on its side of every re-zero, 0 where there is none."""
    started = datetime.fromisoformat(facts["started_at"])
    lasted_s = (datetime.fromisoformat(facts["ended_at"]) - started).total_seconds()
    breaks = [
        (datetime.fromisoformat(run["started_at"]) - started).total_seconds() + event["at_s"]
        for run in manifest["runs"]
        for event in run.get("events", ())
        if event["kind"] == "re-zero"
    ]
    middle_s = 0.5 * lasted_s
    side = sum(at_s <= middle_s for at_s in breaks)
    shown = sorted(((datetime.fromisoformat(one["at"]) - started).total_seconds(), (one["mmhg"] - shift) / gain) for one in readings)
    shown = [(at_s, error) for at_s, error in shown if sum(cut <= at_s for cut in breaks) == side]
    if not shown:
        return 0.0
    at_s, errors = zip(*shown, strict=True)
    return float(np.interp(middle_s, at_s, errors))


def _volume(acquisition: Acquisition, facts: Facts, calibration: Facts, clock_s: FloatArray) -> FloatArray:
    columns, channels = acquisition.columns[facts["run"]], facts["channels"]
    if "volume" in channels:
        used = [channels["volume"]]
    else:
        segments = channels["segments"]
        used = [segments[number - 1] for number in calibration.get("segments_used", range(1, len(segments) + 1))]
    raw = np.sum([_samples(columns, one, clock_s) for one in used], axis=0)
    is_conductance = used[0]["unit"] in {"mS", "S"}
    if is_conductance:
        sensor = acquisition.manifest["sensors"]["volume"]
        # Baan 1984: resistivity times spacing squared times conductance; mS makes it a thousandth, ohm cm times cm2 times S is mL.
        raw = raw * (sensor["blood_resistivity_ohm_cm"] * sensor["electrode_spacing_cm"] ** 2 / 1000.0)
    if is_conductance or not used[0].get("calibrated", True):
        raw = (raw - calibration.get("alpha_vc_ml", 0.0)) / calibration.get("alpha", 1.0)
    return _earlier(raw, clock_s, used[0])


def _samples(columns: Mapping[str, FloatArray], channel: Facts, clock_s: FloatArray) -> FloatArray:
    """Return a column in base units, one of a lower rate filled in at the run's samples."""
    values = columns[channel["column"]] * PER_UNIT[channel["unit"]]
    if "sampling_rate_hz" not in channel:
        return values
    values = values[: int(np.flatnonzero(~np.isnan(values))[-1]) + 1]
    return np.interp(clock_s, np.arange(values.size) / channel["sampling_rate_hz"], values)


def _earlier(values: FloatArray, clock_s: FloatArray, channel: Facts) -> FloatArray:
    """Return a channel with its declared delay taken out."""
    delay_s = channel.get("delay_ms", 0.0) / 1000.0
    return values if delay_s == 0.0 else np.interp(clock_s + delay_s, clock_s, values)
