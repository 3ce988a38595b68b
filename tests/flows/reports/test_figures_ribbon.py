import re

import pytest

from flows.reports.figures_ribbon import ribbon
from flows.reports.reasons import reasons_of
from tests.flows.reports.made_evidence import clean, finding, long, make_run, make_view, queried, unreadable_run


@pytest.mark.parametrize("make", [clean, queried, long])
def test_there_is_one_cell_a_beat(make):
    view = make()
    reasons = reasons_of(view)
    for run in view.evidence["runs"]:
        drawn = ribbon(run, reasons, "ribbon")
        if run["beats"]:
            assert drawn is not None
            assert drawn.count('class="cell"') == len(run["beats"])
            assert drawn.count("<title>Beat ") == len(run["beats"])
            rejected = sum(beat["verdict"] == "rejected" for beat in run["beats"])
            assert drawn.count('class="beat rejected"') == rejected


def test_a_run_without_beats_has_no_ribbon():
    view = make_view("H-001-baseline", "rejected", [unreadable_run()], [])
    assert ribbon(view.evidence["runs"][0], reasons_of(view), "ribbon") is None


def test_a_verdict_is_told_by_letter_and_words_not_by_colour_alone():
    view = queried()
    reasons = reasons_of(view)
    drawn = ribbon(view.evidence["runs"][0], reasons, "ribbon")
    closure, dpdt = reasons.letter_of("loop-closure"), reasons.letter_of("range-dpdt-max").lower()
    cells = {int(found[2]): found[1] for found in re.finditer(r'class="beat (\w+)" aria-label="Beat (\d+) ', str(drawn))}
    assert cells[30] == "rejected"
    assert cells[12] == "flagged"
    signs = re.findall(r'class="sign">(.+?)</text>', str(drawn))
    assert signs[29] == closure
    assert signs[11] == dpdt
    assert re.search(r'aria-label="Beat 30 at [\d.]+ s: rejected by loop-closure"', str(drawn))


def test_a_cell_leads_to_its_card_and_the_tab_key_stops_once_a_reason():
    drawn = str(ribbon(long().evidence["runs"][0], reasons_of(long()), "ribbon"))
    links = re.findall(r'<a href="#(card-\w+-1)" class="beat rejected" aria-label="[^"]*"( tabindex="-1")?>', drawn)
    assert len(links) == 86
    assert sorted(target for target, skipped in links if not skipped) == ["card-A-1", "card-B-1", "card-C-1"]


def test_beats_of_the_window_are_underlined():
    run = make_run("occlusion-1", 20, kind="preload-reduction", fall=0.3, window=range(5, 12))
    view = make_view("H-001-baseline", "accepted", [run], [])
    drawn = ribbon(run, reasons_of(view), "ribbon")
    assert drawn is not None
    assert drawn.count('class="window-line"') == 7
    assert drawn.count("in the preload window") == 14


def test_rows_begin_with_their_time_even_where_it_is_not_known():
    run = make_run("rest-1", 80)
    run["beats"][39]["start_s"] = None
    drawn = str(ribbon(run, reasons_of(make_view("H-001-baseline", "accepted", [run], [])), "ribbon"))
    assert re.findall(r'class="label quiet">(.*?)</text>', drawn) == ["0 s", "", f"{run['beats'][78]['start_s']:.0f} s"]


def test_a_rejected_beat_without_a_reason_is_still_told():
    run = make_run("rest-1", 3, rejected={2: "x"})
    run["beats"][1]["reasons"] = ""
    drawn = ribbon(run, reasons_of(make_view("H-001-baseline", "accepted", [run], [finding("x", "rest-1", [3], "odd")])), "ribbon")
    assert 'class="sign">?</text>' in str(drawn)
