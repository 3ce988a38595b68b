"""The rows of the `indices` table: every index of every stage, published or withheld with its reason.

A run that a failed check spoils for an index is left out of that index only; an index no run is left for is withheld, and what the
acquisition's own failed checks reach is withheld whatever the runs say.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from checks.check import Check, Verdict
from checks.verdicts import RunVerdict, spoilers
from metrics.arrays import BoolArray
from metrics.indices import ALL
from metrics.indices.card import Estimate, Index, RunBeats, Source, StageBeats, Withheld
from metrics.indices.end_systolic_elastance import VOLUME_INTERCEPT

PRE_ONSET = "pre-onset"
PUBLISHED, WITHHELD = "published", "withheld"
IndexRow = dict[str, object]


@dataclass(frozen=True)
class Stage:
    """One stage of an acquisition: its runs, judged, and the failed checks of the acquisition as a whole."""

    name: str | None
    runs: tuple[RunVerdict, ...]
    failed: tuple[Check, ...]
    reasons: dict[str, str]
    bsa_m2: float | None = None

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


def index_rows(stage: Stage) -> list[IndexRow]:
    """Return the stage's rows: one primary row an index, then one a run that bears it."""
    v0_ml = stage_v0_ml(stage)
    return [row for index in ALL for row in _rows_of(index, stage, v0_ml)]


def stage_v0_ml(stage: Stage) -> float | None:
    """Return V0 of the stage's primary line, by which end-systole is found; None when there is no line."""
    try:
        return VOLUME_INTERCEPT.compute(StageBeats(preload=_chief(_preload_runs(stage, "Ees")))).value
    except Withheld:
        return None


def _rows_of(index: Index, stage: Stage, v0_ml: float | None) -> list[IndexRow]:
    steady, pre_onset = _steady_runs(stage, index.name)
    preload = _preload_runs(stage, index.name)
    chief = _chief(preload)
    beats = StageBeats(steady, chief, v0_ml, pre_onset, stage.bsa_m2)
    spoiled = spoilers(index.name, stage.failed)
    lost = [run for run in stage.runs if _matters(run, index) and (not run.is_usable or spoilers(index.name, run.failed))]
    why = [stage.reasons[check.name] for check in spoiled] + [_run_reason(run, index) for run in lost]
    if index.source is not Source.STEADY:
        why += [
            f"without run {run.run}: its manoeuvre ({run.manoeuvre or 'undeclared'}) is not pooled with the others"
            for run in preload
            if run not in chief
        ]
    rows = [_row(index, beats, run=None, spoiled=bool(spoiled), why=why)]
    for run in steady if index.source is Source.STEADY else preload:
        alone = replace(beats, steady=(run,)) if index.source is Source.STEADY else replace(beats, preload=(run,))
        rows.append(_row(index, alone, run=run.run, spoiled=bool(spoiled), why=[stage.reasons[check.name] for check in spoiled]))
    return rows


def _row(index: Index, beats: StageBeats, *, run: str | None, spoiled: bool, why: list[str]) -> IndexRow:
    """Return one row: the estimate, or why there is none."""
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
        reason = "; ".join([*why, *(f"without {told}" for told in estimate.left_out)]) or None
    status = WITHHELD if estimate is None else PUBLISHED
    return {
        "run": run,
        "index": index.name,
        "estimator": PRE_ONSET if beats.pre_onset and index.source is Source.STEADY else index.estimator,
        "primary": run is None,
        "value": None if estimate is None else estimate.value,
        "unit": index.unit,
        "ci_low": None,
        "ci_high": None,
        "fit_ci_low": None if estimate is None else _bounded(estimate.fit_low),
        "fit_ci_high": None if estimate is None else _bounded(estimate.fit_high),
        "beats": None if estimate is None else estimate.beats,
        "runs": None if estimate is None else estimate.runs or len(bearing),
        "status": status,
        "machine_status": status,
        "reason": reason,
    }


def _bounded(value: float | None) -> float | None:
    return value if value is not None and np.isfinite(value) else None


def _matters(run: RunVerdict, index: Index) -> bool:
    """Return whether a run of this kind could bear the index."""
    kind = run.subject.facts.kind
    return kind == index.source.value or index.source is Source.BOTH


def _run_reason(run: RunVerdict, index: Index) -> str:
    guilty = {check.name for check in run.failed if index.name in check.spoils}
    told = next((finding.reason for finding in run.findings if finding.check.name in guilty and finding.decisive), "unusable")
    return f"without run {run.subject.facts.run}: {told}"


def _steady_runs(stage: Stage, index: str) -> tuple[tuple[RunBeats, ...], bool]:
    """Return the steady runs that may bear an index, or the beats before the onsets where there are none.

    Where a fault took the steady runs, only runs that the same checks looked at and passed may stand in: one that such a check cannot
    judge may have the fault too.
    """
    steady = tuple(_beats(run, run.accepted) for run in stage.of_kind("steady") if _is_sound(run, index))
    if steady:
        return steady, False
    guilty = {check.name for run in stage.of_kind("steady") for check in spoilers(index, run.failed)}
    before = []
    for run in stage.of_kind("preload-reduction"):
        window = run.subject.window
        if _is_sound(run, index) and guilty <= _passed(run) and window is not None:
            before.append(_beats(run, run.accepted & (np.arange(run.accepted.size) < window.onset_at)))
    return tuple(before), bool(before)


def _passed(run: RunVerdict) -> set[str]:
    return {judged.check.name for judged in run.judged if judged.worst() is Verdict.PASS}


def _preload_runs(stage: Stage, index: str) -> tuple[RunBeats, ...]:
    return tuple(_beats(run, run.accepted & run.subject.in_window) for run in stage.of_kind("preload-reduction") if _is_sound(run, index))


def _chief(runs: tuple[RunBeats, ...]) -> tuple[RunBeats, ...]:
    """Return the runs of the manoeuvre most of them share: manoeuvres are never pooled."""
    if not runs:
        return runs
    counted = Counter(run.manoeuvre for run in runs)
    chief = max(counted, key=lambda name: (counted[name], -[run.manoeuvre for run in runs].index(name)))
    return tuple(run for run in runs if run.manoeuvre == chief)


def _is_sound(run: RunVerdict, index: str) -> bool:
    return run.is_usable and run.subject.beats is not None and not spoilers(index, run.failed)


def _beats(run: RunVerdict, chosen: BoolArray) -> RunBeats:
    subject = run.subject
    return RunBeats(subject.facts.run, subject.known_signals(), subject.known_beats(), chosen, subject.facts.manoeuvre)
