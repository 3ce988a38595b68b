"""From the files of a package to one run in memory: columns become channels in base units, time stamps count from the first sample."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

import numpy as np

from flows.errors import InputError
from flows.sources import READERS
from flows.sources.reader import Reader
from flows.study.channels import SignalColumn
from flows.study.manifest import Manifest, ManifestRun
from flows.study.names import did_you_mean
from metrics.arrays import FloatArray
from metrics.signals.recording import Channel, Recording

_MMHG_KPA = 0.133322387415
"""A millimetre of mercury of 13 595.1 kg/m3 under 9.80665 m/s2, in kPa: [C]; UCUM rounds it to 133.3220 kPa for the metre: [V]."""
_CMH2O_KPA = 0.0980665
"""A centimetre of water of 1000 kg/m3 under 9.80665 m/s2, in kPa: [C]; UCUM has m[H2O] = 9.80665 kPa: [M]."""

UNITS: dict[str, tuple[str, float]] = {
    "mm[Hg]": ("mm[Hg]", 1.0),
    "kPa": ("mm[Hg]", 1.0 / _MMHG_KPA),
    "cm[H2O]": ("mm[Hg]", _CMH2O_KPA / _MMHG_KPA),
    "mL": ("mL", 1.0),
    "L": ("mL", 1000.0),
    "mS": ("mS", 1.0),
    "S": ("mS", 1000.0),
    "mV": ("mV", 1.0),
    "uV": ("mV", 0.001),
    "V": ("mV", 1000.0),
}
"""UCUM unit of a file -> base unit and factor."""

_TIME_S = {"s": 1.0, "ms": 0.001}
_NEEDED = ("pressure", "volume")


def read_run(files: Mapping[str, Path], manifest: Manifest, run: ManifestRun) -> Recording:
    """Return one run of the package as recorded, in base units, nothing corrected.

    ``files`` maps the package's paths to where their content lies. A channel of its own file is timed by the run's time column where
    that file has one, by its declared rate else; a channel of the run's file with its own rate is timed by that rate. A channel beside
    pressure and volume that holds no sample is left out. Raises InputError, naming file and column, for what cannot be read.
    """
    del manifest  # every reader's door is alike; a run says all that its channels need
    columns = {path: _columns(files, run, path) for path in run.signal_files()}
    stamps = {path: _stamps(run, path, table) for path, table in columns.items()}
    first_s = min((float(times[0]) for times in stamps.values() if times is not None), default=0.0)
    channels: dict[str, Channel] = {}
    for name, column in run.channels.signals().items():
        path = column.file or run.file
        samples = columns[path][column.column]
        if np.isnan(samples).all():
            if name in _NEEDED or name.startswith("segment-"):
                problem = "holds no sample at all"
                raise InputError(problem, file=path, field=column.column, remedy="Look whether the right column is named.")
            continue
        channels[name] = _channel(run, column, samples, stamps[path], first_s)
    return Recording(run=run.run, channels=channels)


def _columns(files: Mapping[str, Path], run: ManifestRun, path: str) -> dict[str, FloatArray]:
    """Return what the run needs of one file: its channels' columns and, where it has one, the time column."""
    if path not in files:
        problem = "is not in the package"
        raise InputError(problem, file=path, field=f"run {run.run}", remedy=did_you_mean(path, set(files) - {"acquisition.json"}))
    wanted = {column.column for column in run.channels.signals().values() if (column.file or run.file) == path}
    times = set() if run.channels.time is None else {run.channels.time.column}
    if path == run.file:
        wanted, times = wanted | times, set()
    return _reader(path).columns(files[path], path, sorted(wanted), sorted(times))


def _reader(path: str) -> Reader:
    for reader in READERS:
        if path.casefold().endswith(reader.suffixes):
            return reader
    known = ", ".join(suffix for reader in READERS for suffix in reader.suffixes)
    problem = "is of a kind that cannot be read"
    raise InputError(problem, file=path, remedy=f"Send one of: {known}.")


def _stamps(run: ManifestRun, path: str, columns: Mapping[str, FloatArray]) -> FloatArray | None:
    """Return the recorded time stamps of one file in seconds, or None where it has none."""
    time = run.channels.time
    if time is None or time.column not in columns:
        return None
    stamps = columns[time.column] * _TIME_S[time.unit]
    missing = np.flatnonzero(np.isnan(stamps))
    if missing.size:
        problem = f"line {int(missing[0]) + 2} has no time stamp"
        raise InputError(problem, file=path, field=time.column, remedy="Give every line its time, or leave channels.time out.")
    return stamps


def _channel(run: ManifestRun, column: SignalColumn, samples: FloatArray, stamps: FloatArray | None, first_s: float) -> Channel:
    unit, factor = UNITS[column.unit]
    own_rate = column.sampling_rate_hz is not None and column.sampling_rate_hz != run.sampling_rate_hz
    if own_rate and column.file in {None, run.file}:
        samples, stamps = _without_missing_end(samples), None
    return Channel(
        samples=samples * factor,
        unit=unit,
        sampling_rate_hz=column.sampling_rate_hz or run.sampling_rate_hz,
        time_s=None if stamps is None else stamps - first_s,
        delay_s=column.delay_ms / 1000.0,
    )


def _without_missing_end(samples: FloatArray) -> FloatArray:
    return samples[: int(np.flatnonzero(~np.isnan(samples))[-1]) + 1]
