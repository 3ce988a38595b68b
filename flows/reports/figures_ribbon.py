"""The ribbon: one cell a beat in time order.

A rejected beat is a full cell with the capital letter of its reason, a flagged one an open cell with the small letter, an accepted one
a pale cell with a dot; no verdict is told by colour alone.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from flows.reports.figures import Data, element, figure, label, line
from flows.reports.wording import counted, is_number, listing, number

if TYPE_CHECKING:
    from markupsafe import Markup

    from flows.reports.reasons import Reasons

MARGIN = 62


@dataclass(frozen=True, slots=True)
class _Layout:
    """Cells in a row, their size and what lies between them, in px."""

    in_row: int
    width: int
    height: int
    pitch: int
    row: int


_ROOMY = _Layout(in_row=39, width=19, height=24, pitch=22, row=38)
_DENSE = _Layout(in_row=50, width=15, height=17, pitch=17, row=27)
_MANY = 156


def ribbon(run: Data, reasons: Reasons, name: str) -> Markup | None:
    """Return the ribbon of one run, or None for a run without beats; ``name`` prefixes its ids."""
    beats = run.get("beats") or ()
    if not beats:
        return None
    layout = _DENSE if len(beats) > _MANY else _ROOMY
    rows = -(-len(beats) // layout.in_row)
    linked: set[str] = set()
    parts: list[Markup] = []
    for row in range(rows):
        chunk = beats[row * layout.in_row : (row + 1) * layout.in_row]
        top = 2 + row * layout.row
        start = chunk[0].get("start_s")
        parts.append(
            label(
                MARGIN - 10, top + layout.height / 2 + 4, f"{start:.0f} s" if is_number(start) else "", anchor="end", class_="label quiet"
            )
        )
        for place, beat in enumerate(chunk):
            parts.append(_cell(run, beat, reasons, (MARGIN + place * layout.pitch, top), layout, linked))
    accepted = sum(beat.get("verdict") == "accepted" for beat in beats)
    counts = f"{counted(len(beats), 'beat')}, {accepted} accepted and {len(beats) - accepted} rejected"
    return figure(
        name,
        f"Beats of {run['run']} in time order",
        f"{counts}; every cell tells its beat and its reasons.",
        (MARGIN + min(len(beats), layout.in_row) * layout.pitch + 2, rows * layout.row),
        *parts,
        role="group",
    )


def cell_words(run: Data, beat: Data, reasons: Reasons) -> str:
    """Return the whole text of a cell: beat, time, verdict and why."""
    mark = reasons.mark(str(run["run"]), int(beat["beat"]))
    words = f"Beat {beat['beat']} at {number(beat.get('start_s'), 4)} s: {beat.get('verdict')}"
    if mark.rejected_by:
        words += f" by {listing(mark.rejected_by)}"
    if mark.flagged_by:
        words += f"; flagged by {listing(mark.flagged_by)}"
    return words + ("; in the preload window" if beat.get("in_window") else "")


def _cell(run: Data, beat: Data, reasons: Reasons, place: tuple[float, float], layout: _Layout, linked: set[str]) -> Markup:
    left, top = place
    mark = reasons.mark(str(run["run"]), int(beat["beat"]))
    rejected = beat.get("verdict") != "accepted"
    kind = "rejected" if rejected else "flagged" if mark.flagged_by else "accepted"
    check = next(iter(mark.rejected_by if rejected else mark.flagged_by), None)
    words = cell_words(run, beat, reasons)
    sign = (reasons.letter_of(check) if rejected else reasons.letter_of(check).lower()) if check else "?" if rejected else "\u00b7"
    parts = [
        element("title", words),
        element("rect", x=left, y=top, width=layout.width, height=layout.height, rx=2, class_="cell"),
        label(left + layout.width / 2, top + layout.height / 2 + 4.5, sign, anchor="middle", class_="sign"),
    ]
    if beat.get("in_window"):
        below = top + layout.height + 4
        parts.append(line((left - 1.5, below), (left + layout.pitch - 1.5, below), "window-line"))
    if check is None or not reasons.by_check[check].findings:
        return element("g", *parts, class_=f"beat {kind}", role="img", aria_label=words)
    tab = "-1" if check in linked else None
    linked.add(check)
    return element("a", *parts, href=f"#{reasons.by_check[check].anchor}", class_=f"beat {kind}", aria_label=words, tabindex=tab)


def legend_cell(kind: str, sign: str) -> Markup:
    """Return one cell for the legend, drawn like those of the ribbon (``kind``: accepted, flagged, rejected or window)."""
    shown = "accepted" if kind == "window" else kind
    parts = [
        element("rect", x=1, y=1, width=_ROOMY.width, height=_ROOMY.height, rx=2, class_="cell"),
        label(1 + _ROOMY.width / 2, 17.5, sign, anchor="middle", class_="sign"),
    ]
    if kind == "window":
        parts.append(line((0, _ROOMY.height + 5), (_ROOMY.width + 2, _ROOMY.height + 5), "window-line"))
    return element(
        "svg",
        element("g", *parts, class_=f"beat {shown}"),
        width=_ROOMY.width + 2,
        height=_ROOMY.height + 8,
        viewBox=f"0 0 {_ROOMY.width + 2} {_ROOMY.height + 8}",
        aria_hidden="true",
    )
