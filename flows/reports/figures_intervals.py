"""How sure a value is: its intervals on one axis of per cent around the value, so that indices of any unit can be compared."""

from __future__ import annotations

from typing import TYPE_CHECKING

from flows.reports.figures import Data, Scale, element, figure, label, line
from flows.reports.wording import is_number, number

if TYPE_CHECKING:
    from markupsafe import Markup

SIZE = (132, 22)
REACH_PERCENT = 50.0


def interval_figure(row: Data, name: str) -> Markup | None:
    """Return the interval of one index row: thin for everything, thick for the fit alone, a dot for the value.

    Where only the fit has an interval, that one is drawn.

    An interval that leaves the axis ends in an arrow head. None without a value, without an interval, or where the value is so near
    to zero against its interval that per cent of it say nothing.
    """
    value, low, high = row.get("value"), row.get("ci_low"), row.get("ci_high")
    if not (is_number(low) and is_number(high)):
        low, high = row.get("fit_ci_low"), row.get("fit_ci_high")
    if not (is_number(value) and is_number(low) and is_number(high)) or value == 0 or abs(value) < 0.2 * (high - low):
        return None
    axis, middle = Scale(-REACH_PERCENT, REACH_PERCENT, 8, SIZE[0] - 8), SIZE[1] / 2
    percents = sorted(100 * (bound - value) / value for bound in (low, high))
    parts = [line((axis.at(0), 2), (axis.at(0), SIZE[1] - 2), "tick-line"), *_bar(axis, percents, middle, "reach")]
    fit = [row.get("fit_ci_low"), row.get("fit_ci_high")]
    if is_number(fit[0]) and is_number(fit[1]):
        parts += _bar(axis, sorted(100 * (bound - value) / value for bound in fit if is_number(bound)), middle, "reach fit-reach")
    parts.append(element("circle", cx=axis.at(0), cy=middle, r=3.5, class_="dot"))
    words = f"From {number(percents[0], 2)} to {number(percents[1], 2)} per cent of the value."
    return figure(name, f"Interval of {row.get('index')}", words, SIZE, *parts)


def interval_axis() -> Markup:
    """Return the head of the column: the axis the intervals share."""
    axis = Scale(-REACH_PERCENT, REACH_PERCENT, 8, SIZE[0] - 8)
    reach = f"{REACH_PERCENT:.0f} %"
    parts = [
        label(axis.at(-REACH_PERCENT) - 8, 13, f"\u2212{reach}", class_="label quiet"),
        label(axis.at(0), 13, "value", anchor="middle", class_="label quiet"),
        label(axis.at(REACH_PERCENT) + 8, 13, f"+{reach}", anchor="end", class_="label quiet"),
    ]
    return element("svg", *parts, width=SIZE[0], height=18, viewBox=f"0 0 {SIZE[0]} 18", aria_hidden="true")


def _bar(axis: Scale, percents: list[float], middle: float, class_: str) -> list[Markup]:
    low, high = (min(max(bound, -REACH_PERCENT), REACH_PERCENT) for bound in percents)
    parts = [line((axis.at(low), middle), (axis.at(high), middle), class_)]
    for bound, way in ((percents[0], -1), (percents[1], 1)):
        if abs(bound) > REACH_PERCENT and "fit" not in class_:
            tip = axis.at(way * REACH_PERCENT) + way * 5
            parts.append(element("path", d=f"M{tip:.1f} {middle:.1f}l{-way * 7} -5v10Z", class_="arrow"))
    return parts
