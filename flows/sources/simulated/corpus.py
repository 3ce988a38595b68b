"""Acquisitions by the hundred for a study of faults: hearts, clean acquisitions of them, and what a fault does to one.

A heart is solved once for its conditions and seed; faults of sensors, clocks and declarations then work on arrays. Files are written
once for the same content, best into a folder that lies in memory.
"""

from __future__ import annotations

import functools
import hashlib
import json
from collections import OrderedDict
from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from flows.sources.simulated.acquisition import RECORDING_HOUR, Acquisition, Identity, Recipe, RunPlan, made
from flows.sources.simulated.activation import FloatArray
from flows.sources.simulated.catheter import Catheter
from flows.sources.simulated.faults import Expected, Injected
from flows.sources.simulated.heart import CLOSED_HEARTS, HEARTS, LEFT_HEARTS, RIGHT_HEARTS, Heart, heart_named
from flows.sources.simulated.package import csv_bytes
from flows.sources.simulated.reading import Indices, read_indices, true_indices
from flows.sources.simulated.rhythm import Conditions, Injection, Occlusion

if TYPE_CHECKING:
    from flows.sources.simulated.ladders import Ladder

REST = Conditions(duration_s=20.0)
RAMP = Conditions(duration_s=15.0, occlusion=Occlusion(onset_s=3.0, deflation_s=12.0))
SALINE = Conditions(duration_s=12.0, rr_spread=0.004, injection=Injection(onset_s=3.0, peak=0.25))
"""Breath held and rhythm calm: what the beats' own variation does to the regression would drown what the saline does."""

CLOSED_EVERY = 3
"""Every third heart is one of `CLOSED_HEARTS`, so that no fault is tried on one kind of circulation alone."""

AORTA_EVERY = 2
"""Every second left heart has a second sensor in the aorta: many studies have none."""

FIRST_DAY = datetime(2026, 2, 2, 9, 0, tzinfo=UTC)


def hearts(count: int) -> tuple[Heart, ...]:
    """Return ``count`` hearts, left and right in turn as far as there are right ones: 12 are six kinds of each side.

    Every third is in a closed loop. Raises ValueError beyond the number of hearts there are.
    """
    paired = [heart for pair in zip(LEFT_HEARTS, RIGHT_HEARTS, strict=True) for heart in pair]
    if not 0 < count <= len(paired):
        message = f"there are {len(paired)} hearts"
        raise ValueError(message)
    closed = dict(zip(HEARTS, CLOSED_HEARTS, strict=True))
    return tuple(closed[heart] if place % CLOSED_EVERY == 0 else heart for place, heart in enumerate(paired[:count], 1))


def usual_catheter(seed: int) -> Catheter:
    """Return a catheter as catheters are, a little different for each seed: what is wrong with it is declared, so that it can be undone."""
    rng = np.random.default_rng([seed, 17])
    spread = np.clip(rng.standard_normal(5), -1.5, 1.5)
    return Catheter(
        pressure_gain=round(1.0 + 0.01 * float(spread[0]), 4),
        pressure_shift_mmhg=round(0.3 * float(spread[1]), 3),
        zero_error_mmhg=round(0.3 * float(spread[2]), 3),
        drift_mmhg_per_hour=round(0.5 * float(spread[3]), 3),
        volume_gain=round(0.82 + 0.05 * float(spread[4]), 3),
        volume_shift_ml=round(44.0 + 8.0 * float(rng.random()), 1),
        volume_delay_s=0.008,
        pressure_noise_mmhg=0.4,
        volume_noise_ml=0.5,
        ecg_noise_mv=0.015,
        pressure_step_mmhg=0.02,
        volume_step_ml=0.02,
    )


def clean_recipe(
    heart: Heart | str,
    rate_hz: float = 250.0,
    seed: int = 0,
    *,
    ramps: int = 2,
    salines: int = 2,
    conditions: Mapping[str, Conditions] | None = None,
) -> Recipe:
    """Return the recipe of an acquisition with nothing wrong: a steady run, occlusions, saline injections, raw volume, four points.

    ``conditions`` replaces those of runs by name (``rest``, ``ramp-1`` on, ``saline-1`` on).
    """
    subject = heart_named(heart) if isinstance(heart, str) else heart
    names = ["rest", *(f"ramp-{number + 1}" for number in range(ramps)), *(f"saline-{number + 1}" for number in range(salines))]
    usual = {"rest": REST, "ramp": RAMP, "saline": SALINE}
    own = {} if conditions is None else conditions
    plans = tuple(
        RunPlan(name, own.get(name, usual[name.partition("-")[0]]), RECORDING_HOUR + 0.05 * place) for place, name in enumerate(names)
    )
    name = f"{subject.name}-{seed}"
    identity = Identity("tarn", "harbour", name, "visit-1", f"{name}-visit-1", FIRST_DAY + timedelta(days=seed % 300))
    return Recipe(
        identity,
        subject,
        plans,
        catheter=usual_catheter(seed),
        rate_hz=rate_hz,
        seed=100 * seed,
        raw_volume=True,
        points_mmhg=(0, 25, 50, 100),
        with_aorta=subject.chamber == "LV" and seed % AORTA_EVERY == 0,
    )


@functools.lru_cache(maxsize=16)
def _made(recipe: Recipe) -> Acquisition:
    return made(recipe)


def clean_acquisition(
    heart: Heart | str,
    rate_hz: float = 250.0,
    seed: int = 0,
    *,
    ramps: int = 2,
    salines: int = 2,
    conditions: Mapping[str, Conditions] | None = None,
) -> tuple[Acquisition, Indices]:
    """Return an acquisition with nothing wrong, and its true indices by (stage, index)."""
    acquisition = _made(clean_recipe(heart, rate_hz, seed, ramps=ramps, salines=salines, conditions=conditions))
    return acquisition, true_indices(acquisition)


@dataclass(frozen=True, slots=True)
class Reach:
    """By how much a fault moves one index: what the noise-free signals say ``sound``, and with the fault ``faulty``."""

    stage: str
    index: str
    sound: float
    faulty: float

    @property
    def change(self) -> float:
        """Return the difference in the index's own unit, infinite for an index that can no longer be read."""
        return self.faulty - self.sound if np.isfinite(self.faulty) else float("inf")

    @property
    def share(self) -> float:
        """Return the size of the change as a fraction of the sound value."""
        return abs(self.change / self.sound) if self.sound else float("inf")


@dataclass(frozen=True, slots=True)
class Faulty:
    """An acquisition with a fault in it.

    ``truth`` is what is true of the patient, whatever the signals say. ``expected`` is what a check should find once the severity
    matters, with the instants inside the beats it touches (in true seconds); ``reached`` how far each index is moved; ``other`` the
    acquisition whose signals these are, where they are another's.
    """

    acquisition: Acquisition
    truth: Indices
    expected: tuple[Expected, ...]
    reached: tuple[Reach, ...]
    other: Acquisition | None = None


def faulty(acquisition: Acquisition, fault: Ladder, severity: float) -> Faulty:
    """Return a sound acquisition with a fault of that severity in it."""
    injected = fault.inject(acquisition, severity)
    truth = true_indices(injected.acquisition if injected.truth_is_its_own else acquisition)
    return Faulty(injected.acquisition, truth, injected.expected, reached(acquisition, fault, severity), injected.other)


def reached(acquisition: Acquisition, fault: Ladder, severity: float) -> tuple[Reach, ...]:
    """Return by how much a fault moves each index, from the same acquisition recorded without noise, with and without it.

    Precision is another matter: points of a run at rest lie on the end-systolic line as well, where there is no noise.
    """
    quiet = _made(replace(acquisition.recipe, catheter=without_noise(acquisition.recipe.catheter)))
    injected: Injected = fault.inject(quiet, severity)
    sound = true_indices(injected.acquisition) if injected.truth_is_its_own else _sound_reading(quiet.recipe)
    faulty_reading = read_indices(injected.acquisition, injected.pressure_late_s)
    return tuple(Reach(*key, value, faulty_reading.get(key, float("nan"))) for key, value in sound.items())


@functools.lru_cache(maxsize=16)
def _sound_reading(recipe: Recipe) -> Indices:
    return read_indices(_made(recipe))


def without_noise(catheter: Catheter) -> Catheter:
    """Return the catheter with the same gains, zeros and delays, and neither noise nor steps."""
    return replace(catheter, pressure_noise_mmhg=0.0, volume_noise_ml=0.0, ecg_noise_mv=0.0, pressure_step_mmhg=0.0, volume_step_ml=0.0)


class Shelf:
    """Signal files in one folder, each content written once; the oldest go when there are more than ``most``.

    A folder in memory (a tmpfs) is best. The files of the latest acquisition are always there.
    """

    def __init__(self, folder: Path, most: int = 256) -> None:
        """Keep files in ``folder``, made where it is not there."""
        folder.mkdir(parents=True, exist_ok=True)
        self._folder, self._most, self._kept = folder, most, OrderedDict[str, Path]()

    def files(self, acquisition: Acquisition) -> dict[str, Path]:
        """Return where each file of the package lies, by its path in the package, acquisition.json among them."""
        placed = {"acquisition.json": self._placed(json.dumps(acquisition.manifest).encode(), ".json")}
        for run in acquisition.manifest["runs"]:
            placed[run["file"]] = self._placed_columns(acquisition.columns[run["run"]])
        while len(self._kept) > max(self._most, len(placed)):
            self._kept.popitem(last=False)[1].unlink(missing_ok=True)
        return placed

    def _placed_columns(self, columns: Mapping[str, FloatArray]) -> Path:
        digest = hashlib.blake2b(digest_size=16)
        for name, values in columns.items():
            digest.update(name.encode())
            digest.update(np.ascontiguousarray(values).data)
        return self._place(digest.hexdigest() + ".csv", lambda: csv_bytes(columns))

    def _placed(self, content: bytes, suffix: str) -> Path:
        return self._place(hashlib.blake2b(content, digest_size=16).hexdigest() + suffix, lambda: content)

    def _place(self, name: str, content: Callable[[], bytes]) -> Path:
        if name not in self._kept:
            self._kept[name] = self._folder / name
            self._kept[name].write_bytes(content())
        self._kept.move_to_end(name)
        return self._kept[name]
