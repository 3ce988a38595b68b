"""The picture of the detection study: a line a fault, a bar a severity, the length of each colour a share of the indices."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence
from html import escape

from tests.bench.detection_cases import CAUTIOUSLY, KINDS, NEEDLESSLY, RIGHT, RIGHTLY, WRONG, Examined

COLOURS = {WRONG: "#a50026", RIGHT: "#2b6ca3", RIGHTLY: "#b9c8d6", CAUTIOUSLY: "#e6d5a8", NEEDLESSLY: "#e08214"}
LEFT, BAR, GAP, LINE, TOP, RIGHT_MARGIN = 250, 92, 8, 20, 84, 210


def picture(found: Sequence[Examined]) -> str:
    """Return the picture as SVG text."""
    faults = list(dict.fromkeys((one.case.level, one.case.fault) for one in found))
    places = sorted({one.case.place for one in found})
    width = LEFT + len(places) * (BAR + GAP) + RIGHT_MARGIN
    height = TOP + LINE * len(faults) + 24
    parts = [
        f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 {width} {height}" width="{width}" height="{height}" role="img"',
        ' font-family="sans-serif" font-size="11">',
        "<title>What becomes of the indices, fault by fault</title>",
        f'<rect width="{width}" height="{height}" fill="#ffffff"/>',
        '<text x="12" y="20" font-size="14">What becomes of the indices, fault by fault and severity by severity</text>',
        *_legend(),
        *(f'<text x="{LEFT + column * (BAR + GAP)}" y="{TOP - 8}">severity {place + 1}</text>' for column, place in enumerate(places)),
        f'<text x="{width - RIGHT_MARGIN + 8}" y="{TOP - 8}">its check, named where it matters</text>',
    ]
    for row, fault in enumerate(faults):
        own = [one for one in found if (one.case.level, one.case.fault) == fault]
        parts += _line(own, places, TOP + LINE * row, width - RIGHT_MARGIN + 8)
    return "\n".join([*parts, "</svg>"]) + "\n"


def _legend() -> list[str]:
    parts, x = [], 12
    for kind in KINDS:
        parts.append(f'<rect x="{x}" y="34" width="12" height="12" fill="{COLOURS[kind]}"/><text x="{x + 17}" y="44">{kind}</text>')
        x += 40 + 6 * len(kind)
    return parts


def _line(own: Sequence[Examined], places: Sequence[int], y: int, x_named: int) -> list[str]:
    case = own[0].case
    parts = [f'<text x="{LEFT - 10}" y="{y + 13}" text-anchor="end">{escape(case.fault)}</text>']
    for column, place in enumerate(places):
        here = [one for one in own if one.case.place == place]
        counts = Counter(outcome.kind for one in here for outcome in one.outcomes)
        x = float(LEFT + column * (BAR + GAP))
        told = f"{case.fault} {case.ladder.severities[place]:g} {case.ladder.unit}: " + ", ".join(f"{n} {k}" for k, n in counts.items())
        parts.append(f"<g><title>{escape(told)}</title>")
        for kind in KINDS:
            wide = BAR * counts[kind] / max(counts.total(), 1)
            if wide:
                parts.append(f'<rect x="{x:.1f}" y="{y + 3}" width="{wide:.1f}" height="{LINE - 6}" fill="{COLOURS[kind]}"/>')
            x += wide
        parts.append("</g>")
    mattering = [one for one in own if one.matters]
    named = sum(one.is_named for one in mattering)
    expected = ", ".join(sorted(set().union(*(one.expected for one in own)))) or "none"
    parts.append(f'<text x="{x_named}" y="{y + 13}">{named} of {len(mattering)}: {escape(expected)}</text>')
    return parts
