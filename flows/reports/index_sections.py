"""The indices of an acquisition, stage by stage: what is published with how sure it is, and right beside it what is withheld and why."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from flows.reports.figures_intervals import interval_figure
from flows.reports.wording import MISSING, is_number, number, quantity, sentence, unit_words

if TYPE_CHECKING:
    from collections.abc import Iterable, Sequence

    from markupsafe import Markup

    from flows.reports.views import Row

_WHOLE = "the whole acquisition"


@dataclass(frozen=True, slots=True)
class IndexLine:
    """One published index as text, with its interval drawn (None where there is nothing to draw)."""

    index: str
    value: str
    unit: str
    interval: str
    estimator: str
    beats: str
    run: str
    figure: Markup | None


@dataclass(frozen=True, slots=True)
class Withheld:
    """Indices withheld for one and the same reason."""

    reason: str
    indices: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class StageSection:
    """One stage: primary indices published, primary indices withheld by reason, and every further estimate or single run."""

    stage: str
    published: tuple[IndexLine, ...]
    withheld: tuple[Withheld, ...]
    others: tuple[IndexLine, ...]
    others_withheld: tuple[Withheld, ...]


@dataclass(frozen=True, slots=True)
class ChangeLine:
    """One index between two stages as text."""

    stages: str
    index: str
    part: str
    difference: str
    interval: str
    reason: str


def stage_sections(rows: Sequence[Row], stage_order: Iterable[str]) -> tuple[StageSection, ...]:
    """Return the stages in the order given, then any other; rows keep their order."""
    stages = [str(row.get("stage") or _WHOLE) for row in rows]
    order = [stage for stage in dict.fromkeys([*stage_order, *stages]) if stage in stages]
    sections = []
    for place, stage in enumerate(order, start=1):
        own = [row for row, name in zip(rows, stages, strict=True) if name == stage]
        primary = [row for row in own if row.get("primary")]
        others = [row for row in own if not row.get("primary")]
        sections.append(
            StageSection(
                stage=stage,
                published=_lines(primary, f"interval-{place}"),
                withheld=_withheld(primary),
                others=_lines(others, f"further-interval-{place}"),
                others_withheld=_withheld(others),
            )
        )
    return tuple(sections)


def count_status(rows: Iterable[Row], status: str) -> int:
    """Return how many primary indices have this status."""
    return sum(1 for row in rows if row.get("primary") and row.get("status") == status)


def change_lines(rows: Iterable[Row]) -> tuple[ChangeLine, ...]:
    """Return the changes between stages; a withheld one shows its reason in place of a difference, a published one what to know of it."""
    return tuple(
        ChangeLine(
            stages=f"{row.get('from_stage')} to {row.get('to_stage')}",
            index=str(row.get("index")),
            part=str(row.get("part") or ""),
            difference=quantity(row.get("difference"), row.get("unit")) if row.get("status") == "published" else "withheld",
            interval=_interval(row) if row.get("status") == "published" else "",
            reason=sentence(row.get("reason")),
        )
        for row in rows
    )


def _lines(rows: Iterable[Row], name: str) -> tuple[IndexLine, ...]:
    published = [row for row in rows if row.get("status") == "published"]
    return tuple(
        IndexLine(
            index=str(row.get("index")),
            value=number(row.get("value")),
            unit=unit_words(row.get("unit")),
            interval=_interval(row),
            estimator=str(row.get("estimator") or ""),
            beats=str(row["beats"]) if is_number(row.get("beats")) else MISSING,
            run=str(row.get("run") or "all runs"),
            figure=interval_figure(row, f"{name}-{place}"),
        )
        for place, row in enumerate(published, start=1)
    )


def _interval(row: Row) -> str:
    """Return the interval as text: that of everything, else that of the fit alone, said so."""
    for (low, high), note in (((row.get("ci_low"), row.get("ci_high")), ""), ((row.get("fit_ci_low"), row.get("fit_ci_high")), " (fit)")):
        if is_number(low) and is_number(high):
            return f"{number(low)} to {number(high)}{note}"
    return MISSING


def _withheld(rows: Iterable[Row]) -> tuple[Withheld, ...]:
    groups: dict[str, list[str]] = {}
    for row in rows:
        if row.get("status") != "published":
            run = f" ({row['run']})" if row.get("run") else ""
            groups.setdefault(sentence(row.get("reason")) or "No reason is recorded.", []).append(f"{row.get('index')}{run}")
    return tuple(Withheld(reason, tuple(dict.fromkeys(indices))) for reason, indices in groups.items())
