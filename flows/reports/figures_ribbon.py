"""The ribbon: one cell a beat in time order.

A rejected beat is a full cell with the capital letter of its reason, a flagged one an open cell with the small letter, an accepted one
a pale cell with a dot; no verdict is told by colour alone.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

from flows.reports.figures import Data, element, figure, label, line
from flows.reports.wording import counted, is_number, listing, number

if TYPE_CHECKING:
    from markupsafe import Markup

    from flows.reports.reasons import Reasons

CELLS_IN_ROW = 40
CELL_WIDTH, CELL_HEIGHT, PITCH, ROW_HEIGHT, MARGIN = 19, 24, 22, 38, 62


def ribbon(run: Data, reasons: Reasons, name: str) -> Markup | None:
    """Return the ribbon of one run, or None for a run without beats; ``name`` prefixes its ids."""
    beats = run.get("beats") or ()
    if not beats:
        return None
    rows = -(-len(beats) // CELLS_IN_ROW)
    linked: set[str] = set()
    parts: list[Markup] = []
    for row in range(rows):
        chunk = beats[row * CELLS_IN_ROW : (row + 1) * CELLS_IN_ROW]
        top = 2 + row * ROW_HEIGHT
        start = chunk[0].get("start_s")
        parts.append(label(MARGIN - 10, top + 16, f"{start:.0f} s" if is_number(start) else "", anchor="end", class_="label quiet"))
        for place, beat in enumerate(chunk):
            parts.append(_cell(run, beat, reasons, (MARGIN + place * PITCH, top), linked))
    accepted = sum(beat.get("verdict") == "accepted" for beat in beats)
    counts = f"{counted(len(beats), 'beat')}, {accepted} accepted and {len(beats) - accepted} rejected"
    return figure(
        name,
        f"Beats of {run['run']} in time order",
        f"{counts}; every cell tells its beat and its reasons.",
        (MARGIN + min(len(beats), CELLS_IN_ROW) * PITCH + 2, rows * ROW_HEIGHT),
        *parts,
        role="group",
    )


def cell_words(run: Data, beat: Data, reasons: Reasons) -> str:
    """Return the whole text of a cell: beat, time, verdict and why."""
    mark = reasons.mark(str(run["run"]), int(beat["beat"]))
    words = f"Beat {beat['beat']} at {number(beat.get('start_s'), 4)} s: {beat.get('verdict')}"
    if mark.rejected_by:
        words += f" for {listing([reasons.title_of(check).lower() for check in mark.rejected_by])}"
    if mark.flagged_by:
        words += f"; flagged for {listing([reasons.title_of(check).lower() for check in mark.flagged_by])}"
    return words + ("; in the preload window" if beat.get("in_window") else "")


def _cell(run: Data, beat: Data, reasons: Reasons, place: tuple[float, float], linked: set[str]) -> Markup:
    left, top = place
    mark = reasons.mark(str(run["run"]), int(beat["beat"]))
    rejected = beat.get("verdict") != "accepted"
    kind = "rejected" if rejected else "flagged" if mark.flagged_by else "accepted"
    check = next(iter(mark.rejected_by if rejected else mark.flagged_by), None)
    words = cell_words(run, beat, reasons)
    sign = (reasons.letter_of(check) if rejected else reasons.letter_of(check).lower()) if check else "?" if rejected else "\u00b7"
    parts = [
        element("title", words),
        element("rect", x=left, y=top, width=CELL_WIDTH, height=CELL_HEIGHT, rx=2, class_="cell"),
        label(left + CELL_WIDTH / 2, top + 16.5, sign, anchor="middle", class_="sign"),
    ]
    if beat.get("in_window"):
        parts.append(line((left - 1.5, top + CELL_HEIGHT + 4), (left + PITCH - 1.5, top + CELL_HEIGHT + 4), "window-line"))
    if check is None or not reasons.by_check[check].findings:
        return element("g", *parts, class_=f"beat {kind}", role="img", aria_label=words)
    tab = "-1" if check in linked else None
    linked.add(check)
    return element("a", *parts, href=f"#{reasons.by_check[check].anchor}", class_=f"beat {kind}", aria_label=words, tabindex=tab)


def legend_cell(kind: str, sign: str) -> Markup:
    """Return one cell for the legend, drawn like those of the ribbon (``kind``: accepted, flagged, rejected or window)."""
    shown = "accepted" if kind == "window" else kind
    parts = [
        element("rect", x=1, y=1, width=CELL_WIDTH, height=CELL_HEIGHT, rx=2, class_="cell"),
        label(1 + CELL_WIDTH / 2, 17.5, sign, anchor="middle", class_="sign"),
    ]
    if kind == "window":
        parts.append(line((0, CELL_HEIGHT + 5), (CELL_WIDTH + 2, CELL_HEIGHT + 5), "window-line"))
    return element(
        "svg",
        element("g", *parts, class_=f"beat {shown}"),
        width=CELL_WIDTH + 2,
        height=CELL_HEIGHT + 8,
        viewBox=f"0 0 {CELL_WIDTH + 2} {CELL_HEIGHT + 8}",
        aria_hidden="true",
    )
