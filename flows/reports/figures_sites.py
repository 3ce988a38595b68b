"""What each site sent: one cell a package, by status; every status has a sign of its own."""

from __future__ import annotations

from typing import TYPE_CHECKING

from flows.reports.figures import element, figure, label
from flows.reports.wording import counted

if TYPE_CHECKING:
    from markupsafe import Markup

    from flows.reports.views import SiteCount

STATUSES = ("accepted", "queried", "rejected", "quarantined", "waiting", "superseded")
SIGNS = {
    "accepted": "\u00b7",
    "queried": "?",
    "rejected": "\u00d7",
    "quarantined": "!",
    "waiting": "\u2026",
    "superseded": "\u2190",
    "seen again": "=",
}
_CELL, _PITCH, _IN_ROW = 17, 20, 16


def package_cells(site: SiteCount, name: str) -> Markup | None:
    """Return the packages of one site as a row of cells, those that need an answer first; None for a site that sent nothing."""
    order = ("queried", "quarantined", "rejected", "accepted", "waiting", "superseded")
    cells = [status for status in order for _ in range(getattr(site, status))]
    if not cells:
        return None
    parts = [package_cell(status, (index % _IN_ROW) * _PITCH + 1, (index // _IN_ROW) * _PITCH + 1) for index, status in enumerate(cells)]
    told = ", ".join(f"{getattr(site, status)} {status}" for status in STATUSES if getattr(site, status))
    size = (min(len(cells), _IN_ROW) * _PITCH, (-(-len(cells) // _IN_ROW)) * _PITCH)
    return figure(name, f"What {site.site} sent", f"{counted(len(cells), 'package')}: {told}.", size, *parts)


def package_cell(status: str, left: float = 1, top: float = 1) -> Markup:
    """Return one cell with the sign of its status."""
    box = element("rect", x=left, y=top, width=_CELL, height=_CELL, rx=2, class_="cell")
    sign = label(left + _CELL / 2, top + 13, SIGNS.get(status, "?"), anchor="middle", class_="sign")
    return element("g", box, sign, class_=f"package {status.replace(' ', '-')}")


def status_sign(status: str) -> Markup:
    """Return the cell of a status alone, to stand before its word."""
    return element("svg", package_cell(status), class_="status-sign", width=19, height=19, viewBox="0 0 19 19", aria_hidden="true")


def share_bar(value: int, most: int, width: int = 84) -> Markup:
    """Return a plain bar for a count; the number stands beside it in the table."""
    length = width * value / most if most else 0.0
    bar = element("rect", x=0, y=3, width=float(length), height=8, class_="share")
    return element("svg", bar, class_="share-bar", width=width, height=14, viewBox=f"0 0 {width} 14", aria_hidden="true")
