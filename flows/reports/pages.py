"""Write the pages of a night: plain HTML and one style sheet that open from a folder, with no script and nothing from outside.

The same views give the same bytes: no clock is read, every number has one form, and all order comes from the views.
"""

from __future__ import annotations

from functools import cache
from pathlib import Path
from typing import TYPE_CHECKING, Any

from jinja2 import Environment, FileSystemLoader, StrictUndefined

from flows.intake.durable import write_text
from flows.reports import acquisition_sections, index_sections, night_sections
from flows.reports.figures_intervals import interval_axis
from flows.reports.figures_loops import shapes
from flows.reports.figures_ribbon import legend_cell
from flows.reports.figures_sites import status_sign
from flows.reports.reasons import reasons_of
from flows.reports.views import acquisition_page
from flows.reports.wording import counted, instant, listing, number, visible

if TYPE_CHECKING:
    from collections.abc import Iterable

    from flows.reports.views import AcquisitionRow, AcquisitionView, NightView

CAUTION = "For research and quality assurance only. Not for diagnosis or treatment: licensed clinicians and the rules of the place decide."
MOST_REASONS = 5
_HERE = Path(__file__).parent
_DECISIONS = {
    "accepted": "Take it",
    "queried": "Ask the site",
    "rejected": "Do not use it",
}


def write_report(folder: Path, night: NightView, acquisitions: Iterable[AcquisitionView]) -> None:
    """Write ``index.html``, ``acquisitions/<acquisition>.html`` and ``style.css`` into ``folder``; views are drawn one at a time.

    Raises ValueError unless the views are those of the night's acquisitions, each once: a page that a link promises must exist.
    """
    order = night_sections.worst_first(night.acquisitions)
    places = {row.acquisition: place for place, row in enumerate(order)}
    left = set(places)
    write_text(folder / "style.css", (_HERE / "style.css").read_text(encoding="utf-8"))
    for view in acquisitions:
        name = str(view.row["acquisition"])
        if name not in left:
            message = f"acquisition {name!r} has no row in the night, or two views"
            raise ValueError(message)
        left.remove(name)
        write_text(folder / acquisition_page(name), acquisition_html(night, view, order, places[name]))
    if left:
        message = f"acquisitions of the night without a view: {listing(sorted(left))}"
        raise ValueError(message)
    write_text(folder / "index.html", night_html(night))


def night_html(night: NightView) -> str:
    """Return the page of a night."""
    lines = night_sections.site_lines(night)
    return _render(
        "night.html",
        night=night,
        root="",
        sum=night_sections.sum_of(night),
        sites=lines,
        answer=night_sections.answer_words(lines),
        not_taken_in=night_sections.packages_with(night, night_sections.NOT_TAKEN_IN),
        seen_again=night_sections.packages_with(night, ("seen again",)),
        reasons=night_sections.reason_lines(night),
        expected=night_sections.expected_sites(night),
        acquisitions=night_sections.worst_first(night.acquisitions),
    )


def acquisition_html(night: NightView, view: AcquisitionView, order: tuple[AcquisitionRow, ...], place: int) -> str:
    """Return the page of one acquisition, which stands at ``place`` in the night's ``order``."""
    reasons = reasons_of(view)
    runs = acquisition_sections.runs_of(view.evidence)
    indices = view.indices or view.evidence.get("indices") or ()
    decisive, remarks = (acquisition_sections.cards(runs, chosen) for chosen in (reasons.decisive, reasons.remarks))
    rejected_loops = acquisition_sections.loop_groups(runs, reasons, rejected=True)
    verdict = str(view.row.get("verdict") or "")
    stage_order = dict.fromkeys(str(run["stage"]) for run in runs if run.get("stage"))
    return _render(
        "acquisition.html",
        night=night,
        root="../",
        calibration=(view.evidence.get("acquisition") or {}).get("calibration") or (),
        row=view.row,
        verdict=verdict,
        decision=_DECISIONS.get(verdict, verdict),
        counts=_counts(view, indices),
        kept=_kept(view),
        reasons=reasons,
        most_reasons=MOST_REASONS,
        ribbons=acquisition_sections.ribbon_sections(runs, reasons),
        decisive_cards=decisive,
        remark_cards=remarks,
        weight=_weight(len(decisive), len(remarks)),
        shapes=shapes(acquisition_sections.template_shapes(runs)),
        rejected_loops=rejected_loops,
        reaches=acquisition_sections.panel_reaches(runs, rejected_loops),
        flagged_loops=acquisition_sections.loop_groups(runs, reasons, rejected=False),
        accepted_loops=acquisition_sections.accepted_drawings(runs),
        preload=acquisition_sections.preload_sections(runs),
        stages=index_sections.stage_sections(indices, stage_order),
        published=index_sections.count_status(indices, "published"),
        withheld=index_sections.count_status(indices, "withheld"),
        changes=index_sections.change_lines(view.changes),
        before=order[place - 1] if place else None,
        after=order[place + 1] if place + 1 < len(order) else None,
        position=f"{place + 1} of {len(order)}",
    )


def _counts(view: AcquisitionView, indices: Iterable[Any]) -> str:
    rows = list(indices)
    published, withheld = index_sections.count_status(rows, "published"), index_sections.count_status(rows, "withheld")
    return f"{_kept(view)}. {counted(published, 'index')} published, {withheld} withheld."


def _kept(view: AcquisitionView) -> str:
    beats = view.row.get("beats") or 0
    return f"{view.row.get('beats_accepted') or 0} of {counted(beats, 'beat')} accepted" if beats else "No beat was found"


def _weight(decisive: int, remarks: int) -> str:
    parts = [f"{counted(decisive, 'finding')} {'decides' if decisive == 1 else 'decide'}"] if decisive else []
    parts += [f"{remarks if parts else counted(remarks, 'finding')} only flagged"] if remarks else []
    return ", ".join(parts)


@cache
def _environment() -> Environment:
    environment = Environment(
        loader=FileSystemLoader(_HERE / "templates"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
        finalize=visible,
    )
    environment.filters.update(counted=counted, instant=instant, number=number)
    environment.globals.update(status_sign=status_sign, legend_cell=legend_cell, interval_axis=interval_axis, caution=CAUTION)
    return environment


def _render(template: str, **context: object) -> str:
    return _environment().get_template(template).render(**context)
