"""From what checks found to verdicts on beats, runs and acquisitions, and to the rows of the rejection log."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from checks.check import Check, Judged, Level, Limits, Verdict, judge
from checks.spoils import EVERYTHING
from checks.subject import AcquisitionSubject, RunSubject
from metrics.arrays import BoolArray

ACCEPTED, REJECTED, QUERIED = "accepted", "rejected", "queried"
USABLE, UNUSABLE = "usable", "unusable"


@dataclass(frozen=True, slots=True)
class Rules:
    """What the study's protocol says about judging: limits by check, whether suspect beats count, which checks are required."""

    limits: Mapping[str, Mapping[str, float]]
    suspect_rejects: bool = False
    required: frozenset[str] | None = None

    def limits_of(self, check: Check, chamber: str) -> Limits:
        """Return the limits a check is held against: its own for the chamber, with the protocol's bounds in their place."""
        own = check.limits_for(chamber)
        return own.replaced(**self.limits[check.name]) if check.name in self.limits else own

    def is_required(self, check: Check) -> bool:
        """Return whether a beat that the check could not evaluate is rejected."""
        return check.required if self.required is None else check.name in self.required


@dataclass(frozen=True, slots=True)
class Finding:
    """One check that did not pass on one subject: a row of the rejection log. ``beat`` counts from 1; None above beat level."""

    check: Check
    run: str | None
    beat: int | None
    at_s: float | None
    verdict: Verdict
    decisive: bool
    value: float | None
    limit: float | None
    reason: str
    action: str


@dataclass(frozen=True)
class RunVerdict:
    """A run and its beats, judged. ``rejected_by`` holds the names of the checks that rejected each beat, sorted."""

    subject: RunSubject
    judged: tuple[Judged, ...]
    rejected_by: tuple[tuple[str, ...], ...]
    findings: tuple[Finding, ...]

    @property
    def failed(self) -> tuple[Check, ...]:
        """Return the run checks that failed."""
        return tuple(j.check for j in self.judged if j.check.level is Level.RUN and j.worst() is Verdict.FAIL)

    @property
    def spoiled(self) -> frozenset[str]:
        """Return the indices the failed run checks reach."""
        return frozenset().union(*(check.spoils for check in self.failed))

    @property
    def is_usable(self) -> bool:
        """Return whether the run can still carry an index."""
        return not any(check.spoils >= EVERYTHING for check in self.failed)

    @property
    def accepted(self) -> BoolArray:
        """Return which beats were accepted, shape (n_beats,)."""
        return np.array([not names for names in self.rejected_by], dtype=bool)


def judge_run(subject: RunSubject, checks: Sequence[Check], rules: Rules) -> RunVerdict:
    """Return the verdict on a run and its beats: beat checks first, then the run checks, those on accepted beats last.

    Every check is evaluated, none short-circuited by another's fail.
    """
    mine = [check for check in checks if check.level is not Level.ACQUISITION and subject.facts.kind in check.run_kinds]
    count = 0 if subject.beats is None else len(subject.beats)
    on_beats = [_judged(check, subject, rules, count) for check in mine if check.level is Level.BEAT] if count else []
    early = [_judged(check, subject, rules, 1) for check in mine if check.level is Level.RUN and not check.after_beats]
    ruined = tuple(j.check.name for j in early if j.worst() is Verdict.FAIL and j.check.spoils >= EVERYTHING)
    rejected_by = tuple(tuple(sorted({*names, *ruined})) for names in _rejections(on_beats, rules, count))
    accepted = np.array([not names for names in rejected_by], dtype=bool)
    seen = RunSubject(subject.facts, subject.recording, subject.signals, subject.beats, accepted, subject.trouble)
    late = [
        _judged(check, seen, rules, 1) for check in mine if check.level is Level.RUN and check.after_beats and subject.beats is not None
    ]
    judged = (*early, *late, *on_beats)
    return RunVerdict(seen, judged, rejected_by, tuple(f for j in judged for f in _findings(j, seen, rules)))


def judge_acquisition(subject: AcquisitionSubject, checks: Sequence[Check], rules: Rules) -> tuple[tuple[Judged, ...], tuple[Finding, ...]]:
    """Return what the acquisition checks found, and its rows of the rejection log."""
    mine = [check for check in checks if check.level is Level.ACQUISITION]
    judged = tuple(judge(check, subject, rules.limits_of(check, subject.facts.chamber)) for check in mine)
    return judged, tuple(f for j in judged for f in _findings(j, None, rules))


def _judged(check: Check, subject: RunSubject, rules: Rules, count: int) -> Judged:
    return judge(check, subject, rules.limits_of(check, subject.facts.chamber), count)


def _rejections(on_beats: Sequence[Judged], rules: Rules, count: int) -> list[list[str]]:
    """Return, for each beat, the names of the checks that reject it."""
    names: list[list[str]] = [[] for _ in range(count)]
    for judged in on_beats:
        for beat, verdict in enumerate(judged.verdict):
            if _is_decisive(judged.check, verdict, rules):
                names[beat].append(judged.check.name)
    return names


def _is_decisive(check: Check, verdict: Verdict, rules: Rules) -> bool:
    if check.level is not Level.BEAT:
        return verdict is Verdict.FAIL
    return (
        verdict is Verdict.FAIL
        or (verdict is Verdict.SUSPECT and rules.suspect_rejects)
        or (verdict is Verdict.NOT_EVALUATED and rules.is_required(check))
    )


def _findings(judged: Judged, subject: RunSubject | None, rules: Rules) -> list[Finding]:
    """Return the rows of one check; a beat check that could say nothing of any beat, nor had to, gets one row for the run."""
    check, run = judged.check, None if subject is None else subject.facts.run
    silent = all(verdict is Verdict.NOT_EVALUATED for verdict in judged.verdict)
    if check.level is Level.BEAT and silent and not rules.is_required(check):
        return [_finding(judged, 0, run, None, rules, subject)]
    return [
        _finding(judged, place, run, place + 1 if check.level is Level.BEAT else None, rules, subject)
        for place, verdict in enumerate(judged.verdict)
        if verdict is not Verdict.PASS
    ]


def _finding(judged: Judged, place: int, run: str | None, beat: int | None, rules: Rules, subject: RunSubject | None) -> Finding:
    check, verdict = judged.check, judged.verdict[place]
    shown = not check.is_fact and verdict is not Verdict.NOT_EVALUATED
    value, limit, at_s = (_finite(values[place]) for values in (judged.value, judged.limit, judged.at_s))
    decisive = _is_decisive(check, verdict, rules)
    return Finding(
        check=check,
        run=run,
        beat=beat,
        at_s=at_s if beat is not None or check.level is Level.RUN else None,
        verdict=verdict,
        decisive=decisive,
        value=value if shown else None,
        limit=limit if shown else None,
        reason=sentence(judged, place, trouble=None if subject is None else subject.trouble),
        action=_action(check, verdict, decisive=decisive),
    )


def _action(check: Check, verdict: Verdict, *, decisive: bool) -> str:
    if check.level is Level.BEAT:
        return "reject" if decisive else "none"
    if verdict is Verdict.FAIL:
        return "reject" if check.spoils >= EVERYTHING else "withhold" if check.spoils else "query"
    return "correct" if verdict is Verdict.SUSPECT and check.corrected else "none"


def sentence(judged: Judged, place: int, *, trouble: str | None = None) -> str:
    """Return what the rejection log says of one subject, as a sentence without a full stop."""
    check = judged.check
    if judged.verdict[place] is Verdict.NOT_EVALUATED:
        because = judged.trouble or trouble
        return f"{check.title}: not evaluated" + (f" ({because})" if because else ", nothing to evaluate it by")
    return check.reason.format(value=float(judged.value[place]), limit=float(judged.limit[place]), trouble=trouble or "no reason recorded")


def _finite(value: float) -> float | None:
    return float(value) if np.isfinite(value) else None


def spoilers(index: str, failed: Sequence[Check]) -> tuple[Check, ...]:
    """Return which of the failed checks reach an index."""
    return tuple(check for check in failed if index in check.spoils)
