"""A beat among its neighbours in time: where it came, and where the run's own rhythm had it due."""

from __future__ import annotations

import statistics
from itertools import pairwise
from typing import TYPE_CHECKING

from flows.reports.figures import Data, Scale, label, line, scale_over, spread
from flows.reports.wording import is_number

if TYPE_CHECKING:
    from collections.abc import Sequence

    from markupsafe import Markup

WIDTH, HEIGHT = 276, 232
_BASE, _TOP = 168.0, 74.0


def rhythm_drawing(_finding: Data, run: Data, beat: Data) -> tuple[list[Markup], str]:
    """Return a box of 276 x 232 px: beats as stems, the time between them, and a broken stem where the beat was due; and its words."""
    beats = [item for item in run.get("beats") or () if is_number(item.get("start_s"))]
    place = next((index for index, item in enumerate(beats) if item["beat"] == beat["beat"]), None)
    if place is None:
        return [label(10, HEIGHT / 2, "the time of the beat is not known", class_="label quiet")], "The time of the beat is not known."
    shown = beats[max(place - 3, 0) : place + 3]
    x = scale_over([item["start_s"] for item in shown], 26, WIDTH - 26, room=0.0)
    parts = _stems(shown, beat, x)
    before = _intervals_before(beats, place)
    if not before:
        return parts, f"Beat {beat['beat']} among its neighbours."
    usual = statistics.median(before)
    earlier = float(beats[place - 1]["start_s"])
    found = float(beat["start_s"]) - earlier
    if x.holds(earlier + usual):
        due = x.at(earlier + usual)
        side = "end" if due > WIDTH / 2 else "start"
        parts += [line((due, _TOP - 14), (due, _BASE - 34), "due"), label(due, _TOP - 20, f"due after {usual:.2f} s", anchor=side)]
    parts.append(label(10, HEIGHT - 10, f"came after {found:.2f} s, usual {usual:.2f} s", class_="label value"))
    return parts, f"Beat {beat['beat']} came {found:.2f} s after the one before; the median of {len(before)} before is {usual:.2f} s."


def _stems(shown: Sequence[Data], beat: Data, x: Scale) -> list[Markup]:
    parts = [line((10, _BASE), (WIDTH - 10, _BASE), "axis"), label(10, 14, "time from beat to beat, in seconds", class_="label quiet")]
    places = spread([x.at(item["start_s"]) for item in shown], 24, 14, WIDTH - 14)
    for item, place in zip(shown, places, strict=True):
        own = item["beat"] == beat["beat"]
        spot = x.at(item["start_s"])
        parts.append(line((spot, _TOP if own else _TOP + 26), (spot, _BASE), "stem own" if own else "stem"))
        parts.append(label(place, _BASE + 18, item["beat"], anchor="middle", class_="label value" if own else "label quiet"))
    for start, end in pairwise([float(item["start_s"]) for item in shown]):
        left, right = x.at(start), x.at(end)
        parts.append(line((left + 3, _BASE - 12), (right - 3, _BASE - 12), "span"))
        if right - left > 34:
            parts.append(label((left + right) / 2, _BASE - 18, f"{end - start:.2f}", anchor="middle"))
    return parts


def _intervals_before(beats: Sequence[Data], place: int) -> list[float]:
    """Return up to eight beat-to-beat intervals that ended before the one in question began."""
    return [later - earlier for earlier, later in pairwise([float(item["start_s"]) for item in beats[max(place - 9, 0) : place]])]
