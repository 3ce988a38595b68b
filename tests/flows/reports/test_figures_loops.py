import pytest

from flows.reports.acquisition_sections import MOST_PANELS, loop_groups
from flows.reports.figures_loops import accepted_together, loop_panel, panel_reach, panel_scales, run_scales, template_shape
from flows.reports.figures_preload import preload_filling, preload_loops
from flows.reports.reasons import reasons_of
from tests.flows.reports.made_evidence import finding, long, make_run, make_view, queried, unreadable_run


def test_every_rejected_beat_stands_under_exactly_one_reason():
    view = queried()
    groups = loop_groups(view.evidence["runs"], reasons_of(view), rejected=True)
    panels = [panel for group in groups for panel in (*group.shown, *group.folded)]
    rejected = sum(beat["verdict"] == "rejected" for run in view.evidence["runs"] for beat in run["beats"])
    assert len(panels) == rejected == 15
    flagged = loop_groups(view.evidence["runs"], reasons_of(view), rejected=False)
    assert [(group.letter, len(group.shown)) for group in flagged] == [("i", 2), ("j", 1)]


def test_many_loops_are_folded_and_absent_ones_are_counted():
    view = long()
    run = view.evidence["runs"][0]
    run["loops"] = [loop for loop in run["loops"] if loop["beat"] != 405]
    first = loop_groups([run], reasons_of(view), rejected=True)[0]
    assert (len(first.shown), len(first.folded)) == (MOST_PANELS, 29 - MOST_PANELS)
    assert first.note == "For 1 further beat no loop was kept."


def test_one_wild_beat_does_not_shrink_all_others_and_is_said_to_be_cut_off():
    run = make_run("rest-1", 10)
    run["loops"][3]["pressure_mmhg"][20] = 5000.0
    _, pressure = run_scales(run, 0, 100, 100, 0)
    assert pressure.high < 300
    wild, calm = (str(loop_panel(panel_scales(run), run["loops"][place], "Beat", "one", "template-1", kept=False)) for place in (3, 4))
    assert "cut off" in wild
    assert "cut off" not in calm
    assert 'href="#template-1"' in calm


def test_a_run_without_template_or_loops_has_axes_all_the_same():
    run = unreadable_run()
    volume, pressure = run_scales(run, 0, 100, 100, 0)
    assert volume.high > volume.low
    assert pressure.high > pressure.low
    assert template_shape(run, "template-1") is None
    assert accepted_together(run, "one") is None
    assert panel_reach(run) == "0 to 1 mL by 0 to 1 mmHg"


def test_accepted_loops_are_drawn_together_and_thinned():
    run = make_run("rest-1", 120, rejected={3: "loop-closure"})
    drawn = str(accepted_together(run, "one"))
    assert drawn.count('class="kept thin"') == 40
    assert "40 accepted loops of 119 accepted beats" in drawn


@pytest.fixture
def preload():
    return make_run("occlusion-1", 30, kind="preload-reduction", fall=0.38, window=range(9, 21), rejected={12: "cycle-length"})


def test_a_preload_run_shows_its_points_its_line_and_v0(preload):
    drawn = str(preload_loops(preload, "one"))
    assert drawn.count('class="end-systole"') == 11
    assert drawn.count('class="fit"') == 1
    assert drawn.count('class="foot"') == 1
    assert "V0 6.4 mL" in drawn
    assert "Ees 2.31 mmHg/mL" in drawn
    assert drawn.count("window-loop") == 11


def test_a_far_away_v0_is_named_at_the_edge(preload):
    preload["line"] |= {"v0_ml": -900.0, "ees_mmhg_per_ml": 0.1}
    drawn = str(preload_loops(preload, "one"))
    assert 'class="foot"' not in drawn
    assert "\u2190 V0 \u2212900 mL" in drawn


def test_filling_tells_accepted_from_rejected_by_shape(preload):
    drawn = str(preload_filling(preload, "one"))
    assert drawn.count('class="kept-point"') == 29
    assert drawn.count('class="lost-point"') == 1
    assert drawn.count('class="window"') == 1


def test_a_preload_run_without_window_or_line_is_drawn_as_far_as_it_goes(preload):
    preload["line"] = None
    assert "No end-systolic line could be fitted." in str(preload_loops(preload, "one"))
    flat = make_run("occlusion-2", 10, kind="preload-reduction")
    assert preload_loops(flat, "one") is None
    assert 'class="window"' not in str(preload_filling(flat, "one"))
    assert preload_filling(unreadable_run(), "one") is None


def test_a_beat_rejected_for_two_checks_stands_under_the_heavier():
    run = make_run("rest-1", 6, rejected={3: "cycle-length;loop-closure"})
    findings = [finding("loop-closure", "rest-1", [3], "open"), finding("cycle-length", "rest-1", [3], "early")]
    groups = loop_groups([run], reasons_of(make_view("H-001-baseline", "accepted", [run], findings)), rejected=True)
    assert [group.check for group in groups] == ["loop-closure"]
