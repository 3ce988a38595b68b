"""Loops as small multiples: one small loop a beat, the run's template faint behind it, all of one run on one pair of axes."""

from __future__ import annotations

from typing import TYPE_CHECKING

from flows.reports.figures import Data, Scale, element, figure, finite, joined, label, line, text_width, trail
from flows.reports.wording import counted, number

if TYPE_CHECKING:
    from collections.abc import Sequence

    from markupsafe import Markup

PANEL = (118, 108)
_TOGETHER = (270, 216)
_MOST_TOGETHER = 40


def run_scales(run: Data, left: float, right: float, bottom: float, top: float) -> tuple[Scale, Scale]:
    """Return the axes that all panels of a run share.

    They hold every loop of the run, but reach no further than one span of the template beyond it, so that one wild beat cannot
    shrink all others to a dot.
    """
    scales = []
    for key, start, end in (("volume_ml", left, right), ("pressure_mmhg", bottom, top)):
        template = finite((run.get("template") or {}).get(key) or ())
        values = finite(value for loop in run.get("loops") or () for value in loop[key]) or [0.0, 1.0]
        low, high = min([*values, *template]), max([*values, *template])
        if template:
            span = max(max(template) - min(template), 1e-6)
            low, high = max(low, min(template) - span), min(high, max(template) + span)
        if high - low <= 0:
            low, high = low - 0.5, high + 0.5
        scales.append(Scale(low - 0.04 * (high - low), high + 0.04 * (high - low), start, end))
    return scales[0], scales[1]


def panel_reach(run: Data) -> str:
    """Return in words what the shared axes of a run's panels hold."""
    x, y = panel_scales(run)
    volume, pressure = (f"{number(round(scale.low))} to {number(round(scale.high))}" for scale in (x, y))
    return f"{volume} mL by {pressure} mmHg"


def template_shape(run: Data, name: str) -> Markup | None:
    """Return the template's path at panel size, to be placed once on a page and used by every panel; None without a template."""
    template = run.get("template")
    if not template:
        return None
    x, y = panel_scales(run)
    outline = trail(template["volume_ml"], template["pressure_mmhg"], x, y) + "Z"
    return element("path", id=name, d=outline, class_="template small")


def loop_panel(axes: tuple[Scale, Scale], loop: Data, words: str, name: str, template_name: str | None, *, kept: bool) -> Markup:
    """Return the panel of one beat, 118 x 108 px; what leaves the shared axes is cut off and the panel says so.

    ``axes`` are the run's `panel_scales`, ``template_name`` is the id of its template's shape.
    """
    x, y = axes
    width, height = PANEL
    outside = [value for scale, key in ((x, "volume_ml"), (y, "pressure_mmhg")) for value in finite(loop[key]) if not scale.holds(value)]
    volume, pressure = finite(loop["volume_ml"]), finite(loop["pressure_mmhg"])
    told = (
        "No samples."
        if not volume or not pressure
        else (
            f"Volume {number(min(volume))} to {number(max(volume))} mL, pressure {number(min(pressure))} to {number(max(pressure))} mmHg."
        )
    )
    parts = [element("rect", x=0.5, y=0.5, width=width - 1, height=height - 19, class_="pane")]
    if template_name:
        parts.append(element("use", href=f"#{template_name}"))
    inner = element("path", d=trail(loop["volume_ml"], loop["pressure_mmhg"], x, y), class_="kept" if kept else "this")
    parts.append(element("svg", inner, x=0, y=0, width=width, height=height - 18, overflow="hidden"))
    parts.append(label(2, height - 4, f"beat {loop['beat']}", class_="label"))
    if outside:
        parts.append(label(width - 2, height - 4, "cut off", anchor="end", class_="label value"))
        told += " It is drawn cut off at the edge."
    return figure(name, words, told, PANEL, *parts)


def accepted_together(run: Data, name: str) -> Markup | None:
    """Return all kept accepted loops of a run in one drawing, the template over them; None where there is none."""
    accepted = {beat["beat"] for beat in run.get("beats") or () if beat.get("verdict") == "accepted"}
    loops = [loop for loop in run.get("loops") or () if loop["beat"] in accepted]
    if not loops:
        return None
    step = -(-len(loops) // _MOST_TOGETHER)
    shown = loops[::step]
    width, height = _TOGETHER
    x, y = run_scales({**run, "loops": loops}, 38, width - 8, height - 34, 14)
    bottom = y.start_px
    parts = [element("path", d=trail(loop["volume_ml"], loop["pressure_mmhg"], x, y), class_="kept thin") for loop in shown]
    template = run.get("template")
    if template:
        parts.append(element("path", d=trail(template["volume_ml"], template["pressure_mmhg"], x, y) + "Z", class_="template over"))
    parts += [line((38, bottom), (width - 8, bottom), "axis"), line((38, bottom), (38, 14), "axis")]
    for tick in x.ticks(4):
        middle = min(x.at(tick), width - text_width(number(tick)) / 2)
        parts.append(label(middle, bottom + 15, number(tick), anchor="middle", class_="label quiet"))
    for tick in y.ticks(4):
        parts.append(label(33, y.at(tick) + 4, number(tick), anchor="end", class_="label quiet"))
    parts += [label(width - 8, bottom + 29, "mL", anchor="end", class_="label quiet"), label(42, 18, "mmHg", class_="label quiet")]
    told = f"{counted(len(shown), 'accepted loop')} of {counted(len(accepted), 'accepted beat')}, with the median loop over them."
    return figure(name, f"Accepted beats of {run['run']} drawn together", told, _TOGETHER, *parts)


def shapes(parts: Sequence[Markup]) -> Markup:
    """Return shapes kept for use on a page: they take no room and are not drawn themselves."""
    return element("svg", element("defs", joined(parts)), width=0, height=0, class_="shapes", aria_hidden="true")


def panel_scales(run: Data) -> tuple[Scale, Scale]:
    """Return the axes of a run's panels, to be worked out once a run."""
    return run_scales(run, 5, PANEL[0] - 5, PANEL[1] - 23, 5)
