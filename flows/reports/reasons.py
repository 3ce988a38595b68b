"""The thread through an acquisition's page: one letter a check, in order of weight, with what happened, what it costs and who can help.

The letter stands in the ribbon's cells, on the evidence cards and over the loops, so that a reader follows one reason through all of them.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from flows.reports.wording import counted, letter, listing, number_ranges, sentence, split_reasons, title_from_name

if TYPE_CHECKING:
    from flows.reports.views import AcquisitionView

Finding = Mapping[str, Any]


@dataclass(frozen=True, slots=True)
class Reason:
    """One check that did not pass: its letter, its findings (worst first), and what happened, where, at what cost, with what remedy."""

    letter: str
    check: str
    title: str
    decisive: bool
    findings: tuple[Finding, ...]
    happened: str
    where: str
    costs: str
    remedy: str

    @property
    def anchor(self) -> str:
        """The id of the reason's first card on the page."""
        return f"card-{self.letter}-1"


@dataclass(frozen=True, slots=True)
class BeatMark:
    """What is known against one beat: checks that rejected it and checks that only flagged it, heaviest first."""

    rejected_by: tuple[str, ...]
    flagged_by: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Reasons:
    """All reasons of an acquisition, and the way from a check or a beat to them."""

    ordered: tuple[Reason, ...]
    by_check: Mapping[str, Reason]
    marks: Mapping[str, Mapping[int, BeatMark]]

    @property
    def decisive(self) -> tuple[Reason, ...]:
        """The reasons that took something away."""
        return tuple(reason for reason in self.ordered if reason.decisive)

    @property
    def remarks(self) -> tuple[Reason, ...]:
        """The reasons that only flagged something."""
        return tuple(reason for reason in self.ordered if not reason.decisive)

    def letter_of(self, check: str) -> str:
        """Return the letter of a check."""
        return self.by_check[check].letter

    def mark(self, run: str, beat: int) -> BeatMark:
        """Return what is known against a beat."""
        return self.marks.get(run, {}).get(beat, BeatMark((), ()))


def reasons_of(view: AcquisitionView) -> Reasons:
    """Return the reasons of an acquisition in order of weight; checks named by a beat, run or acquisition without a finding come last."""
    evidence = view.evidence
    findings: Sequence[Finding] = evidence.get("findings") or ()
    runs: Sequence[Mapping[str, Any]] = evidence.get("runs") or ()
    groups: dict[str, list[Finding]] = {}
    for finding in sorted(findings, key=lambda item: not is_decisive(item)):
        groups.setdefault(str(finding["check"]), []).append(finding)
    rejected_beats = Counter(check for run in runs for beat in run.get("beats") or () for check in split_reasons(beat.get("reasons")))
    named = [
        *split_reasons(view.row.get("reasons")),
        *(check for run in runs for check in split_reasons(run.get("reasons"))),
        *rejected_beats,
    ]
    for check in sorted(set(named) - set(groups)):
        groups[check] = []
    lost_runs = _lost_runs(runs)
    withheld = _withheld_by(view.indices or evidence.get("indices") or (), groups)
    ranked = sorted(groups.items(), key=lambda item: not (any(map(is_decisive, item[1])) or item[0] in named))
    ordered = tuple(
        Reason(
            letter=letter(position),
            check=check,
            title=_title(check, group),
            decisive=any(map(is_decisive, group)) or check in named,
            findings=tuple(group),
            happened=_happened(group, rejected_beats[check]),
            where=_where(group),
            costs=_costs(check, group, rejected_beats[check], lost_runs.get(check, {}), withheld),
            remedy=next((sentence(finding["remedy"]) for finding in group if finding.get("remedy")), ""),
        )
        for position, (check, group) in enumerate(ranked)
    )
    by_check = {reason.check: reason for reason in ordered}
    return Reasons(ordered, by_check, _marks(runs, findings, {check: place for place, check in enumerate(by_check)}))


def is_decisive(finding: Finding) -> bool:
    """Return whether a finding took something away, or would have to be answered for: a fail, or whatever rejects or withholds."""
    return finding.get("verdict") == "fail" or finding.get("action") in {"reject", "withhold"}


def _title(check: str, group: Sequence[Finding]) -> str:
    given = next((finding["title"] for finding in group if finding.get("title")), None)
    return str(given) if given else title_from_name(check)


def _lost_runs(runs: Sequence[Mapping[str, Any]]) -> dict[str, dict[str, int]]:
    """Return, for each check that made runs unusable, those runs and their beats."""
    lost: dict[str, dict[str, int]] = {}
    for run in runs:
        if run.get("verdict") == "unusable":
            for check in split_reasons(run.get("reasons")):
                lost.setdefault(check, {})[str(run["run"])] = len(run.get("beats") or ())
    return lost


def _happened(group: Sequence[Finding], rejected_beats: int) -> str:
    """Return what the worst finding says."""
    if not group:
        return (
            f"Named as the reason for {counted(rejected_beats, 'beat')}."
            if rejected_beats
            else "Named as a reason without a measured value."
        )
    return sentence(group[0].get("reason")) or "The check did not pass."


def _where(group: Sequence[Finding]) -> str:
    """Return the runs and beats a reason was found in; nothing where it concerns the whole acquisition."""
    deciding = [finding for finding in group if is_decisive(finding)]
    places = list(dict.fromkeys(filter(None, (_place(finding) for finding in deciding or group))))
    return sentence(f"in {listing(places, 4)}") if places else ""


def _place(finding: Finding) -> str:
    run, beats = finding.get("run"), finding.get("beats") or ()
    if not run:
        return ""
    if not beats:
        return str(run)
    return f"{run} (beat{'' if len(beats) == 1 else 's'} {number_ranges(beats, 5)})"


def _withheld_by(rows: Iterable[Mapping[str, Any]], groups: Mapping[str, Sequence[Finding]]) -> dict[str, set[str]]:
    """Return, for each withheld index, the checks its recorded reasons name; where they name none, every check stays possible."""
    withheld: dict[str, set[str]] = {}
    for row in rows:
        if row.get("status") == "withheld":
            told = str(row.get("reason") or "")
            named = {
                check for check, group in groups.items() if check in told or any(str(item.get("reason") or check) in told for item in group)
            }
            withheld.setdefault(str(row.get("index")), set()).update(named or groups)
    return withheld


def _costs(
    check: str, group: Sequence[Finding], rejected_beats: int, lost_runs: Mapping[str, int], withheld: Mapping[str, set[str]]
) -> str:
    """Return what the check took away, in one sentence."""
    parts = []
    if lost_runs:
        whole = [f"{run} ({counted(beats, 'beat')})" if beats else run for run, beats in lost_runs.items()]
        parts.append(f"the whole of {listing(whole, 3)}")
    elif rejected_beats:
        parts.append(counted(rejected_beats, "beat"))
    spoiled = {str(index) for finding in group if is_decisive(finding) for index in finding.get("spoils") or ()}
    gone = sorted(index for index in spoiled if not withheld or check in withheld.get(index, ()))
    if gone:
        parts.append(f"{counted(len(gone), 'index')}: {listing(gone, 8)}")
    if parts:
        return sentence(" and ".join(parts))
    if any(finding.get("verdict") == "fail" for finding in group) and not any(finding.get("action") == "query" for finding in group):
        return "Nothing more: what it reaches is kept by other runs, or lost already."
    if any(finding.get("action") == "correct" for finding in group):
        return "Nothing is lost: it was corrected, and the interval carries it."
    if any(finding.get("action") == "query" for finding in group):
        return "Nothing is lost yet, but the site should answer."
    return "Nothing is lost: it is only flagged." if check and group else "The verdict."


def _marks(runs: Sequence[Mapping[str, Any]], findings: Sequence[Finding], rank: Mapping[str, int]) -> dict[str, dict[int, BeatMark]]:
    flagged: dict[tuple[str, int], set[str]] = {}
    for finding in findings:
        for beat in finding.get("beats") or ():
            flagged.setdefault((str(finding.get("run")), int(beat)), set()).add(str(finding["check"]))
    marks: dict[str, dict[int, BeatMark]] = {}
    for run in runs:
        name = str(run["run"])
        for beat in run.get("beats") or ():
            rejected = set(split_reasons(beat.get("reasons"))) if beat.get("verdict") == "rejected" else set()
            others = flagged.get((name, int(beat["beat"])), set()) - rejected
            ordered = [tuple(sorted(group, key=lambda check: rank[check])) for group in (rejected, others)]
            marks.setdefault(name, {})[int(beat["beat"])] = BeatMark(*ordered)
    return marks
