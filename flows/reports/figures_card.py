"""The drawing of an evidence card: what was seen on the left, how far it lies from its limits on the right."""

from __future__ import annotations

import math
from itertools import pairwise
from typing import TYPE_CHECKING

from flows.reports.figures import Data, Scale, element, figure, finite, label, line, scale_over
from flows.reports.figures_beat import HEIGHT, WIDTH, drawing_for, loop_of
from flows.reports.figures_preload import filling_drawing
from flows.reports.figures_ruler import flat_ruler, ruler, ruler_words
from flows.reports.wording import is_number, number

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from markupsafe import Markup

CARD_WIDTH = 428
_WITH_TRACE = frozenset(
    {"beats-found", "time-base", "time-gaps", "pressure-clipping", "volume-clipping", "duration", "heart-rate-agreement"}
)
_WITH_FILLING = frozenset({"preload-adequacy", "preload-beats"})


def card_figure(finding: Data, run: Data | None, name: str) -> Markup | None:
    """Return the figure of one finding, or None where there is neither a picture nor a value; ``name`` prefixes its ids."""
    drawing = _drawing(finding, run)
    measured = is_number(finding.get("value"))
    title = f"Evidence for {finding.get('title') or finding['check']}"
    if drawing is None:
        return figure(name, title, ruler_words(finding), (CARD_WIDTH, 84), flat_ruler(finding, CARD_WIDTH)) if measured else None
    parts, words = drawing
    beside = [ruler(finding, WIDTH + 20, 0, HEIGHT - 20)] if measured else []
    told = f"{words} {ruler_words(finding)}" if measured else words
    return figure(name, title, told, (CARD_WIDTH, HEIGHT), *parts, *beside)


def shown_beat(finding: Data, run: Data) -> Data | None:
    """Return the beat to draw: the one that holds the finding's instant, else the first of its beats with a loop, else its first."""
    beats = {beat["beat"]: beat for beat in run.get("beats") or ()}
    own: list[Data] = [beats[number_] for number_ in finding.get("beats") or () if number_ in beats]
    instant = finding.get("at_s")
    if is_number(instant):
        for beat in own:
            if is_number(beat.get("start_s")) and is_number(beat.get("end_s")) and beat["start_s"] <= instant < beat["end_s"]:
                return beat
    return next((beat for beat in own if loop_of(run, beat["beat"])), own[0] if own else None)


def _drawing(finding: Data, run: Data | None) -> tuple[list[Markup], str] | None:
    if run is None:
        return None
    beat = shown_beat(finding, run)
    if finding.get("level") == "beat":
        return None if beat is None else drawing_for(str(finding["check"]))(finding, run, beat)
    if finding["check"] in _WITH_FILLING and run.get("beats"):
        return filling_drawing(run, WIDTH, HEIGHT)
    if finding["check"] in _WITH_TRACE and finite((run.get("trace") or {}).get("time_s") or ()):
        return _trace_drawing(finding, run)
    return None


def _trace_drawing(finding: Data, run: Data) -> tuple[list[Markup], str]:
    """Return the whole recording, thinned to its lowest and highest sample of each pixel column; columns without a sample are shaded."""
    key, unit = ("volume_ml", "mL") if str(finding["check"]).startswith("volume") else ("pressure_mmhg", "mmHg")
    trace = run["trace"]
    points = [pair for pair in zip(trace["time_s"], trace.get(key) or (), strict=False) if is_number(pair[0])]
    x = scale_over([time for time, _ in points], 40, WIDTH - 10, room=0.0)
    y = scale_over([value for _, value in points], HEIGHT - 34, 30)
    columns: dict[int, list[float]] = {}
    for time, value in points:
        if is_number(value):
            columns.setdefault(int(x.at(time)), []).append(float(value))
    parts = [label(40, 13, f"{'volume' if unit == 'mL' else 'pressure'} over the whole run", class_="label quiet")]
    widest = _widest_step(sorted(columns))
    parts += _empty_columns(sorted(columns), widest, y.end_px, y.start_px)
    parts.append(element("path", d=_strokes(columns, y, widest), class_="trace"))
    for tick in y.ticks(3):
        parts += [
            line((36, y.at(tick)), (40, y.at(tick)), "axis"),
            label(32, y.at(tick) + 4, number(tick), anchor="end", class_="label quiet"),
        ]
    for tick in x.ticks(3):
        parts += [line((x.at(tick), y.start_px), (x.at(tick), y.start_px + 4), "axis")]
        parts.append(label(x.at(tick), y.start_px + 17, f"{number(tick)} s", anchor="middle", class_="label quiet"))
    known = [value for values in columns.values() for value in values]
    reach = f" between {number(min(known))} and {number(max(known))} {unit}" if known else ""
    axes = [line((40, y.start_px), (WIDTH - 10, y.start_px), "axis"), line((40, y.start_px), (40, y.end_px), "axis")]
    return [*parts, *axes, label(44, y.end_px + 4, unit, class_="label quiet")], f"The whole run, thinned{reach}."


def _strokes(columns: Mapping[int, Sequence[float]], y: Scale, widest: float) -> str:
    """Return path data through the lowest and the highest sample of each column, in the order in which they came."""
    parts, last = [], -math.inf
    for place, values in sorted(columns.items()):
        pen = "L" if place - last <= widest else "M"
        for index in sorted({values.index(min(values)), values.index(max(values))}):
            parts.append(f"{pen}{place} {y.at(values[index]):.1f}")
            pen = "L"
        last = place
    return "".join(parts)


def _widest_step(places: Sequence[int]) -> float:
    """Return how far apart two columns may lie with nothing missing between them: three px, or twice the usual step."""
    steps = sorted(later - earlier for earlier, later in pairwise(places))
    return max(3.0, 2.0 * steps[len(steps) // 2]) if steps else 3.0


def _empty_columns(places: Sequence[int], widest: float, top: float, bottom: float) -> list[Markup]:
    """Return a shade over every stretch where no sample stands."""
    return [
        element("rect", x=start + 1, y=top, width=end - start - 1, height=bottom - top, class_="stretch missing")
        for start, end in pairwise(places)
        if end - start > widest
    ]
