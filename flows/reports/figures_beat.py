"""One beat over its run's own template, with the measured quantity drawn in, as a loop or over its cycle.

Every drawing fills a box of 276 x 232 px with its upper left corner at 0, 0 and returns its parts and what they show in words.
"""

from __future__ import annotations

from itertools import groupby, pairwise
from typing import TYPE_CHECKING

from flows.reports.figures import Data, Scale, element, finite, label, line, scale_over, text_width, trail
from flows.reports.figures_rhythm import rhythm_drawing
from flows.reports.wording import is_number, number, quantity

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

    from markupsafe import Markup

    Drawing = tuple[list[Markup], str]

WIDTH, HEIGHT = 276, 232


def drawing_for(check: str) -> Callable[[Data, Data, Data], Drawing]:
    """Return the drawing that shows what a beat check measures: a function of (finding, run, beat)."""
    return _DRAWINGS.get(check, loop_drawing)


def loop_of(run: Data, beat: int) -> Data | None:
    """Return the sampled loop of a beat, or None where none was kept."""
    return next((loop for loop in run.get("loops") or () if loop.get("beat") == beat), None)


def loop_drawing(finding: Data, run: Data, beat: Data) -> Drawing:
    """Return the beat's loop over the template, with the quantity of the check drawn in."""
    loop, template = loop_of(run, beat["beat"]), run.get("template")
    shapes = [shape for shape in (loop, template) if shape]
    if not shapes:
        return [label(10, HEIGHT / 2, "no loop was kept for this beat", class_="label quiet")], "No loop was kept for this beat."
    volumes = finite(value for shape in shapes for value in shape["volume_ml"])
    pressures = finite(value for shape in shapes for value in shape["pressure_mmhg"])
    if finding["check"] in _LEVELS:
        key = _LEVELS[finding["check"]][0]
        (volumes if key.endswith("_ml") else pressures).extend(finite([beat.get(key)]))
    x, y = scale_over(volumes, 40, WIDTH - 10), scale_over(pressures, HEIGHT - 34, 34)
    parts = [*_axes(x, y, "mL", "mmHg"), *_key(beat, has_template=template is not None)]
    if template:
        parts.append(element("path", d=trail(template["volume_ml"], template["pressure_mmhg"], x, y) + "Z", class_="template"))
    if loop:
        class_ = "this filled" if finding["check"] == "range-stroke-work" else "this"
        parts.append(element("path", d=trail(loop["volume_ml"], loop["pressure_mmhg"], x, y), class_=class_))
    marks, words = _measure(finding, beat, loop, (x, y))
    return [*parts, *marks], f"The loop of beat {beat['beat']} over the median accepted beat of its run. {words}".strip()


def cycle_drawing(finding: Data, run: Data, beat: Data) -> Drawing:
    """Return pressure and volume of the beat over its cycle, over the template; missing or frozen stretches are marked."""
    loop, template = loop_of(run, beat["beat"]), run.get("template")
    if not loop:
        return loop_drawing(finding, run, beat)
    parts = [*_key(beat, has_template=template is not None), label(WIDTH - 10, HEIGHT - 4, "one cycle", anchor="end", class_="label quiet")]
    count = len(loop["pressure_mmhg"])
    x = Scale(0, max(count - 1, 1), 40, WIDTH - 10)
    told = []
    for key, unit, top, bottom in (("pressure_mmhg", "mmHg", 34, 120), ("volume_ml", "mL", 146, HEIGHT - 20)):
        series: Sequence[float | None] = loop[key]
        y = scale_over([*series, *(template[key] if template else ())], bottom, top)
        parts += [line((40, bottom), (WIDTH - 10, bottom), "axis"), *_upright_ticks(y, unit, 2)]
        if template:
            parts.append(element("path", d=trail(range(len(template[key])), template[key], x, y), class_="template"))
        for first, last, kind in _stretches(series, frozen=finding["check"] in _FROZEN):
            left, right = x.at(max(first - 0.5, 0)), x.at(min(last + 0.5, count - 1))
            parts.append(element("rect", x=left, y=top, width=right - left, height=bottom - top, class_=f"stretch {kind}"))
            told.append(f"{'Missing' if kind == 'missing' else 'Unchanging'} {unit} for {(last - first + 1) / count:.0%} of the cycle.")
        parts.append(element("path", d=trail(range(count), series, x, y), class_="this"))
        if finding["check"] == "range-dpdt-max" and key == "pressure_mmhg":
            parts += _steepest(series, x, y, beat.get("dpdt_max_mmhg_per_s"))
    return parts, f"Pressure and volume of beat {beat['beat']} over one cycle, over the run's template. {' '.join(told)}".strip()


def _axes(x: Scale, y: Scale, x_unit: str, y_unit: str) -> list[Markup]:
    bottom = y.start_px
    parts = [line((x.start_px, bottom), (x.end_px, bottom), "axis"), *_upright_ticks(y, y_unit, 3)]
    for tick in x.ticks(4):
        parts += [
            line((x.at(tick), bottom), (x.at(tick), bottom + 4), "axis"),
            label(x.at(tick), bottom + 17, number(tick), anchor="middle", class_="label quiet"),
        ]
    return [*parts, label(x.end_px, bottom + 31, x_unit, anchor="end", class_="label quiet")]


def _upright_ticks(y: Scale, unit: str, about: int) -> list[Markup]:
    parts = []
    for tick in y.ticks(about):
        parts += [
            line((36, y.at(tick)), (40, y.at(tick)), "axis"),
            label(32, y.at(tick) + 4, number(tick), anchor="end", class_="label quiet"),
        ]
    return [*parts, line((40, y.start_px), (40, y.end_px), "axis"), label(40, y.end_px - 5, unit, class_="label quiet")]


def _key(beat: Data, *, has_template: bool) -> list[Markup]:
    words = f"beat {beat['beat']}"
    parts = [line((40, 9), (62, 9), "this"), label(67, 13, words)]
    if has_template:
        left = 67 + 7.5 * len(words) + 14
        parts += [line((left, 9), (left + 22, 9), "template"), label(left + 27, 13, "the run's template")]
    return parts


def _measure(finding: Data, beat: Data, loop: Data | None, axes: tuple[Scale, Scale]) -> tuple[list[Markup], str]:
    """Return the measured quantity drawn into a loop, and its words."""
    x, y = axes
    check = finding["check"]
    if check == "loop-closure" and loop:
        return _gap(loop, x, y)
    if check in {"range-stroke-volume", "range-ejection-fraction"} and is_number(beat.get("edv_ml")) and is_number(beat.get("esv_ml")):
        high = y.at((y.low + y.high) / 2)
        left, right = x.at(beat["esv_ml"]), x.at(beat["edv_ml"])
        words = f"SV {quantity(beat['edv_ml'] - beat['esv_ml'], 'mL')} of EDV {quantity(beat['edv_ml'], 'mL')}"
        return [
            line((left, high), (right, high), "gauge"),
            label(max((left + right) / 2, x.at(x.low) + text_width(words) / 2), high - 7, words, anchor="middle", class_="label value"),
        ], words + "."
    if check in _LEVELS and is_number(beat.get(_LEVELS[check][0])):
        key, name, unit = _LEVELS[check]
        value = beat[key]
        words = f"{name} {quantity(value, unit)}"
        if key.endswith("_ml"):
            side = "end" if x.at(value) > WIDTH / 2 else "start"
            shift = -6 if side == "end" else 6
            return [
                line((x.at(value), y.end_px), (x.at(value), y.start_px), "gauge"),
                label(x.at(value) + shift, (y.start_px + y.end_px) / 2, words, anchor=side, class_="label value halo"),
            ], words + "."
        lift = 14 if y.at(value) < y.end_px + 14 else -5
        return [
            line((x.start_px, y.at(value)), (x.end_px, y.at(value)), "gauge"),
            label((x.start_px + x.end_px) / 2, y.at(value) + lift, words, anchor="middle", class_="label value halo"),
        ], words + "."
    return [], ""


def _gap(loop: Data, x: Scale, y: Scale) -> tuple[list[Markup], str]:
    points = [
        (one, other) for one, other in zip(loop["volume_ml"], loop["pressure_mmhg"], strict=False) if is_number(one) and is_number(other)
    ]
    if len(points) < 2:
        return [], ""
    (first, first_p), (last, last_p) = points[0], points[-1]
    low = min(y.at(first_p), y.at(last_p)) - 16
    words = f"gap {quantity(abs(last - first), 'mL')}"
    middle = min(max((x.at(first) + x.at(last)) / 2, x.start_px + 34), x.end_px - 34)
    return [
        line((x.at(first), y.at(first_p)), (x.at(first), low), "leader"),
        line((x.at(last), y.at(last_p)), (x.at(last), low), "leader"),
        line((x.at(first), low), (x.at(last), low), "gauge"),
        element("circle", cx=x.at(first), cy=y.at(first_p), r=4, class_="start"),
        element("circle", cx=x.at(last), cy=y.at(last_p), r=4, class_="stop"),
        label(middle, low - 8, words, anchor="middle", class_="label value halo"),
    ], f"It began at {quantity(first, 'mL')} and ended at {quantity(last, 'mL')}."


def _steepest(series: Sequence[float | None], x: Scale, y: Scale, slope: object) -> list[Markup]:
    steps = [(later - earlier, index) for index, (earlier, later) in enumerate(pairwise(series)) if is_number(earlier) and is_number(later)]
    if not steps:
        return []
    _, index = max(steps)
    low, high = series[index], series[index + 1]
    assert low is not None
    assert high is not None
    rise, run_ = y.at(high) - y.at(low), x.at(index + 1) - x.at(index)
    words = f"dP/dt max {quantity(slope, 'mm[Hg]/s', 4)}"
    start, end = (x.at(index) - run_, y.at(low) - rise), (x.at(index + 1) + run_, y.at(high) + rise)
    return [line(start, end, "gauge"), label(WIDTH - 10, (y.start_px + y.end_px) / 2, words, anchor="end", class_="label value halo")]


def _stretches(series: Sequence[float | None], *, frozen: bool) -> list[tuple[int, int, str]]:
    """Return stretches of missing samples and, if asked, of six or more that do not change, as (first, last, kind)."""
    known = finite(series)
    tiny = 1e-6 * (max(known) - min(known)) if known else 0.0
    kinds = ["missing" if not is_number(value) else "sound" for value in series]
    for index, (earlier, later) in enumerate(pairwise(series)):
        if frozen and is_number(earlier) and is_number(later) and abs(later - earlier) <= tiny:
            kinds[index] = kinds[index + 1] = "frozen"
    found, first = [], 0
    for kind, members in groupby(kinds):
        length = len(list(members))
        if kind == "missing" or (kind == "frozen" and length >= 6):
            found.append((first, first + length - 1, kind))
        first += length
    return found


_FROZEN = frozenset({"flat-line", "duplicated-samples"})
_LEVELS = {
    "range-edv": ("edv_ml", "EDV", "mL"),
    "range-edp": ("edp_mmhg", "EDP", "mm[Hg]"),
    "range-pressure": ("pmax_mmhg", "Pmax", "mm[Hg]"),
}
_DRAWINGS: dict[str, Callable[[Data, Data, Data], Drawing]] = {
    "cycle-length": rhythm_drawing,
    "post-premature": rhythm_drawing,
    "missing-samples": cycle_drawing,
    "duplicated-samples": cycle_drawing,
    "flat-line": cycle_drawing,
    "landmarks": cycle_drawing,
    "range-dpdt-max": cycle_drawing,
}
