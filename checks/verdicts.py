"""From what checks found to verdicts on beats, runs and acquisitions, and to the rows of the rejection log."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property

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
    """A run and its beats, judged. ``rejected_by`` holds the names of the checks that rejected each beat, sorted.

    ``doubted_by`` are the checks of the acquisition that failed on this run.
    """

    subject: RunSubject
    judged: tuple[Judged, ...]
    rejected_by: tuple[tuple[str, ...], ...]
    findings: tuple[Finding, ...]
    doubted_by: tuple[Check, ...] = ()

    @cached_property
    def failed(self) -> tuple[Check, ...]:
        """Return the checks that failed on the run: its own, and those of the acquisition that name it."""
        own = tuple(j.check for j in self.judged if j.check.level is Level.RUN and j.worst() is Verdict.FAIL)
        return own + self.doubted_by

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
    """Return the verdict on a run and its beats: the run's own signals first, then its beats, then what needs the accepted ones.

    Every check is evaluated, none short-circuited by another's fail, but for one case: where failed checks withhold of the whole run all
    that a beat check speaks for, its beats are not rejected for that once more, and what the fault cannot reach is still found in them.
    """
    mine = [check for check in checks if check.level is not Level.ACQUISITION and subject.facts.kind in check.run_kinds]
    count = 0 if subject.beats is None else len(subject.beats)
    early = [_judged(check, subject, rules, 1) for check in mine if check.level is Level.RUN and not check.after_beats]
    failed = [j.check for j in early if j.worst() is Verdict.FAIL]
    of_beats = [check for check in mine if check.level is Level.BEAT] if count else []
    on_beats = [_passed_over(check, count, failed) or _judged(check, subject, rules, count) for check in of_beats]
    ruined = tuple(check.name for check in failed if check.spoils >= EVERYTHING)
    rejected_by = tuple(tuple(sorted({*names, *ruined})) for names in _rejections(on_beats, rules, count))
    accepted = np.array([not names for names in rejected_by], dtype=bool)
    seen = subject.with_accepted(accepted)
    late = [
        _judged(check, seen, rules, 1) for check in mine if check.level is Level.RUN and check.after_beats and subject.beats is not None
    ]
    judged = (*early, *late, *on_beats)
    return RunVerdict(seen, judged, rejected_by, tuple(f for j in judged for f in _findings(j, seen, rules)))


def judge_acquisition(subject: AcquisitionSubject, checks: Sequence[Check], rules: Rules) -> tuple[tuple[Judged, ...], tuple[Finding, ...]]:
    """Return what the acquisition checks found, and its rows of the rejection log; those that name a run act on it alone (`doubted`)."""
    mine = [check for check in checks if check.level is Level.ACQUISITION]
    judged = tuple(judge(check, subject, rules.limits_of(check, subject.facts.chamber)) for check in mine)
    return judged, tuple(f for j in judged for f in _findings(j, None, rules))


def doubted(run: RunVerdict, findings: Sequence[Finding]) -> RunVerdict:
    """Return the verdict on a run with the acquisition's findings on it among its own: its beats go where one spoils everything."""
    mine = tuple(finding for finding in findings if finding.run == run.subject.facts.run)
    guilty = tuple(finding.check for finding in mine if finding.decisive)
    ruined = {check.name for check in guilty if check.spoils >= EVERYTHING}
    rejected_by = tuple(tuple(sorted({*names, *ruined})) for names in run.rejected_by) if ruined else run.rejected_by
    accepted = np.array([not names for names in rejected_by], dtype=bool)
    return replace(
        run,
        subject=run.subject if not ruined else run.subject.with_accepted(accepted),
        rejected_by=rejected_by,
        findings=(*run.findings, *mine),
        doubted_by=guilty,
    )


def _judged(check: Check, subject: RunSubject, rules: Rules, count: int) -> Judged:
    return judge(check, subject, rules.limits_of(check, subject.facts.chamber), count)


def _passed_over(check: Check, count: int, failed: Sequence[Check]) -> Judged | None:
    """Return a beat check as not evaluated where failed run checks withhold all it speaks for, naming them; else None."""
    guilty = [other.name for other in failed if check.concerns & other.spoils]
    if not check.concerns or not check.concerns <= frozenset().union(*(other.spoils for other in failed)):
        return None
    nothing = np.full(count, np.nan)
    because = f"withheld of the whole run by {', '.join(guilty)}"
    return Judged(check, nothing, (Verdict.NOT_EVALUATED,) * count, nothing.copy(), nothing.copy(), because)


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
    names = judged.runs or (run,) * len(judged.verdict)
    silent = all(verdict is Verdict.NOT_EVALUATED for verdict in judged.verdict)
    if check.level is Level.BEAT and silent and not rules.is_required(check):
        return [_finding(judged, 0, run, None, rules, subject)]
    return [
        _finding(judged, place, names[place], place + 1 if check.level is Level.BEAT else None, rules, subject)
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


def spoilers(indices: frozenset[str], failed: Sequence[Check]) -> tuple[Check, ...]:
    """Return which of the failed checks reach one of these indices."""
    return tuple(check for check in failed if check.spoils & indices)
