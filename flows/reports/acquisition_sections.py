"""What stands on the page of one acquisition, section by section: sentences, drawings and rows, all made from the view alone."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from flows.reports.figures import Data
from flows.reports.figures_card import card_figure
from flows.reports.figures_loops import accepted_together, loop_panel, panel_reach, panel_scales, template_shape
from flows.reports.figures_preload import preload_filling, preload_loops
from flows.reports.figures_ribbon import cell_words, ribbon
from flows.reports.reasons import is_decisive
from flows.reports.wording import counted, is_number, listing, number, number_ranges, quantity, sentence

if TYPE_CHECKING:
    from collections.abc import Sequence

    from markupsafe import Markup

    from flows.reports.reasons import Finding, Reason, Reasons

MOST_PANELS = 21
_DEEDS = {
    "reject": "These beats are rejected.",
    "withhold": "What it spoils is withheld.",
    "correct": "It was corrected; the intervals carry what is left of it.",
    "query": "The site is asked.",
    "none": "Nothing was taken away for it.",
}


@dataclass(frozen=True, slots=True)
class RibbonSection:
    """One run: its facts in words, its ribbon (None without beats) and, as text, every beat that is not plainly accepted."""

    run: str
    facts: str
    verdict: str
    kept: str
    ribbon: Markup | None
    told: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Card:
    """The evidence of one finding."""

    anchor: str
    letter: str
    decisive: bool
    title: str
    where: str
    verdict: str
    told: str
    deed: str
    measured: str
    figure: Markup | None


@dataclass(frozen=True, slots=True)
class LoopGroup:
    """The loops one reason took out of one run: those shown at once, those folded away, and what else there is to say."""

    letter: str
    check: str
    where: str
    shown: tuple[Markup, ...]
    folded: tuple[Markup, ...]
    note: str


@dataclass(frozen=True, slots=True)
class PreloadSection:
    """One preload run: its drawings and its facts."""

    run: str
    facts: str
    loops: Markup | None
    filling: Markup | None


def runs_of(evidence: Data) -> Sequence[Data]:
    """Return the runs of an evidence, an empty list where there is none."""
    runs: Sequence[Data] = evidence.get("runs") or ()
    return runs


def ribbon_sections(runs: Sequence[Data], reasons: Reasons) -> tuple[RibbonSection, ...]:
    """Return one ribbon section a run, in the order of the evidence."""
    sections = []
    for place, run in enumerate(runs, start=1):
        beats = run.get("beats") or ()
        accepted = sum(beat.get("verdict") == "accepted" for beat in beats)
        notable = [
            beat for beat in beats if beat.get("verdict") != "accepted" or reasons.mark(str(run["run"]), int(beat["beat"])).flagged_by
        ]
        sections.append(
            RibbonSection(
                run=str(run["run"]),
                facts=run_facts(run),
                verdict=str(run.get("verdict") or ""),
                kept=f"{accepted} of {counted(len(beats), 'beat')} accepted" if beats else "no beats",
                ribbon=ribbon(run, reasons, f"ribbon-{place}"),
                told=tuple(cell_words(run, beat, reasons) for beat in notable),
            )
        )
    return tuple(sections)


def run_facts(run: Data) -> str:
    """Return kind, stage, rate and length of a run in a few words; what is not known is left out."""
    parts = [str(run[key]) for key in ("kind", "manoeuvre", "stage") if run.get(key)]
    if is_number(run.get("sampling_rate_hz")):
        parts.append(f"{number(run['sampling_rate_hz'], 4)} Hz")
    if is_number(run.get("duration_s")):
        parts.append(f"{number(run['duration_s'])} s")
    return ", ".join(parts)


def cards(runs: Sequence[Data], reason_list: Sequence[Reason]) -> tuple[Card, ...]:
    """Return one card a finding, in the order of the reasons."""
    by_name = {str(run["run"]): run for run in runs}
    return tuple(
        _card(reason, finding, by_name.get(str(finding.get("run"))), place)
        for reason in reason_list
        for place, finding in enumerate(reason.findings, start=1)
    )


def _card(reason: Reason, finding: Finding, run: Data | None, place: int) -> Card:
    anchor = f"card-{reason.letter}-{place}"
    beats = finding.get("beats") or ()
    where = str(finding.get("run") or "the whole acquisition")
    if beats:
        where += f", beat{'' if len(beats) == 1 else 's'} {number_ranges(beats)}"
    measured = quantity(finding.get("value"), finding.get("unit")) if is_number(finding.get("value")) else "a fact, nothing to measure"
    if is_number(finding.get("limit")):
        measured += f", limit {quantity(finding['limit'], finding.get('unit'))}"
    return Card(
        anchor=anchor,
        letter=reason.letter if is_decisive(finding) else reason.letter.lower(),
        decisive=is_decisive(finding),
        title=reason.title,
        where=where,
        verdict=str(finding.get("verdict") or ""),
        told=sentence(finding.get("reason")),
        deed=_deed(finding),
        measured=measured,
        figure=card_figure(finding, run, f"{anchor}-figure"),
    )


def _deed(finding: Finding) -> str:
    deed = _DEEDS.get(str(finding.get("action") or "none"), sentence(finding.get("action")))
    spoils = [str(index) for index in finding.get("spoils") or ()]
    if spoils and is_decisive(finding):
        return f"{deed} It reaches {listing(sorted(spoils), 8)}."
    return deed


def template_shapes(runs: Sequence[Data]) -> list[Markup]:
    """Return the templates of all runs, each to be placed once on the page."""
    found = [template_shape(run, f"template-{place}") for place, run in enumerate(runs, start=1)]
    return [shape for shape in found if shape is not None]


def loop_groups(runs: Sequence[Data], reasons: Reasons, *, rejected: bool) -> tuple[LoopGroup, ...]:
    """Return the loops of rejected (else of only flagged) beats, a group for each reason and run; a beat stands under its first reason."""
    groups = []
    for reason in reasons.ordered:
        for place, run in enumerate(runs, start=1):
            chosen = _beats_under(run, reasons, reason.check, rejected=rejected)
            if chosen:
                groups.append(_loop_group(run, chosen, reason, place, rejected=rejected))
    return tuple(groups)


def panel_reaches(runs: Sequence[Data], groups: Sequence[LoopGroup]) -> str:
    """Return, for every run that has a group, what the axes its panels share hold."""
    shown = [run for run in runs if any(group.where.startswith(f"{run['run']}: ") for group in groups)]
    return "; ".join(f"{run['run']} {panel_reach(run)}" for run in shown)


def _beats_under(run: Data, reasons: Reasons, check: str, *, rejected: bool) -> list[int]:
    chosen = []
    for beat in run.get("beats") or ():
        mark = reasons.mark(str(run["run"]), int(beat["beat"]))
        is_rejected = beat.get("verdict") != "accepted"
        named = mark.rejected_by if rejected else mark.flagged_by
        if is_rejected == rejected and named[:1] == (check,):
            chosen.append(int(beat["beat"]))
    return chosen


def _loop_group(run: Data, chosen: Sequence[int], reason: Reason, place: int, *, rejected: bool) -> LoopGroup:
    loops = {int(loop["beat"]): loop for loop in run.get("loops") or ()}
    template = f"template-{place}" if run.get("template") else None
    verdict = "rejected" if rejected else "flagged"
    axes = panel_scales(run)
    panels = [
        loop_panel(
            axes,
            loops[beat],
            f"Beat {beat} of {run['run']}, {verdict} by {reason.check}",
            f"loop-{place}-{beat}",
            template,
            kept=not rejected,
        )
        for beat in chosen
        if beat in loops
    ]
    absent = len(chosen) - len(panels)
    return LoopGroup(
        letter=reason.letter if rejected else reason.letter.lower(),
        check=reason.check,
        where=f"{run['run']}: {counted(len(chosen), 'beat')}",
        shown=tuple(panels[:MOST_PANELS]),
        folded=tuple(panels[MOST_PANELS:]),
        note=f"For {counted(absent, 'further beat')} no loop was kept." if absent else "",
    )


def accepted_drawings(runs: Sequence[Data]) -> tuple[tuple[str, Markup], ...]:
    """Return, for each run with accepted loops, its name and those loops drawn together."""
    drawn = ((str(run["run"]), accepted_together(run, f"accepted-{place}")) for place, run in enumerate(runs, start=1))
    return tuple((run, figure) for run, figure in drawn if figure is not None)


def preload_sections(runs: Sequence[Data]) -> tuple[PreloadSection, ...]:
    """Return the preload runs in the order of the evidence."""
    sections = []
    for place, run in enumerate(runs, start=1):
        if run.get("kind") == "preload-reduction":
            drawings: tuple[Any, Any] = preload_loops(run, f"preload-{place}"), preload_filling(run, f"filling-{place}")
            sections.append(PreloadSection(str(run["run"]), f"{run_facts(run)}. {_preload_words(run)}", *drawings))
    return tuple(sections)


def _preload_words(run: Data) -> str:
    window = [beat for beat in run.get("beats") or () if beat.get("in_window")]
    accepted = sum(beat.get("verdict") == "accepted" for beat in window)
    end = run.get("line") or {}
    words = f"{counted(len(window), 'beat')} in the window, {accepted} accepted." if window else "No window was found."
    if is_number(end.get("ees_mmhg_per_ml")) and is_number(end.get("v0_ml")):
        return f"{words} Ees {quantity(end['ees_mmhg_per_ml'], 'mm[Hg]/mL')}, V0 {quantity(end['v0_ml'], 'mL')}."
    return f"{words} No line was fitted."
