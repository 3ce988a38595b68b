"""What an index is, and what it may look at."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from enum import StrEnum
from functools import cached_property

import numpy as np

from metrics.arrays import BoolArray, FloatArray
from metrics.indices.end_systole import EndSystole, EndSystolicLine, end_systole, end_systolic_line
from metrics.signals.beats import Beats
from metrics.signals.calibrate import Signals


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

    ``runs`` is how many runs bear it where that is fewer than were offered; ``left_out`` says of each of the others why.
    """

    value: float
    fit_low: float | None
    fit_high: float | None
    beats: int
    runs: int | None = None
    left_out: tuple[str, ...] = ()


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

    @cached_property
    def end_systolic_line(self) -> EndSystolicLine:
        """Return the iterated end-systolic line through the chosen beats; raises ValueError when they carry none."""
        return end_systolic_line(self.signals, self.beats, self.chosen)

    def column(self, name: str) -> FloatArray:
        """Return one per-beat quantity of the chosen beats, shape (n_chosen,)."""
        values: FloatArray = getattr(self.beats, name)
        return values[self.chosen]

    def end_systole(self, v0_ml: float | None) -> EndSystole:
        """Return end-systole of every beat of the run."""
        return end_systole(self.signals, self.beats, v0_ml)


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


@dataclass(frozen=True)
class Index:
    """One published index: ``compute`` takes the stage's beats and returns an `Estimate` or raises `Withheld`.

    ``unit`` is UCUM. ``estimator`` tells kinds apart that must never be mixed; ``needs`` says in words what it is made of.
    """

    name: str
    title: str
    unit: str
    estimator: str
    source: Source
    compute: Callable[[StageBeats], Estimate]
    needs: str
    revision: int = 1
