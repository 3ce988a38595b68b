"""The rows of the `indices` table: every index of every stage, published or withheld with its reason.

A run that a failed check spoils for an index is left out of that index only; an index no run is left for is withheld, and what the
acquisition's own failed checks reach is withheld whatever the runs say.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass, field, replace
from functools import reduce

import numpy as np

from checks.check import Check, Verdict
from checks.subject import REGURGITATION
from checks.verdicts import RunVerdict, spoilers
from metrics.arrays import BoolArray
from metrics.indices import ALL
from metrics.indices.card import Estimate, Index, RunBeats, Sensitivity, Source, StageBeats, Withheld
from metrics.indices.end_systolic_elastance import END_SYSTOLIC_ELASTANCE, VOLUME_INTERCEPT
from metrics.indices.intervals import calibrated_interval
from metrics.signals.facts import RunFacts
from metrics.signals.uncertainty import CalibrationUncertainty, calibration_uncertainty

PRE_ONSET = "pre-onset"
PUBLISHED, WITHHELD = "published", "withheld"
LEAKING = "with a valve declared to leak no part of the beat is isovolumic"
IndexRow = dict[str, object]


@dataclass(frozen=True)
class Stage:
    """One stage of an acquisition: its runs, judged, and the failed checks of the acquisition as a whole."""

    name: str | None
    runs: tuple[RunVerdict, ...]
    failed: tuple[Check, ...]
    reasons: dict[str, str]
    bsa_m2: float | None = None
    _chosen: dict[tuple[str, bytes], RunBeats] = field(default_factory=dict, compare=False, repr=False)

    def beats(self, run: RunVerdict, chosen: BoolArray) -> RunBeats:
        """Return the chosen beats of one of the stage's runs, one and the same for every index that asks for these."""
        subject = run.subject
        facts, key = subject.facts, (subject.facts.run, chosen.tobytes())
        if key not in self._chosen:
            self._chosen[key] = RunBeats(facts.run, subject.known_signals(), subject.known_beats(), chosen, facts.manoeuvre)
        return self._chosen[key]

    @property
    def chamber(self) -> str:
        """Return the chamber the stage's runs were recorded in."""
        return self.runs[0].subject.facts.chamber if self.runs else "LV"

    @property
    def conditions(self) -> frozenset[str]:
        """Return the conditions declared of the acquisition."""
        return self.runs[0].subject.facts.conditions if self.runs else frozenset()

    def of_kind(self, kind: str) -> tuple[RunVerdict, ...]:
        """Return the stage's runs of one kind."""
        return tuple(run for run in self.runs if run.subject.facts.kind == kind)


def stages_of(runs: Sequence[RunVerdict], failed: tuple[Check, ...], reasons: dict[str, str], bsa_m2: float | None) -> tuple[Stage, ...]:
    """Return the acquisition's stages in the order their first run stands in; runs without a stage form one of their own."""
    names = dict.fromkeys(run.subject.facts.stage for run in runs if run.subject.facts.kind != "saline")
    return tuple(
        Stage(
            name,
            tuple(run for run in runs if run.subject.facts.stage == name and run.subject.facts.kind != "saline"),
            failed,
            reasons,
            bsa_m2,
        )
        for name in names
    )


@dataclass(frozen=True, slots=True)
class StageValue:
    """A row of the table, and what its interval was made of: None where it is withheld."""

    row: IndexRow
    estimate: Estimate | None
    sensitivity: Sensitivity | None
    doubt: CalibrationUncertainty


def stage_values(stage: Stage) -> list[StageValue]:
    """Return the stage's values: every index defined for it, pooled over its runs, then each run that bears it."""
    v0_ml = stage_v0_ml(stage)
    return [value for index in ALL if _is_defined(index, stage) for value in _values_of(index, stage, v0_ml)]


def index_rows(stage: Stage) -> list[IndexRow]:
    """Return the stage's rows: one primary row an index, then one a run that bears it."""
    return [value.row for value in stage_values(stage)]


def stage_v0_ml(stage: Stage) -> float | None:
    """Return V0 of the stage's primary line, by which end-systole is found; None when there is no line."""
    try:
        return VOLUME_INTERCEPT.compute(StageBeats(preload=_chief(_preload_runs(stage, END_SYSTOLIC_ELASTANCE)))).value
    except Withheld:
        return None


def _is_defined(index: Index, stage: Stage) -> bool:
    """Return whether the index means anything in this chamber, and the acquisition declares what it is divided by."""
    return index.chamber in (None, stage.chamber) and (stage.bsa_m2 is not None or not index.by_body_surface)


def _values_of(index: Index, stage: Stage, v0_ml: float | None) -> list[StageValue]:
    steady, pre_onset = _steady_runs(stage, index)
    preload = _preload_runs(stage, index)
    chief = _chief(preload)
    beats = StageBeats(steady, chief, v0_ml, pre_onset, stage.bsa_m2, stage.chamber)
    spoiled = spoilers(index.exposed, stage.failed)
    lost = [run for run in stage.runs if _matters(run, index) and (not run.is_usable or spoilers(index.exposed, run.failed))]
    why = [stage.reasons[check.name] for check in spoiled] + [_run_reason(run, index) for run in lost]
    if index.source is not Source.STEADY:
        why += [
            f"without run {run.run}: its manoeuvre ({run.manoeuvre or 'undeclared'}) is not pooled with the others"
            for run in preload
            if run not in chief
        ]
    is_leaking = index.isovolumic and bool(stage.conditions & REGURGITATION)
    spoils = [stage.reasons[check.name] for check in spoiled] + ([LEAKING] if is_leaking else [])
    why += [LEAKING] if is_leaking else []
    values = [_value(index, beats, _uncertainty(stage, index, beats), run=None, spoiled=bool(spoils), why=why)]
    for run in steady if index.source is Source.STEADY else preload:
        alone = replace(beats, steady=(run,)) if index.source is Source.STEADY else replace(beats, preload=(run,))
        values.append(_value(index, alone, _uncertainty(stage, index, alone), run=run.run, spoiled=bool(spoils), why=list(spoils)))
    return values


def _uncertainty(stage: Stage, index: Index, beats: StageBeats) -> CalibrationUncertainty:
    """Return how uncertain the calibration of the runs is that bear an index.

    What is made of steady and preload-reduction runs together owes to one calibration that its errors cancel, Ees / Ea first of all: where
    those runs have calibrations of their own nothing is told.
    """
    used = {run.run for run in (*(beats.steady if index.source is not Source.PRELOAD else ()), *_occluded(index, beats))}
    bearing = [run.subject.facts for run in stage.runs if run.subject.facts.run in used]
    if index.source is Source.BOTH and len({_calibration(facts) for facts in bearing}) > 1:
        return CalibrationUncertainty()
    found = [calibration_uncertainty(facts.pressure, facts.volume) for facts in bearing]
    return reduce(CalibrationUncertainty.joined, found) if found else CalibrationUncertainty()


def _occluded(index: Index, beats: StageBeats) -> tuple[RunBeats, ...]:
    return () if index.source is Source.STEADY else beats.preload


def _calibration(facts: RunFacts) -> tuple[object, ...]:
    """Return what tells one calibration from another: not its instants, which count from each run's own beginning."""
    pressure = facts.pressure
    return pressure.points, tuple(zero.mmhg for zero in pressure.zeros), pressure.zero_sd_mmhg, replace(facts.volume, age_hours=None)


def _value(index: Index, beats: StageBeats, doubt: CalibrationUncertainty, *, run: str | None, spoiled: bool, why: list[str]) -> StageValue:
    """Return one value: the estimate, or why there is none."""
    estimate: Estimate | None = None
    reason = "; ".join(why) or None
    bearing = [one for one in (beats.steady if index.source is Source.STEADY else beats.preload) if one.chosen.any()]
    try:
        estimate = None if spoiled else index.compute(beats)
    except Withheld as trouble:
        reason = reason or str(trouble)
    if estimate is not None and not np.isfinite(estimate.value):
        estimate, reason = None, reason or "the estimate is not a finite number"
    if estimate is not None:
        reason = "; ".join([*why, *(f"without {told}" for told in estimate.left_out), *estimate.notes]) or None
    status = WITHHELD if estimate is None else PUBLISHED
    sensitivity = None if estimate is None else index.sensitivity(beats, estimate.value)
    low, high = (None, None) if estimate is None or sensitivity is None else calibrated_interval(estimate, sensitivity, doubt)
    row: IndexRow = {
        "run": run,
        "index": index.name,
        "estimator": _estimator(index, pre_onset=beats.pre_onset),
        "primary": run is None and index.primary,
        "value": None if estimate is None else estimate.value,
        "unit": index.unit,
        "ci_low": low,
        "ci_high": high,
        "fit_ci_low": None if estimate is None else _bounded(estimate.fit_low),
        "fit_ci_high": None if estimate is None else _bounded(estimate.fit_high),
        "beats": None if estimate is None else estimate.beats,
        "runs": None if estimate is None else estimate.runs or len(bearing),
        "status": status,
        "machine_status": status,
        "reason": reason,
    }
    return StageValue(row, estimate, sensitivity, doubt)


def _estimator(index: Index, *, pre_onset: bool) -> str:
    """Return the estimator's name; an index's primary one is known as pre-onset where its beats are those, the others keep their own."""
    if not pre_onset or index.source is not Source.STEADY:
        return index.estimator
    return PRE_ONSET if index.primary else f"{PRE_ONSET}:{index.estimator}"


def _bounded(value: float | None) -> float | None:
    return value if value is not None and np.isfinite(value) else None


def _matters(run: RunVerdict, index: Index) -> bool:
    """Return whether a run of this kind could bear the index."""
    kind = run.subject.facts.kind
    return kind == index.source.value or index.source is Source.BOTH


def _run_reason(run: RunVerdict, index: Index) -> str:
    guilty = {check.name for check in spoilers(index.exposed, run.failed)}
    told = next((finding.reason for finding in run.findings if finding.check.name in guilty and finding.decisive), "unusable")
    return f"without run {run.subject.facts.run}: {told}"


def _steady_runs(stage: Stage, index: Index) -> tuple[tuple[RunBeats, ...], bool]:
    """Return the steady runs that may bear an index, or the beats before the onsets where there are none.

    Where a fault took the steady runs, only runs that the same checks looked at and passed may stand in: one that such a check cannot
    judge may have the fault too.
    """
    steady = tuple(stage.beats(run, run.accepted) for run in stage.of_kind("steady") if _is_sound(run, index))
    if steady:
        return steady, False
    guilty = {check.name for run in stage.of_kind("steady") for check in spoilers(index.exposed, run.failed)}
    before = []
    for run in stage.of_kind("preload-reduction"):
        window = run.subject.window
        if _is_sound(run, index) and guilty <= _passed(run) and window is not None:
            before.append(stage.beats(run, run.accepted & (np.arange(run.accepted.size) < window.onset_at)))
    return tuple(before), bool(before)


def _passed(run: RunVerdict) -> set[str]:
    return {judged.check.name for judged in run.judged if judged.worst() is Verdict.PASS}


def _preload_runs(stage: Stage, index: Index) -> tuple[RunBeats, ...]:
    return tuple(
        stage.beats(run, run.accepted & run.subject.in_window) for run in stage.of_kind("preload-reduction") if _is_sound(run, index)
    )


def _chief(runs: tuple[RunBeats, ...]) -> tuple[RunBeats, ...]:
    """Return the runs of the manoeuvre most of them share: manoeuvres are never pooled."""
    if not runs:
        return runs
    counted = Counter(run.manoeuvre for run in runs)
    chief = max(counted, key=lambda name: (counted[name], -[run.manoeuvre for run in runs].index(name)))
    return tuple(run for run in runs if run.manoeuvre == chief)


def _is_sound(run: RunVerdict, index: Index) -> bool:
    return run.is_usable and run.subject.beats is not None and not spoilers(index.exposed, run.failed)
