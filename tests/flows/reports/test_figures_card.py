import copy

import pytest

from flows.reports.figures_card import card_figure, shown_beat
from flows.reports.figures_ruler import limits_of, ruler_words
from tests.flows.reports.made_evidence import finding, make_run, unreadable_run


@pytest.fixture
def run():
    lost = {4: "cycle-length", 10: "loop-closure", 12: "missing-samples", 14: "flat-line", 16: "range-edv"}
    return make_run("rest-1", 24, rejected=lost)


def test_the_gap_of_a_loop_is_drawn_and_measured_in_ml(run):
    drawn = str(card_figure(finding("loop-closure", "rest-1", [10], "open", value=0.26, limit=0.15), run, "one"))
    volume = run["loops"][9]["volume_ml"]
    assert f">gap {abs(volume[-1] - volume[0]):.3g} mL</text>" in drawn
    assert 'class="template"' in drawn
    assert "fail &gt; 0.15" in drawn
    assert ">0.26</text>" in drawn


def test_a_premature_beat_is_drawn_among_its_neighbours_and_where_it_was_due(run):
    drawn = str(card_figure(finding("cycle-length", "rest-1", [4], "early", value=0.62, limit=0.8), run, "one"))
    came = run["beats"][3]["start_s"] - run["beats"][2]["start_s"]
    assert f"Beat 4 came {came:.2f} s after the one before" in drawn
    assert 'class="due"' in drawn
    assert drawn.count('class="stem own"') == 1
    assert drawn.count('class="stem"') == 5


def test_the_first_beat_of_a_run_has_nothing_it_was_due_by(run):
    drawn = str(card_figure(finding("cycle-length", "rest-1", [1], "early", value=0.62, limit=0.8), run, "one"))
    assert 'class="due"' not in drawn


def test_missing_and_frozen_stretches_are_marked(run):
    missing = str(card_figure(finding("missing-samples", "rest-1", [12], "missing", value=0.2, limit=0.02), run, "one"))
    assert missing.count('class="stretch missing"') == 2
    assert "Missing mmHg for 21% of the cycle." in missing
    frozen = str(card_figure(finding("flat-line", "rest-1", [14], "flat", value=0.46, limit=0.4), run, "one"))
    assert "Unchanging mmHg for 46% of the cycle." in frozen


@pytest.mark.parametrize(
    ("check", "words"),
    [
        ("range-edv", "EDV 262 mL"),
        ("range-edp", "EDP 9 mmHg"),
        ("range-pressure", "Pmax 1"),
        ("range-stroke-volume", "SV 2"),
        ("range-ejection-fraction", "of EDV 262 mL"),
        ("range-dpdt-max", "dP/dt max 1480 mmHg/s"),
    ],
)
def test_the_measured_quantity_is_drawn_in(run, check, words):
    drawn = str(card_figure(finding(check, "rest-1", [16], "odd", value=1.0, limit=0.5), run, "one"))
    assert words in drawn
    assert 'class="gauge"' in drawn


def test_a_check_nobody_drew_for_shows_the_loop(run):
    drawn = str(card_figure(finding("brand-new", "rest-1", [10], "odd", value=1.0, limit=0.5), run, "one"))
    assert "The loop of beat 10 over the median accepted beat of its run." in drawn


def test_the_beat_shown_holds_the_instant_of_the_finding(run):
    instant = (run["beats"][11]["start_s"] + run["beats"][11]["end_s"]) / 2
    assert shown_beat(finding("x", "rest-1", [10, 12], "odd", at_s=instant), run)["beat"] == 12
    assert shown_beat(finding("x", "rest-1", [10, 12], "odd"), run)["beat"] == 10
    run["loops"] = [loop for loop in run["loops"] if loop["beat"] != 10]
    assert shown_beat(finding("x", "rest-1", [10, 12], "odd"), run)["beat"] == 12
    assert shown_beat(finding("x", "rest-1", [99], "odd"), run) is None


def test_a_fact_of_the_acquisition_has_no_drawing_and_a_value_has_a_ruler():
    assert card_figure(finding("pressure-zero", None, [], "none given"), None, "one") is None
    drawn = str(card_figure(finding("zero-drift", None, [], "moved", value=6.7, limit=5.0, unit="mm[Hg]"), None, "one"))
    assert "fail above 5 mmHg" in drawn
    assert "6.7 mmHg" in drawn


def test_a_run_finding_shows_the_thinned_recording_with_its_gaps():
    run = make_run("rest-1", 20)
    trace = run["trace"]
    cut = slice(400, 700)
    for key in trace:
        del trace[key][cut]
    drawn = str(card_figure(finding("time-gaps", "rest-1", [], "gaps", value=0.2, limit=0.05), run, "one"))
    assert drawn.count('class="stretch missing"') == 1
    assert 'class="trace"' in drawn


def test_a_preload_finding_shows_the_filling():
    run = make_run("occlusion-1", 20, kind="preload-reduction", fall=0.3, window=range(5, 12))
    drawn = str(card_figure(finding("preload-beats", "occlusion-1", [], "few", value=3.0, limit=8.0), run, "one"))
    assert "In the window of 7 beats it falls from" in drawn


def test_a_run_finding_without_a_recording_keeps_its_ruler():
    drawn = str(card_figure(finding("beats-found", "rest-9", [], "none", value=2.0, limit=3.0), unreadable_run(), "one"))
    assert "fail below 3" in drawn


@pytest.mark.parametrize("check", ["loop-closure", "cycle-length", "missing-samples", "range-edv", "range-dpdt-max", "range-stroke-work"])
def test_missing_numbers_break_no_drawing(run, check):
    emptied = copy.deepcopy(run)
    for beat in emptied["beats"]:
        beat |= {key: None for key in beat if key not in {"beat", "verdict", "reasons", "in_window"}}
    for loop in (*emptied["loops"], emptied["template"]):
        loop |= {"pressure_mmhg": [None] * 48, "volume_ml": [None] * 48}
    assert card_figure(finding(check, "rest-1", [10], "odd"), emptied, "one") is not None
    emptied |= {"loops": [], "template": None, "trace": None}
    assert card_figure(finding(check, "rest-1", [10], "odd"), emptied, "one") is not None


def test_declared_limits_are_all_drawn_else_the_one_crossed():
    declared = finding(
        "x", None, [], "odd", value=6.7, limit=5.0, limits={"suspect_above": 2.0, "fail_above": 5.0, "basis": "house default"}
    )
    assert limits_of(declared) == {"suspect_above": 2.0, "fail_above": 5.0}
    assert limits_of(finding("x", None, [], "odd", value=3.0, limit=8.0)) == {"fail_below": 8.0}
    assert limits_of(finding("x", None, [], "odd", value=9.0, limit=8.0, verdict="suspect")) == {"suspect_above": 8.0}
    assert limits_of(finding("x", None, [], "odd")) == {}
    assert ruler_words(finding("x", None, [], "odd", value=9.0, limit=8.0, unit="mL")) == "Measured 9 mL; fail above 8 mL."


def test_limits_far_below_a_wild_value_keep_their_labels_apart(run):
    limits = {"suspect_above": 0.08, "fail_above": 0.15}
    drawn = str(card_figure(finding("loop-closure", "rest-1", [10], "open", value=50.0, limit=0.15, limits=limits), run, "one"))
    assert "fail &gt; 0.15" in drawn
    assert "suspect &gt; 0.08" in drawn
