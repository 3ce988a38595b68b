"""What a check may look at: one run, or one acquisition with its runs."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, replace
from functools import cached_property, wraps
from typing import Any, TypeVar, cast

import numpy as np

from metrics.arrays import BoolArray, FloatArray, IntArray, span
from metrics.indices.card import RunBeats
from metrics.indices.end_systole import end_systole
from metrics.signals.beats import Beats
from metrics.signals.calibrate import Signals
from metrics.signals.delay import pressure_when_filling, volume_delay_s
from metrics.signals.facts import AcquisitionFacts, PressureCalibration, RunFacts
from metrics.signals.mains import Mains, mains
from metrics.signals.preload import PreloadWindow, is_at_usual_rate, preload_window
from metrics.signals.recording import Channel, Recording
from metrics.signals.saline import SalineIntercept, saline_intercept_of
from metrics.signals.shifts import Course, LoadPoints, course
from metrics.signals.stillness import standing
from metrics.stats.lines import Line

FEWEST_POINTS = 5
"""Beats that a line of end-systolic points takes at least; customary (from memory)."""

REGURGITATION = frozenset({"mitral-regurgitation", "tricuspid-regurgitation", "aortic-regurgitation", "shunt"})
"""Conditions under which forward stroke volume differs from the ventricle's own."""

AS_RECORDED = ("window", "standing", "saline_intercept", "gaps", "_mains", "_reach")
"""What is computed from a run and does not depend on which of its beats are accepted."""

_Found = TypeVar("_Found")


def once_a_run(measure: Callable[[RunSubject], _Found]) -> Callable[[RunSubject], _Found]:
    """Return a measure that several checks share, computed once for each run and kept with it."""
    key = f"{measure.__module__}.{measure.__qualname__}"

    @wraps(measure)
    def kept(subject: RunSubject) -> _Found:
        if key not in subject.kept:
            subject.kept[key] = measure(subject)
        return cast("_Found", subject.kept[key])

    return kept


@dataclass(frozen=True)
class RunSubject:
    """One run: what the site declared, what was recorded, and what was computed from it.

    ``signals`` and ``beats`` are None when the run cannot be put on a time base; ``trouble`` then says why. ``accepted`` has shape
    (n_beats,) and is None until the beat checks have spoken.
    """

    facts: RunFacts
    recording: Recording | None
    signals: Signals | None = None
    beats: Beats | None = None
    accepted: BoolArray | None = None
    trouble: str | None = None

    @cached_property
    def window(self) -> PreloadWindow | None:
        """Return the usable window of a preload-reduction run, else None."""
        if self.beats is None or self.signals is None or self.facts.kind != "preload-reduction":
            return None
        return preload_window(self.beats, self.facts, self.signals.sampling_rate_hz)

    @cached_property
    def course(self) -> Course:
        """Return what moved in the sensors during the run, by its accepted beats.

        Of a preload-reduction run those before the window and in it, and those after it at the heart rate there was before.
        """
        beats, signals = self.known_beats(), self.known_signals()
        end_systolic = end_systole(signals, beats, None)
        points = LoadPoints(self.start_s(), beats.edv_ml, beats.edp_mmhg, end_systolic.volume_ml, end_systolic.esp_mmhg)
        known = np.isfinite(points.edv_ml + points.edp_mmhg + points.esv_ml + points.esp_mmhg)
        chosen = known if self.accepted is None else known & self.accepted
        if self.window is not None:
            chosen = chosen & ((np.arange(len(beats)) <= self.window.last_at) | is_at_usual_rate(beats, self.window.onset_at, self.facts))
        return course(points.at(np.flatnonzero(chosen)), bent=self.facts.kind == "preload-reduction")

    def with_accepted(self, accepted: BoolArray) -> RunSubject:
        """Return this run with these beats accepted; what does not depend on them is not computed again."""
        seen = replace(self, accepted=accepted)
        seen.__dict__.update({name: self.__dict__[name] for name in AS_RECORDED if name in self.__dict__})
        return seen

    @cached_property
    def kept(self) -> dict[str, Any]:
        """Return what `once_a_run` keeps, by the name of the measure."""
        return {}

    @property
    def in_window(self) -> BoolArray:
        """Return which beats lie in the usable window, shape (n_beats,); all False without one."""
        if self.window is not None:
            return self.window.inside
        return np.zeros(0 if self.beats is None else len(self.beats), dtype=bool)

    def known_beats(self) -> Beats:
        """Return the beats; raises ValueError for a run that has none."""
        if self.beats is None:
            message = self.trouble or "the run has no beats"
            raise ValueError(message)
        return self.beats

    def known_signals(self) -> Signals:
        """Return the signals; raises ValueError for a run without a time base."""
        if self.signals is None:
            message = self.trouble or "the run has no time base"
            raise ValueError(message)
        return self.signals

    def channel(self, name: str) -> Channel:
        """Return a recorded channel; raises ValueError when the run does not hold it."""
        if self.recording is None or name not in self.recording.channels:
            message = f"the run has no {name} channel"
            raise ValueError(message)
        return self.recording.channels[name]

    @cached_property
    def volume_delay_s(self) -> float:
        """Return how long after dP/dt maximum the accepted beats begin to eject, seconds; NaN where it cannot be told."""
        return volume_delay_s(self.known_signals(), self.known_beats(), self._counting)

    @cached_property
    def pressure_when_filling(self) -> float:
        """Return how much of its range pressure still has to fall when the accepted beats fill; NaN where it cannot be told."""
        return pressure_when_filling(self.known_signals(), self.known_beats(), self._counting)

    @property
    def _counting(self) -> BoolArray:
        """Return the accepted beats, of an occlusion the fullest: a ventricle that empties opens its valve ever later."""
        beats = self.known_beats()
        accepted = np.ones(len(beats), dtype=bool) if self.accepted is None else self.accepted
        if self.facts.kind != "preload-reduction":
            return accepted
        known = beats.edv_ml[accepted & np.isfinite(beats.edv_ml)]
        least_ml = np.sort(known)[-max(known.size // 3, min(FEWEST_POINTS + 2, known.size))] if known.size else np.nan
        return np.asarray(accepted & (beats.edv_ml >= least_ml), dtype=bool)

    def mains(self, name: str) -> Mains:
        """Return how much of the mains a channel holds; raises ValueError when the run does not hold the channel."""
        if name not in self._mains:
            channel = self.channel(name)
            self._mains[name] = mains(channel.samples, channel.sampling_rate_hz, self.facts.chamber)
        return self._mains[name]

    @cached_property
    def _mains(self) -> dict[str, Mains]:
        return {}

    def reach(self, name: str) -> float:
        """Return how far a recorded channel moves, in its own unit; raises ValueError when the run does not hold it."""
        if name not in self._reach:
            self._reach[name] = span(self.channel(name).samples)
        return self._reach[name]

    @cached_property
    def _reach(self) -> dict[str, float]:
        return {}

    @cached_property
    def gaps(self) -> BoolArray:
        """Return which beats hold a missing sample, shape (n_beats,)."""
        beats, missing_at = self.known_beats(), np.flatnonzero(self.known_signals().missing)
        held: BoolArray = np.searchsorted(missing_at, beats.end) > np.searchsorted(missing_at, beats.start)
        return held

    @property
    def at_rest(self) -> BoolArray:
        """Return which accepted beats show the heart at rest: all of a steady run, of an occlusion those before its onset.

        Every beat counts as accepted until the beat checks have spoken.
        """
        accepted = np.ones(0 if self.beats is None else len(self.beats), dtype=bool) if self.accepted is None else self.accepted
        if self.facts.kind == "preload-reduction":
            onset_at = 0 if self.window is None else self.window.onset_at
            return accepted & (np.arange(accepted.size) < onset_at)
        return accepted

    @cached_property
    def end_systolic_line(self) -> Line | None:
        """Return the end-systolic line of a preload-reduction run, None where its beats carry none."""
        if self.facts.kind != "preload-reduction" or self.beats is None or self.signals is None or self.accepted is None:
            return None
        chosen = self.accepted & self.in_window
        if int(chosen.sum()) < FEWEST_POINTS:
            return None
        try:
            return RunBeats(self.facts.run, self.signals, self.beats, chosen, self.facts.manoeuvre).end_systolic_line.line
        except ValueError:
            return None

    @cached_property
    def saline_intercept(self) -> SalineIntercept | None:
        """Return what a saline run shows of the parallel volume, None for other runs and for one that shows nothing."""
        if self.facts.kind != "saline" or self.recording is None:
            return None
        try:
            return saline_intercept_of(self.recording, self.facts)
        except ValueError:
            return None

    @cached_property
    def standing(self) -> dict[str, tuple[IntArray, IntArray]]:
        """Return (first, stop) of the stretches in which pressure and volume, as recorded, stand still as no heart does."""
        held = {} if self.recording is None else self.recording.channels
        return {name: standing(held[name].samples, held[name].sampling_rate_hz) for name in ("pressure", "volume") if name in held}

    def longest_standing(self, name: str) -> tuple[FloatArray, FloatArray]:
        """Return the longest part of such a stretch in each beat, seconds, and when it begins (NaN: none), shapes (n_beats,)."""
        beats, signals = self.known_beats(), self.known_signals()
        longest_s, at_s = np.zeros(len(beats)), np.full(len(beats), np.nan)
        if name not in self.standing:
            return longest_s, at_s
        first, stop = self.standing[name]
        for begin, end in zip(signals.recorded_at[name][first], signals.recorded_at[name][stop - 1], strict=True):
            inside_s = (np.minimum(end, beats.end) - np.maximum(begin, beats.start)) / signals.sampling_rate_hz
            longer = inside_s > longest_s
            longest_s[longer] = inside_s[longer]
            at_s[longer] = np.maximum(begin, beats.start[longer]) / signals.sampling_rate_hz
        return longest_s, at_s

    def start_s(self) -> FloatArray:
        """Return when each beat begins, seconds from the run's first sample, shape (n_beats,)."""
        return self.known_beats().start / self.known_signals().sampling_rate_hz

    def beat_of_sample(self, at: IntArray) -> IntArray:
        """Return which beat each grid sample belongs to, -1 outside every beat; shape of ``at``."""
        beats = self.known_beats()
        if len(beats) == 0:
            return np.full(at.shape, -1, dtype=np.int64)
        owner = np.searchsorted(beats.start, at, side="right") - 1
        inside = (owner >= 0) & (at < beats.end[np.maximum(owner, 0)])
        return np.where(inside, owner, -1)


@dataclass(frozen=True)
class AcquisitionSubject:
    """One acquisition with its runs, after these were judged; ``spoiled`` holds the indices that failed checks of a run reach, by run.

    At the end of a night ``rested`` holds its published indices by (index, stage), ``earlier`` those of the subject's earlier ones.
    """

    facts: AcquisitionFacts
    runs: tuple[RunSubject, ...] = ()
    spoiled: Mapping[str, frozenset[str]] = field(default_factory=dict)
    rested: Mapping[tuple[str, str | None], float] = field(default_factory=dict)
    earlier: tuple[Mapping[tuple[str, str | None], float], ...] = ()

    def pressure_calibrations(self) -> tuple[PressureCalibration, ...]:
        """Return the pressure calibration of each run, or the acquisition's own where there are no runs."""
        return tuple(run.facts.pressure for run in self.runs) or (self.facts.pressure,)

    def steady_beats(self) -> dict[str, FloatArray]:
        """Return ``edv_ml``, ``esv_ml`` and ``sv_ml`` of the accepted beats at rest, arrays of one shape (n,).

        At rest: the steady runs of the reference stage, else those of the stage the first steady run stands in. What another method
        measured beside a catheter was measured before anything was infused.
        """
        steady = [run for run in self.runs if run.facts.kind == "steady"]
        stages = [run.facts.stage for run in steady]
        stage = self.facts.reference_stage if self.facts.reference_stage in stages else next(iter(stages), None)
        parts: dict[str, list[FloatArray]] = {"edv_ml": [], "esv_ml": [], "sv_ml": []}
        for run in steady:
            if run.facts.stage == stage and run.beats is not None and run.accepted is not None:
                for name, values in parts.items():
                    values.append(getattr(run.beats, name)[run.accepted])
        return {name: np.concatenate(values) if values else np.empty(0) for name, values in parts.items()}

    def steady_medians(self) -> dict[str, float]:
        """Return the medians of `steady_beats`, NaN without any."""
        return {
            name: float(np.nanmedian(values)) if np.isfinite(values).any() else float("nan") for name, values in self.steady_beats().items()
        }
