"""The two palettes: enough contrast for text in both, and no pair that a colour-blind reader cannot tell apart."""

import colorsys
import re
from pathlib import Path

import pytest

import flows.reports

STYLE = (Path(flows.reports.__file__).parent / "style.css").read_text(encoding="utf-8")
TEXT_ON = [
    ("ink", "ground"),
    ("ink", "sheet"),
    ("ink", "window"),
    ("ink", "lose-soft"),
    ("ink", "keep-soft"),
    ("quiet", "ground"),
    ("quiet", "sheet"),
    ("quiet", "lose-soft"),
    ("keep", "ground"),
    ("keep", "sheet"),
    ("keep", "keep-soft"),
    ("lose", "ground"),
    ("lose", "sheet"),
    ("on-lose", "lose"),
]
DRAWN_ON = [("keep", "ground"), ("lose", "sheet"), ("lose", "ground"), ("ink", "window")]


def palettes():
    blocks = re.findall(r":root \{(.*?)\}", STYLE, re.DOTALL)
    light, dark = (dict(re.findall(r"--([\w-]+): (#[0-9a-f]{6});", block)) for block in blocks)
    return {"light": light, "dark": light | dark}


def luminance(colour):
    channels = [int(colour[place : place + 2], 16) / 255 for place in (1, 3, 5)]
    linear = [c / 12.92 if c <= 0.03928 else ((c + 0.055) / 1.055) ** 2.4 for c in channels]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def contrast(one, other):
    high, low = sorted((luminance(one), luminance(other)), reverse=True)
    return (high + 0.05) / (low + 0.05)


def hue(colour):
    return 360 * colorsys.rgb_to_hls(*(int(colour[place : place + 2], 16) / 255 for place in (1, 3, 5)))[0]


@pytest.mark.parametrize("theme", ["light", "dark"])
@pytest.mark.parametrize(("text", "ground"), TEXT_ON)
def test_text_stands_out_from_its_ground(theme, text, ground):
    colours = palettes()[theme]
    assert contrast(colours[text], colours[ground]) >= 4.5


@pytest.mark.parametrize("theme", ["light", "dark"])
@pytest.mark.parametrize(("mark", "ground"), DRAWN_ON)
def test_drawn_marks_stand_out_from_their_ground(theme, mark, ground):
    colours = palettes()[theme]
    assert contrast(colours[mark], colours[ground]) >= 3


@pytest.mark.parametrize("theme", ["light", "dark"])
def test_kept_is_blue_and_lost_is_orange_never_red_against_green(theme):
    colours = palettes()[theme]
    assert 195 <= hue(colours["keep"]) <= 250
    assert 18 <= hue(colours["lose"]) <= 45


def test_the_style_sheet_asks_for_nothing_from_outside():
    assert "url(" not in STYLE
    assert "@import" not in STYLE
    assert "@font-face" not in STYLE


def test_every_colour_is_a_name_of_the_palette():
    rules = re.sub(r":root \{.*?\}", "", STYLE, flags=re.DOTALL)
    assert not re.findall(r"#[0-9a-fA-F]{3,8}\b", rules)
    assert set(re.findall(r"var\(--([\w-]+)\)", rules)) <= set(palettes()["light"])
