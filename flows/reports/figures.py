"""Primitives of drawing: numbers in, SVG text out. Colours are names of the style sheet, so that a figure follows the reader's theme."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from markupsafe import Markup, escape

from flows.reports.wording import CONTROL, is_number

Numbers = Sequence[float | None]
Data = Mapping[str, Any]


def _attribute(value: object) -> str:
    if isinstance(value, float):
        return f"{value:.1f}".removesuffix(".0")
    return str(escape(str(value).translate(CONTROL)))


def element(tag: str, *children: object, **attributes: object) -> Markup:
    """Return one element with everything escaped.

    ``stroke_width=2`` becomes ``stroke-width="2"``, ``class_`` becomes ``class``, None is left out.
    """
    words = "".join(
        f' {name.rstrip("_").replace("_", "-")}="{_attribute(value)}"' for name, value in attributes.items() if value is not None
    )
    inside = "".join(str(child if isinstance(child, Markup) else escape(str(child).translate(CONTROL))) for child in children)
    return Markup(f"<{tag}{words}>{inside}</{tag}>")  # noqa: S704  (every part is escaped just above)


def joined(parts: Iterable[Markup]) -> Markup:
    """Return the parts one after the other."""
    return Markup("").join(parts)


def figure(name: str, title: str, description: str, size: tuple[float, float], *children: object, role: str = "img") -> Markup:
    """Return a whole figure of ``size`` (width, height in px) with its title and description; ``name`` is unique on its page.

    With role ``group`` what is inside stays open to keyboard and screen reader; with ``img`` the description stands for it.
    """
    width, height = size
    return element(
        "svg",
        element("title", title, id=f"{name}-title"),
        element("desc", description, id=f"{name}-desc"),
        *children,
        class_="figure",
        role=role,
        aria_labelledby=f"{name}-title {name}-desc",
        width=width,
        height=height,
        viewBox=f"0 0 {width:g} {height:g}",
    )


def finite(values: Iterable[object]) -> list[float]:
    """Return the finite numbers among ``values``."""
    return [float(value) for value in values if is_number(value)]


def column(rows: Iterable[Data], key: str) -> list[float]:
    """Return the finite numbers of one key over rows."""
    return finite(row.get(key) for row in rows)


@dataclass(frozen=True, slots=True)
class Scale:
    """A straight map from values to pixels; ``start_px`` may lie right of or below ``end_px``."""

    low: float
    high: float
    start_px: float
    end_px: float

    def at(self, value: float) -> float:
        """Return the place of a value in px, at most one length of the scale beyond its ends."""
        share = (value - self.low) / (self.high - self.low)
        return self.start_px + min(max(share, -1.0), 2.0) * (self.end_px - self.start_px)

    def holds(self, value: float) -> bool:
        """Return whether a value lies between the two ends."""
        return self.low <= value <= self.high

    def ticks(self, about: int = 4) -> list[float]:
        """Return round values between the ends, about so many."""
        raw = (self.high - self.low) / max(about, 1)
        power = 10.0 ** math.floor(math.log10(raw))
        step = next(power * factor for factor in (1.0, 2.0, 5.0, 10.0) if power * factor >= raw * 0.999)
        first = math.ceil(self.low / step - 1e-9)
        last = math.floor(self.high / step + 1e-9)
        return [index * step for index in range(first, last + 1)]


def scale_over(values: Iterable[object], start_px: float, end_px: float, *, room: float = 0.06) -> Scale:
    """Return a scale that holds all finite values with some room at both ends; with no value it runs from 0 to 1."""
    known = finite(values)
    low, high = (min(known), max(known)) if known else (0.0, 1.0)
    span = high - low
    if span <= 1e-9 * max(abs(low), abs(high), 1e-9):
        span = max(abs(high), 1e-9) if high else 1.0
        low, high = low - span / 2, high + span / 2
    return Scale(low - room * span, high + room * span, start_px, end_px)


def trail(xs: Numbers, ys: Numbers, x: Scale, y: Scale) -> str:
    """Return path data through the points; a missing coordinate breaks the line instead of being bridged."""
    parts, pen = [], "M"
    for one, other in zip(xs, ys, strict=False):
        if is_number(one) and is_number(other):
            parts.append(f"{pen}{x.at(one):.1f} {y.at(other):.1f}")
            pen = "L"
        else:
            pen = "M"
    return "".join(parts)


def label(x: float, y: float, text: object, *, anchor: str = "start", class_: str = "label") -> Markup:
    """Return text at a place."""
    return element("text", text, x=x, y=y, text_anchor=None if anchor == "start" else anchor, class_=class_)


def line(start: tuple[float, float], end: tuple[float, float], class_: str) -> Markup:
    """Return a straight line."""
    return element("line", x1=start[0], y1=start[1], x2=end[0], y2=end[1], class_=class_)


def text_width(text: str, size_px: float = 12.0) -> float:
    """Return about how wide text is in px: enough to keep labels apart in any usual font."""
    return 0.6 * size_px * len(text)


def spread(places: Sequence[float], gap: float, low: float, high: float) -> list[float]:
    """Return places near the given ones, in the same order, at least ``gap`` apart and between ``low`` and ``high`` where that fits."""
    order = sorted(range(len(places)), key=lambda index: (places[index], index))
    result = list(places)
    floor = low
    for index in order:
        result[index] = max(result[index], floor)
        floor = result[index] + gap
    ceiling = high
    for index in reversed(order):
        result[index] = min(result[index], ceiling)
        ceiling = result[index] - gap
    return result
