"""The ruler beside a drawing: the measured value as a diamond, the limits as named ticks, the reach beyond a fail limit as a thick band."""

from __future__ import annotations

from collections.abc import Mapping

from markupsafe import Markup

from flows.reports.figures import Data, Scale, element, finite, label, line, scale_over, spread
from flows.reports.wording import is_number, number, quantity, unit_words

_SIGNS = {
    "suspect_above": "suspect above",
    "fail_above": "fail above",
    "suspect_below": "suspect below",
    "fail_below": "fail below",
}
_SHORT = {name: words.replace("above", ">").replace("below", "<") for name, words in _SIGNS.items()}


def limits_of(finding: Data) -> dict[str, float]:
    """Return the limits to draw, by name: all declared ones where the finding carries ``limits``, else the one it crossed."""
    declared = finding.get("limits")
    if isinstance(declared, Mapping):
        known = {name: float(declared[name]) for name in _SIGNS if is_number(declared.get(name))}
        if known:
            return known
    limit, value = finding.get("limit"), finding.get("value")
    if not is_number(limit):
        return {}
    word = "fail" if finding.get("verdict") == "fail" else "suspect"
    side = "below" if is_number(value) and value < limit else "above"
    return {f"{word}_{side}": limit}


def ruler_words(finding: Data) -> str:
    """Return in words what a ruler shows."""
    limits = limits_of(finding)
    unit = finding.get("unit")
    told = [f"{_SIGNS[name]} {quantity(value, unit)}" for name, value in limits.items()]
    return f"Measured {quantity(finding.get('value'), unit)}" + (f"; {', '.join(told)}." if told else ".")


def ruler(finding: Data, left: float, top: float, height: float) -> Markup:
    """Return an upright ruler with its axis at ``left``: about 140 px wide, ``height`` px high."""
    limits = limits_of(finding)
    scale = _scale(finding, limits, top + height - 8, top + 26)
    parts = [label(left - 6, top + 13, _head(finding), class_="label quiet"), *_bands(limits, scale, left, upright=True)]
    value = finding.get("value")
    entries = [(number_, name) for name, number_ in limits.items()]
    if is_number(value):
        entries.append((value, "value"))
    places = spread([scale.at(number_) for number_, _ in entries], 17, top + 24, top + height - 2)
    for (number_, name), place in zip(entries, places, strict=True):
        spot = scale.at(number_)
        parts.append(element("path", d=f"M{left + 8:.1f} {spot:.1f}L{left + 17:.1f} {place:.1f}", class_="leader"))
        if name == "value":
            parts.append(_diamond(left, spot))
            parts.append(label(left + 20, place + 5, number(number_), class_="label value"))
        else:
            parts.append(line((left - 8, spot), (left + 8, spot), f"tick {name.split('_')[0]}"))
            parts.append(label(left + 20, place + 4, f"{_SHORT[name]} {number(number_)}"))
    return Markup("").join(parts)


def flat_ruler(finding: Data, width: float) -> Markup:
    """Return a lying ruler, 84 px high: the value's name above the axis, the limits' names below it."""
    limits = limits_of(finding)
    axis = 38.0
    scale = _scale(finding, limits, 14, width - 14)
    parts = [line((4, axis), (width - 4, axis), "axis"), *_bands(limits, scale, axis, upright=False)]
    names = [f"{_SIGNS[name]} {quantity(value, finding.get('unit'))}" for name, value in limits.items()]
    half = max((len(name) for name in names), default=0) * 3.2
    places = spread([scale.at(value) for value in limits.values()], 2 * half + 10, half, width - half)
    for name, words, place in zip(limits, names, places, strict=True):
        spot = scale.at(limits[name])
        parts.append(line((spot, axis - 8), (spot, axis + 8), f"tick {name.split('_')[0]}"))
        parts.append(element("path", d=f"M{spot:.1f} {axis + 8:.1f}L{place:.1f} {axis + 20:.1f}", class_="leader"))
        parts.append(label(place, axis + 33, words, anchor="middle"))
    value = finding.get("value")
    if is_number(value):
        spot = scale.at(value)
        parts.append(_diamond(spot, axis))
        words = quantity(value, finding.get("unit"))
        side = "end" if spot > width * 0.8 else "start" if spot < width * 0.2 else "middle"
        parts.append(label(spot, axis - 14, words, anchor=side, class_="label value"))
    return Markup("").join(parts)


def _head(finding: Data) -> str:
    unit = unit_words(finding.get("unit"))
    return f"in {unit}" if unit and not unit.startswith("per ") else unit or "measured"


def _scale(finding: Data, limits: Mapping[str, float], start: float, end: float) -> Scale:
    values = finite([*limits.values(), finding.get("value")])
    if values and 0 < min(values) < 0.8 * max(values):
        values.append(0.0)
    return scale_over(values, start, end, room=0.12)


def _diamond(x: float, y: float) -> Markup:
    return element("path", d=f"M{x:.1f} {y - 7:.1f}L{x + 7:.1f} {y:.1f}L{x:.1f} {y + 7:.1f}L{x - 7:.1f} {y:.1f}Z", class_="diamond")


def _bands(limits: Mapping[str, float], scale: Scale, axis: float, *, upright: bool) -> list[Markup]:
    """Return the axis, with a thin band from a suspect limit outward and a thick one from a fail limit outward."""
    parts = [line((axis, scale.start_px), (axis, scale.end_px), "axis")] if upright else []
    for name, limit in sorted(limits.items(), key=lambda item: item[0].startswith("fail")):
        outer = scale.end_px if name.endswith("above") else scale.start_px
        near, far = sorted((scale.at(limit), outer))
        thick = 7.0 if name.startswith("fail") else 3.0
        box = {"x": axis - thick / 2, "y": near, "width": thick, "height": far - near}
        if not upright:
            box = {"x": near, "y": axis - thick / 2, "width": far - near, "height": thick}
        parts.append(element("rect", class_=f"band {name.split('_')[0]}", **box))
    return parts
