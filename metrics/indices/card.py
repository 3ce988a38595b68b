"""What an index is, and what it may look at."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from enum import StrEnum
from functools import cached_property
from typing import TypeVar

import numpy as np

from metrics.arrays import BoolArray, FloatArray
from metrics.indices.end_systole import EndSystole, EndSystolicLine, end_systole, end_systolic_line
from metrics.signals.beats import Beats
from metrics.signals.calibrate import Signals

T = TypeVar("T")


class Withheld(Exception):  # noqa: N818  (an outcome with a reason, not a programming error)
    """An index has no number; the message is the reason a reader sees."""


class Source(StrEnum):
    """Which beats an index is made of."""

    STEADY = "steady"
    PRELOAD = "preload-reduction"
    BOTH = "both"


@dataclass(frozen=True, slots=True)
class Estimate:
    """A finite value with the 95 % interval of its fit (None where the sample is too small for one), and the beats it came from.

    ``runs`` is how many runs bear it where that is fewer than were offered; ``left_out`` says of each of the others why. ``notes`` are
    sentences a reader of the published value must see.
    """

    value: float
    fit_low: float | None
    fit_high: float | None
    beats: int
    runs: int | None = None
    left_out: tuple[str, ...] = ()
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Sensitivity:
    """By how much a value moves with the calibration, first order: per relative error of a gain, and per unit of what is added.

    ``pressure_gain`` of 3.0 means that 1 % more gain adds 0.03. In the index's unit, per 1, mmHg, 1 and mL.
    """

    pressure_gain: float = 0.0
    pressure_mmhg: float = 0.0
    volume_gain: float = 0.0
    volume_ml: float = 0.0


@dataclass(frozen=True)
class RunBeats:
    """The beats of one run that an index may use: ``chosen`` has shape (n_beats,).

    In a steady run those are the accepted beats, in a preload-reduction run the accepted beats of the usable window.
    """

    run: str
    signals: Signals
    beats: Beats
    chosen: BoolArray
    manoeuvre: str | None = None
    _known: dict[object, object] = field(default_factory=dict, compare=False, repr=False)

    def once(self, measure: Callable[[RunBeats], T]) -> T:
        """Return what ``measure`` makes of this run, made once for all indices that share it."""
        if measure not in self._known:
            self._known[measure] = measure(self)
        found: T = self._known[measure]  # type: ignore[assignment]  # what the measure itself returned
        return found

    @cached_property
    def end_systolic_line(self) -> EndSystolicLine:
        """Return the iterated end-systolic line through the chosen beats; raises ValueError when they carry none."""
        return end_systolic_line(self.signals, self.beats, self.chosen)

    def column(self, name: str) -> FloatArray:
        """Return one per-beat quantity of the chosen beats, shape (n_chosen,)."""
        values: FloatArray = getattr(self.beats, name)
        return values[self.chosen]

    def end_systole(self, v0_ml: float | None) -> EndSystole:
        """Return end-systole of every beat of the run, looked for once by each V0."""
        key = ("end-systole", v0_ml)
        if key not in self._known:
            self._known[key] = end_systole(self.signals, self.beats, v0_ml)
        found: EndSystole = self._known[key]  # type: ignore[assignment]  # what stands under this key
        return found


@dataclass(frozen=True)
class StageBeats:
    """What an index sees of a stage: its steady runs, its preload-reduction runs of one manoeuvre, and V0 of the stage's line.

    ``pre_onset`` says that the steady beats are those before the onset of a preload-reduction run.
    """

    steady: tuple[RunBeats, ...] = ()
    preload: tuple[RunBeats, ...] = ()
    v0_ml: float | None = None
    pre_onset: bool = False
    bsa_m2: float | None = None
    chamber: str = "LV"

    def steady_column(self, name: str) -> FloatArray:
        """Return one per-beat quantity over the chosen beats of all steady runs."""
        return _joined([run.column(name) for run in self.steady])

    @cached_property
    def steady_end_systole(self) -> tuple[FloatArray, FloatArray]:
        """Return (end-systolic pressure, its ratio to stroke volume) of the chosen steady beats, in mmHg and mmHg/mL."""
        esp = _joined([run.end_systole(self.v0_ml).esp_mmhg[run.chosen] for run in self.steady])
        return esp, esp / self.steady_column("sv_ml")


def _joined(parts: list[FloatArray]) -> FloatArray:
    return np.concatenate(parts) if parts else np.empty(0)


def powers(pressure_gain: float = 0.0, volume_gain: float = 0.0) -> Callable[[StageBeats, float], Sensitivity]:
    """Return the sensitivity of a value that goes with powers of the gains and that no offset moves.

    >>> powers(pressure_gain=1.0, volume_gain=-1.0)(StageBeats(), 2.5)
    Sensitivity(pressure_gain=2.5, pressure_mmhg=0.0, volume_gain=-2.5, volume_ml=0.0)
    """
    return lambda _, value: Sensitivity(pressure_gain=pressure_gain * value, volume_gain=volume_gain * value)


@dataclass(frozen=True)
class Index:
    """One published index: ``compute`` takes the stage's beats and returns an `Estimate` or raises `Withheld`.

    ``unit`` is UCUM. ``estimator`` tells kinds apart that must never be mixed, one of them is ``primary``; ``needs`` says in words what
    it is made of; ``sensitivity`` how errors of the calibration move it. ``chamber`` is the only one it is defined for; ``rests_on``
    are indices whose faults reach this estimator too, beside those of its own name. One ``by_body_surface`` is published only where a
    body surface area is declared, an ``isovolumic`` one only where no valve is declared to leak.
    """

    name: str
    title: str
    unit: str
    estimator: str
    source: Source
    compute: Callable[[StageBeats], Estimate]
    needs: str
    sensitivity: Callable[[StageBeats, float], Sensitivity]
    primary: bool = True
    revision: int = 1
    chamber: str | None = None
    rests_on: frozenset[str] = frozenset()
    by_body_surface: bool = False
    isovolumic: bool = False

    @property
    def exposed(self) -> frozenset[str]:
        """Return the names of the indices whose faults reach this one."""
        return self.rests_on | {self.name}
