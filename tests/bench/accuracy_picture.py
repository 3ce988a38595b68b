"""The picture of the accuracy study: a line an index, a mark for each rate and noise, how often its intervals hold the truth."""

from __future__ import annotations

from collections.abc import Sequence
from html import escape

LEFT, WIDE, TOP, LINE, LOWEST = 96, 520, 64, 26, 0.7
INSIDE, OUTSIDE = "#2b6ca3", "#a50026"


def picture(coverage: Sequence[tuple[str, str, float]], pooled: tuple[float, float], in_a_cell: tuple[float, float]) -> str:
    """Return the picture as SVG text; ``coverage`` holds (index, where, share), where "all" is the pooled share, drawn larger."""
    names = list(dict.fromkeys(index for index, _, _ in coverage))
    width, height = LEFT + WIDE + 24, TOP + LINE * len(names) + 40
    band = f'x="{_x(in_a_cell[0]):.1f}" y="{TOP - 6}" width="{_x(in_a_cell[1]) - _x(in_a_cell[0]):.1f}" height="{LINE * len(names)}"'
    parts = [
        f'<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 {width} {height}" width="{width}" height="{height}" role="img"',
        ' font-family="sans-serif" font-size="12">',
        "<title>How often 95 % intervals hold the truth</title>",
        f'<rect width="{width}" height="{height}" fill="#ffffff"/>',
        '<text x="12" y="22" font-size="14">How often 95 % intervals of the fit hold the truth</text>',
        '<text x="12" y="42">large: all draws; small: one rate and noise; shaded: what one may be</text>',
        f'<rect {band} fill="#e6edf4"/>',
    ]
    for share in (0.7, 0.8, 0.9, 0.95, 1.0):
        parts.append(f'<line x1="{_x(share):.1f}" x2="{_x(share):.1f}" y1="{TOP - 6}" y2="{height - 34}" stroke="#9aa7b3"/>')
        parts.append(f'<text x="{_x(share):.1f}" y="{height - 16}" text-anchor="middle">{share:.0%}</text>')
    for row, name in enumerate(names):
        y = TOP + LINE * row + 8
        parts.append(f'<text x="{LEFT - 10}" y="{y + 4}" text-anchor="end">{escape(name)}</text>')
        for _, where, share in [one for one in coverage if one[0] == name]:
            low, high = pooled if where == "all" else in_a_cell
            colour, radius = INSIDE if low <= share <= high else OUTSIDE, 6 if where == "all" else 3
            told = escape(f"{name}, {where}: {share:.1%}")
            if share == share:  # noqa: PLR0124  (NaN: no draw had an interval)
                parts.append(f'<circle cx="{_x(share):.1f}" cy="{y}" r="{radius}" fill="{colour}"><title>{told}</title></circle>')
    return "\n".join([*parts, "</svg>"]) + "\n"


def _x(share: float) -> float:
    return LEFT + WIDE * (max(share, LOWEST) - LOWEST) / (1.0 - LOWEST)
