"""An acquisition as the folder a site uploads.

The inbox of the demo is what a site put there, not something the program keeps, so plain writes are right here.
"""

from __future__ import annotations

import hashlib
import json
import os
from collections.abc import Mapping
from datetime import datetime
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.csv as arrow_csv

from flows.sources.simulated.acquisition import DECIMALS, TIME, VOLUME, Acquisition
from flows.sources.simulated.activation import FloatArray

MANIFEST = "manifest-sha256.txt"


def acquisition_files(acquisition: Acquisition) -> dict[str, bytes]:
    """Return the payload of the package by file name: acquisition.json and one CSV file a run."""
    files = {"acquisition.json": (json.dumps(acquisition.manifest, indent=2) + "\n").encode()}
    for run in acquisition.manifest["runs"]:
        files[run["file"]] = csv_text(acquisition.columns[run["run"]]).encode()
    return files


def csv_text(columns: Mapping[str, FloatArray]) -> str:
    """Return columns as CSV text with a header; a missing sample is an empty cell."""
    cells = [_cells(values, decimals(name, values)) for name, values in columns.items()]
    rows = [",".join(row) for row in zip(*cells, strict=True)]
    return "\n".join([",".join(columns), *rows]) + "\n"


def decimals(name: str, values: FloatArray) -> int:
    """Return how many decimals a column is written with: more for a volume in litres, and for a clock that ran wrong."""
    usual = DECIMALS.get(name, 3)
    if name == VOLUME and np.nanmax(np.abs(values), initial=0.0) < 2.0:
        return usual + 3
    is_even = name != TIME or np.allclose(values, np.round(values, usual), rtol=0.0, atol=1e-8, equal_nan=True)
    return usual if is_even else usual + 3


def _cells(values: FloatArray, decimals: int) -> list[str]:
    missing = np.isnan(values)
    return ["" if gone else f"{value:.{decimals}f}" for value, gone in zip(values.tolist(), missing.tolist(), strict=True)]


def csv_bytes(columns: Mapping[str, FloatArray]) -> bytes:
    """Return columns as CSV with a header, ten times as fast as `csv_text`: the same numbers, without zeros at their end."""
    table = pa.table({name: pa.array(np.round(values, decimals(name, values)), from_pandas=True) for name, values in columns.items()})
    sink = pa.BufferOutputStream()
    arrow_csv.write_csv(table, sink, arrow_csv.WriteOptions(quoting_style="none"))
    return bytes(sink.getvalue())


def write_package(folder: Path, acquisition: Acquisition, sent_at: datetime, *, complete: bool = True) -> None:
    """Write the package; its checksums come last and all times of change are ``sent_at``.

    A package that is not ``complete`` has no checksums yet: to the program it is still arriving.
    """
    folder.mkdir(parents=True, exist_ok=True)
    files = acquisition_files(acquisition)
    for name, content in files.items():
        (folder / name).write_bytes(content)
    if complete:
        lines = [f"{hashlib.sha256(content).hexdigest()}  {name}\n" for name, content in sorted(files.items())]
        (folder / MANIFEST).write_bytes("".join(lines).encode())
    date_package(folder, sent_at)


def date_package(folder: Path, sent_at: datetime) -> None:
    """Set the time of change of a package and everything in it."""
    seconds = sent_at.timestamp()
    for path in (*sorted(folder.iterdir()), folder):
        os.utime(path, (seconds, seconds))
