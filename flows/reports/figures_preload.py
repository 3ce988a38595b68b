"""A preload run: the loops of its window with end-systolic points, fitted line and V0; and the filling of every beat."""

from __future__ import annotations

from typing import TYPE_CHECKING

from flows.reports.figures import Data, Scale, element, figure, finite, label, line, scale_over, trail
from flows.reports.figures_beat import loop_of
from flows.reports.wording import counted, is_number, number, quantity

if TYPE_CHECKING:
    from collections.abc import Sequence

    from markupsafe import Markup

MOST_LOOPS = 24
_LOOPS_SIZE = (490, 350)
_FILLING_SIZE = (400, 350)


def preload_loops(run: Data, name: str) -> Markup | None:
    """Return the loops of the window with the end-systolic line down to the volume axis; None without loops in a window."""
    window = [beat for beat in run.get("beats") or () if beat.get("in_window") and beat.get("verdict") == "accepted"]
    loops = [loop for loop in (loop_of(run, beat["beat"]) for beat in window) if loop]
    if not loops:
        return None
    step = -(-len(loops) // MOST_LOOPS)
    shown = loops[::step]
    end = run.get("line") or {}
    v0 = end.get("v0_ml")
    volumes = [value for loop in shown for value in finite(loop["volume_ml"])]
    pressures = [0.0, *(value for loop in shown for value in finite(loop["pressure_mmhg"])), *finite(end.get("pressure_mmhg") or ())]
    reach = max(volumes) - min(volumes) if volumes else 1.0
    if is_number(v0) and v0 > min(volumes, default=0.0) - 1.6 * reach:
        volumes.append(v0)
    width, height = _LOOPS_SIZE
    x, y = scale_over(volumes, 46, width - 12, room=0.04), scale_over(pressures, height - 42, 24, room=0.03)
    parts = [*_axes(x, y, "volume, mL", "pressure, mmHg")]
    for place, loop in enumerate(shown):
        depth = "late" if place >= 2 * len(shown) / 3 else "middle" if place >= len(shown) / 3 else "early"
        parts.append(element("path", d=trail(loop["volume_ml"], loop["pressure_mmhg"], x, y) + "Z", class_=f"window-loop {depth}"))
    marks, words = _line(end, x, y)
    left_out = f"; every {step}th is drawn" if step > 1 else ""
    told = f"{counted(len(loops), 'accepted loop')} of the preload window{left_out}. {words}".strip()
    return figure(name, f"Preload run {run['run']}: loops and end-systolic line", told, _LOOPS_SIZE, *parts, *marks)


def preload_filling(run: Data, name: str) -> Markup | None:
    """Return end-diastolic volume beat by beat with the window shaded; None without beats."""
    if not finite(beat.get("edv_ml") for beat in run.get("beats") or ()):
        return None
    parts, words = filling_drawing(run, *_FILLING_SIZE)
    return figure(name, f"Preload run {run['run']}: filling beat by beat", words, _FILLING_SIZE, *parts)


def filling_drawing(run: Data, width: float, height: float) -> tuple[list[Markup], str]:
    """Return the filling of every beat in a box of the given size, and its words: discs accepted, crosses rejected, the window shaded."""
    beats = [beat for beat in run.get("beats") or () if is_number(beat.get("edv_ml"))]
    window = [beat for beat in beats if beat.get("in_window")]
    x = scale_over([beat["beat"] for beat in beats], 46, width - 12, room=0.02)
    y = scale_over([beat["edv_ml"] for beat in beats], height - 42, 30, room=0.08)
    parts: list[Markup] = []
    words = f"End-diastolic volume of {counted(len(beats), 'beat')}."
    if window:
        left, right = x.at(min(beat["beat"] for beat in window) - 0.5), x.at(max(beat["beat"] for beat in window) + 0.5)
        parts.append(element("rect", x=left, y=y.end_px, width=right - left, height=y.start_px - y.end_px, class_="window"))
        middle = min(max((left + right) / 2, 46 + 24), width - 36)
        parts.append(label(middle, y.end_px - 6, "window", anchor="middle"))
        first, last = window[0]["edv_ml"], min(beat["edv_ml"] for beat in window)
        words += f" In the window of {counted(len(window), 'beat')} it falls from {quantity(first, 'mL')} to {quantity(last, 'mL')}."
    parts += _axes(x, y, "beat", "EDV, mL", y_label_up=True)
    for beat in beats:
        spot, high = x.at(beat["beat"]), y.at(beat["edv_ml"])
        if beat.get("verdict") == "accepted":
            parts.append(element("circle", cx=spot, cy=high, r=3, class_="kept-point"))
        else:
            cross = f"M{spot - 3.5:.1f} {high - 3.5:.1f}l7 7m0 -7l-7 7"
            parts.append(element("path", d=cross, class_="lost-point"))
    return parts, words


def _line(end: Data, x: Scale, y: Scale) -> tuple[list[Markup], str]:
    """Return the end-systolic points, the line through them down to V0, and their words."""
    points = [
        (volume, pressure)
        for volume, pressure in zip(end.get("volume_ml") or (), end.get("pressure_mmhg") or (), strict=False)
        if is_number(volume) and is_number(pressure)
    ]
    parts = [element("circle", cx=x.at(volume), cy=y.at(pressure), r=3.5, class_="end-systole") for volume, pressure in points]
    slope, v0 = end.get("ees_mmhg_per_ml"), end.get("v0_ml")
    if not (is_number(slope) and is_number(v0) and points):
        return parts, "No end-systolic line could be fitted." if not end else "Its end-systolic points carry no line."
    top = max(volume for volume, _ in points)
    foot = max(v0, x.low)
    parts.append(line((x.at(foot), y.at(slope * (foot - v0))), (x.at(top), y.at(slope * (top - v0))), "fit"))
    words = f"Ees {quantity(slope, 'mm[Hg]/mL')}, V0 {quantity(v0, 'mL')}"
    if x.holds(v0):
        parts.append(element("circle", cx=x.at(v0), cy=y.at(0), r=5, class_="foot"))
        parts.append(label(min(x.at(v0) + 15, x.end_px - 60), y.at(0) - 3, f"V0 {quantity(v0, 'mL')}", class_="label value halo"))
    else:
        parts.append(label(x.start_px + 6, y.at(0) - 8, f"\u2190 V0 {quantity(v0, 'mL')}", class_="label value halo"))
    parts.append(label(x.start_px + 8, y.end_px + 16, f"Ees {quantity(slope, 'mm[Hg]/mL')}", class_="label value halo"))
    return parts, f"{words}, through {counted(len(points), 'end-systolic point')}."


def _axes(x: Scale, y: Scale, x_name: str, y_name: str, *, y_label_up: bool = False) -> Sequence[Markup]:
    bottom = y.start_px
    parts = [line((x.start_px, bottom), (x.end_px, bottom), "axis"), line((x.start_px, bottom), (x.start_px, y.end_px), "axis")]
    for tick in x.ticks(5):
        parts.append(line((x.at(tick), bottom), (x.at(tick), bottom + 4), "axis"))
        parts.append(label(x.at(tick), bottom + 18, number(tick), anchor="middle", class_="label quiet"))
    for tick in y.ticks(4):
        parts.append(line((x.start_px - 4, y.at(tick)), (x.start_px, y.at(tick)), "axis"))
        parts.append(label(x.start_px - 8, y.at(tick) + 4, number(tick), anchor="end", class_="label quiet"))
    parts.append(label(x.end_px, bottom + 36, x_name, anchor="end", class_="label quiet"))
    parts.append(label(4 if y_label_up else x.start_px + 4, y.end_px - (12 if y_label_up else 8), y_name, class_="label quiet"))
    return parts
