import itertools
import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from flows.reports.figures import Scale, element, figure, finite, scale_over, spread, trail
from flows.reports.figures_intervals import interval_figure
from flows.reports.figures_sites import package_cells
from flows.reports.views import SiteCount
from tests.flows.reports.made_evidence import index_rows


def test_an_element_escapes_text_and_attributes_and_leaves_none_out():
    made = element("text", "<b>&", x=1.0, y=2.26, class_='a"b', href=None)
    assert made == '<text x="1" y="2.3" class="a&#34;b">&lt;b&gt;&amp;</text>'


def test_an_element_inside_another_is_not_escaped_twice():
    assert element("g", element("title", "a & b")) == "<g><title>a &amp; b</title></g>"


def test_a_figure_is_named_and_described():
    made = figure("one", "What", "All of it", (10, 20))
    assert '<title id="one-title">What</title><desc id="one-desc">All of it</desc>' in made
    assert 'aria-labelledby="one-title one-desc"' in made


def test_a_scale_maps_its_ends_and_keeps_wild_values_near():
    scale = Scale(0, 10, 100, 0)
    assert [scale.at(0), scale.at(10), scale.at(5)] == [100, 0, 50]
    assert scale.at(1e12) == -100
    assert scale.at(-1e12) == 200


@given(st.floats(-1e6, 1e6), st.floats(1e-3, 1e6), st.integers(1, 8))
def test_ticks_lie_on_the_scale_and_are_few(low, span, about):
    scale = Scale(low, low + span, 0, 100)
    ticks = scale.ticks(about)
    assert all(low - 1e-6 * span <= tick <= low + span * (1 + 1e-6) for tick in ticks)
    assert len(ticks) <= 2 * about + 2


@given(st.lists(st.one_of(st.none(), st.floats(-1e9, 1e9), st.just(math.nan))))
def test_a_scale_over_anything_is_a_scale(values):
    scale = scale_over(values, 0, 100)
    assert scale.high > scale.low
    assert all(scale.low <= value <= scale.high for value in finite(values))


def test_a_trail_breaks_where_a_point_is_missing():
    scale = Scale(0, 10, 0, 10)
    assert trail([0, 1, 2, 3, 4], [0, 1, None, 3, math.nan], scale, scale) == "M0.0 0.0L1.0 1.0M3.0 3.0"


@given(st.lists(st.floats(0, 200), max_size=8))
def test_labels_are_kept_apart_in_their_order(places):
    spaced = spread(places, 17, 0, 200)
    in_order = [spaced[index] for index in sorted(range(len(places)), key=lambda index: (places[index], index))]
    assert all(later - earlier >= 17 - 1e-9 for earlier, later in itertools.pairwise(in_order))


def test_an_interval_is_drawn_as_per_cent_of_the_value():
    row = index_rows("H-001")[0] | {"value": 10.0, "ci_low": 9.0, "ci_high": 12.0, "fit_ci_low": 9.5, "fit_ci_high": 11.0}
    made = interval_figure(row, "one")
    assert made is not None
    assert "From \u221210 to 20 per cent of the value." in made
    assert 'class="arrow"' not in made


def test_an_interval_beyond_the_axis_ends_in_an_arrow():
    made = interval_figure({"index": "Ees", "value": 1.0, "ci_low": 0.9, "ci_high": 2.5}, "one")
    assert made is not None
    assert made.count('class="arrow"') == 1


@pytest.mark.parametrize(
    "row",
    [
        {"value": None, "ci_low": 1, "ci_high": 2},
        {"value": 1, "ci_low": None, "ci_high": 2},
        {"value": 0, "ci_low": -1, "ci_high": 1},
        {"value": 0.5, "ci_low": -4, "ci_high": 5},
    ],
)
def test_no_interval_is_drawn_where_per_cent_say_nothing(row):
    assert interval_figure(row, "one") is None


def test_a_site_has_one_cell_a_package_and_those_to_answer_first():
    made = package_cells(SiteCount("harbour", accepted=30, queried=2, waiting=1, seen_again=5), "one")
    assert made is not None
    assert made.count('class="cell"') == 33
    assert made.index("package queried") < made.index("package accepted")
    assert "33 packages: 30 accepted, 2 queried, 1 waiting." in made
    assert package_cells(SiteCount("harbour", seen_again=5), "one") is None
