"""The same acquisition in other forms the contract allows: conductance, segments, a channel at a rate of its own.

Nothing is wrong with any of them, but for the segment that may be sent astray.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from flows.sources.simulated.acquisition import PRESSURE, VOLUME, Acquisition, Facts
from flows.sources.simulated.activation import FloatArray
from flows.sources.simulated.faults import scaled, with_columns, with_facts

CHANNELS = {PRESSURE: "pressure", VOLUME: "volume"}

WEIGHTS = (0.15, 0.22, 0.26, 0.22, 0.15)
"""What each of five segments holds of the volume from apex to base; a house choice."""

BEYOND = 0.8
"""How far a vessel or an atrium behind the valve swings against the ventricle, as a share of what the segment would."""


def segment(number: int) -> str:
    """Return the column of a segment, counted from 1 at the apex."""
    return f"v_segment_{number}"


def as_segments(acquisition: Acquisition, astray: float = 0.0) -> Acquisition:
    """Return the acquisition with five segments in place of the volume; ``astray`` is the share of the basal one beyond the valve.

    Without that their sum is the volume as it was.
    """
    columns = {run: _split(dict(one), astray) for run, one in acquisition.columns.items()}

    def change(manifest: Facts) -> None:
        for run in manifest["runs"]:
            volume = run["channels"].pop("volume")
            run["channels"]["segments"] = [{**volume, "column": segment(number)} for number in range(1, len(WEIGHTS) + 1)]

    return with_facts(replace(acquisition, columns=columns), change)


def _split(columns: dict[str, FloatArray], astray: float) -> dict[str, FloatArray]:
    volume = columns.pop(VOLUME)
    mean = float(np.nanmean(volume))
    for number, weight in enumerate(WEIGHTS, 1):
        own, beyond = weight * volume, weight * (mean - BEYOND * (volume - mean))
        columns[segment(number)] = own if number < len(WEIGHTS) else (1.0 - astray) * own + astray * beyond
    return columns


def as_conductance(acquisition: Acquisition, spacing_cm: float = 1.2, resistivity_ohm_cm: float = 150.0) -> Acquisition:
    """Return the acquisition with its raw volume sent as the conductance that was measured, in mS.

    Baan's equation (Baan 1984, Circulation 70:812) backwards. Raises ValueError for a volume that is calibrated already.
    """
    if not acquisition.recipe.raw_volume:
        message = "a calibrated volume cannot be sent as a conductance"
        raise ValueError(message)
    broken = scaled(acquisition, VOLUME, 1000.0 / (resistivity_ohm_cm * spacing_cm**2))
    broken = replace(broken, columns={run: {**columns, VOLUME: np.round(columns[VOLUME], 4)} for run, columns in broken.columns.items()})

    def change(manifest: Facts) -> None:
        manifest["sensors"]["volume"] |= {"electrode_spacing_cm": spacing_cm, "blood_resistivity_ohm_cm": resistivity_ohm_cm}
        for run in manifest["runs"]:
            run["channels"]["volume"] = {**run["channels"]["volume"], "unit": "mS"}
            run["channels"]["volume"].pop("calibrated")

    return with_facts(broken, change)


def at_lower_rate(acquisition: Acquisition, column: str, every: int) -> Acquisition:
    """Return the acquisition with one column holding every ``every``-th sample only, its cells below left empty, its rate declared."""
    for run, columns in acquisition.columns.items():
        kept = columns[column][::every]
        filled = np.concatenate([kept, np.full(columns[column].size - kept.size, np.nan)])
        acquisition = with_columns(acquisition, run, {column: filled})

    def change(manifest: Facts) -> None:
        for run in manifest["runs"]:
            run["channels"][CHANNELS[column]]["sampling_rate_hz"] = run["sampling_rate_hz"] / every

    return with_facts(acquisition, change)
