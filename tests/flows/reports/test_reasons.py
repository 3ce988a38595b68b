import pytest

from flows.reports.reasons import reasons_of
from tests.flows.reports.made_evidence import OFFSET_REACHES, empty, finding, make_run, make_view, queried, unreadable_run


@pytest.fixture(scope="module")
def many():
    return reasons_of(queried())


def test_every_check_has_one_letter_and_what_decides_comes_first(many):
    letters = [reason.letter for reason in many.ordered]
    assert letters == sorted(set(letters))
    weights = [reason.decisive for reason in many.ordered]
    assert weights == sorted(weights, reverse=True)
    assert {reason.check for reason in many.remarks} == {"range-dpdt-max", "range-ejection-fraction", "pressure-clipping"}


def test_a_suspect_finding_handed_over_first_still_comes_last():
    findings = [
        finding("range-edv", "rest-1", [1], "large", verdict="suspect", action="none"),
        finding("loop-closure", "rest-1", [2], "open"),
    ]
    found = reasons_of(make_view("H-001-baseline", "accepted", [make_run("rest-1", 4, rejected={2: "loop-closure"})], findings))
    assert [reason.check for reason in found.ordered] == ["loop-closure", "range-edv"]


def test_a_cost_counts_rejected_beats_over_all_runs(many):
    assert many.by_check["loop-closure"].costs == "7 beats."
    assert many.by_check["cycle-length"].costs == "3 beats."
    assert "rest-1 (beats 5, 21)" in many.by_check["cycle-length"].where
    assert "occlusion-1 (beat 14)" in many.by_check["cycle-length"].where


def test_a_cost_names_only_indices_that_are_withheld_for_it(many):
    assert many.by_check["zero-drift"].costs.startswith("9 indices: EDP, ESP, Ea, Ees_Ea")
    assert many.by_check["preload-beats"].costs == "Nothing more: what it reaches is kept by other runs, or lost already."


def test_without_rows_of_indices_a_cost_names_all_it_reaches():
    found = finding("zero-drift", None, [], "drifted", spoils=OFFSET_REACHES)
    reason = reasons_of(make_view("H-001-baseline", "rejected", [unreadable_run()], [found], indices=False)).by_check["zero-drift"]
    assert reason.costs.startswith(f"{len(OFFSET_REACHES)} indices: EDP, ESP, Ea")


def test_an_unusable_run_is_lost_as_a_whole():
    run = make_run("rest-1", 6, rejected=dict.fromkeys(range(1, 7), "time-base")) | {"verdict": "unusable", "reasons": "time-base"}
    found = finding("time-base", "rest-1", [], "time goes backwards")
    reasons = reasons_of(make_view("H-001-baseline", "rejected", [run, unreadable_run()], [found]))
    assert reasons.by_check["time-base"].costs == "The whole of rest-1 (6 beats)."
    assert reasons.by_check["readable"].costs == "The whole of rest-9."


def test_what_was_corrected_or_only_asked_costs_nothing():
    findings = [
        finding("zero-drift", None, [], "drifted a little", verdict="suspect", action="correct"),
        finding("pressure-clipping", "rest-1", [], "flat", verdict="suspect", action="query"),
    ]
    reasons = reasons_of(make_view("H-001-baseline", "accepted", [make_run("rest-1", 4)], findings))
    assert "corrected" in reasons.by_check["zero-drift"].costs
    assert "site should answer" in reasons.by_check["pressure-clipping"].costs


def test_a_check_without_a_finding_still_has_a_letter_and_a_title():
    reasons = reasons_of(make_view("H-001-baseline", "accepted", [make_run("rest-1", 4, rejected={2: "new-check"})], []))
    reason = reasons.by_check["new-check"]
    assert (reason.title, reason.costs, reason.findings) == ("New check", "1 beat.", ())


def test_a_beat_knows_what_rejected_it_and_what_only_flagged_it(many):
    assert many.mark("rest-1", 30).rejected_by == ("loop-closure",)
    assert many.mark("rest-1", 12).flagged_by == ("range-dpdt-max",)
    assert many.mark("rest-1", 1).rejected_by == many.mark("rest-1", 1).flagged_by == ()
    assert many.mark("no such run", 1).rejected_by == ()


def test_an_evidence_without_anything_has_the_reason_of_its_run_only():
    assert [reason.check for reason in reasons_of(empty()).ordered] == ["readable"]
