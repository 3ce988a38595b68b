from dataclasses import replace

import numpy as np
import pytest

from checks import ALL
from checks.check import Check, Level, Limits, Measured, Verdict, judge, single
from checks.spoils import EVERYTHING
from checks.subject import AcquisitionSubject, RunSubject
from checks.verdicts import Rules, judge_acquisition, judge_run, sentence, spoilers
from metrics.signals.facts import AcquisitionFacts, RunFacts
from tests.checks.made_subjects import CHECKS, drawn, judged_run, of, rejected, simulated

P, S, F, N = Verdict.PASS, Verdict.SUSPECT, Verdict.FAIL, Verdict.NOT_EVALUATED
LIMITS = Limits(suspect_above=1.0, fail_above=2.0)


def card(name, values, level=Level.BEAT, **fields):
    """A check that measures these values of whatever it is shown."""
    measured = Measured(np.asarray(values, dtype=np.float64)) if level is Level.BEAT else single(values)
    settings = {"unit": "1", "limits": LIMITS, "reason": "it is {value:g} (limit {limit:g})", "title": name.title()} | fields
    return Check(name=name, level=level, measure=lambda _subject: measured, **settings)


def run_card(name, value, **fields):
    return card(name, value, Level.RUN, **fields)


def judged(*checks, beats=3, **rules):
    return judge_run(drawn(beats), checks, Rules({}, **rules))


def test_a_beat_is_rejected_by_every_check_it_fails_and_by_no_other():
    found = judged(card("zebra", [0.0, 3.0, 3.0]), card("antelope", [0.0, 0.0, 3.0]), card("bear", [1.5, 1.5, np.nan]))
    assert found.rejected_by == ((), ("zebra",), ("antelope", "zebra"))
    assert found.accepted.tolist() == [True, False, False]


def test_suspect_beats_are_rejected_only_where_the_policy_says_so():
    check = card("bear", [0.0, 1.5, 3.0])
    assert judged(check).accepted.tolist() == [True, True, False]
    assert judged(check, suspect_rejects=True).accepted.tolist() == [True, False, False]


def test_a_beat_that_a_required_check_could_not_evaluate_is_rejected():
    check = card("bear", [0.0, np.nan, np.nan])
    assert judged(check).accepted.all()
    assert judged(replace(check, required=True)).accepted.tolist() == [True, False, False]


def test_the_protocol_says_which_checks_are_required():
    one, other = card("bear", [np.nan] * 3), card("fox", [np.nan] * 3, required=True)
    assert judged(one, other, required=frozenset({"bear"})).rejected_by == (("bear",),) * 3
    assert judged(one, other, required=frozenset()).accepted.all()


def test_a_beat_is_not_rejected_for_what_the_run_already_withholds():
    of_pressure = card("bear", [3.0, 3.0, 3.0], concerns=frozenset({"Pmax"}))
    wider = run_card("wolf", 3.0, spoils=frozenset({"Pmax", "ESP"}))
    found = judged(wider, of_pressure)
    assert found.accepted.all()
    (told,) = [finding for finding in found.findings if finding.check is of_pressure]
    assert told.verdict is N
    assert told.reason == "Bear: not evaluated (withheld of the whole run by wolf)"


@pytest.mark.parametrize(
    "other",
    [run_card("wolf", 3.0, spoils=frozenset({"EDP"})), run_card("wolf", 1.5, spoils=frozenset({"Pmax"}))],
    ids=["of something else", "only suspect"],
)
def test_a_beat_is_rejected_for_what_the_run_does_not_withhold(other):
    found = judged(other, card("bear", [3.0, 0.0, 0.0], concerns=frozenset({"Pmax"})))
    assert found.accepted.tolist() == [False, True, True]


def test_landmarks_and_missing_samples_are_required_by_default():
    assert {check.name for check in ALL if check.required} == {"landmarks", "missing-samples"}


def test_the_protocol_s_bounds_stand_in_for_the_check_s_own_and_only_those():
    rules = Rules({"bear": {"fail_above": 5.0}})
    check = card("bear", [3.0])
    assert rules.limits_of(check, "LV") == Limits(suspect_above=1.0, fail_above=5.0, basis="study protocol")
    assert rules.limits_of(card("fox", [3.0]), "LV") == LIMITS


def test_a_bound_of_the_protocol_holds_in_either_chamber():
    rules = Rules({"range-pressure": {"fail_above": 90.0}})
    for chamber in ("LV", "RV"):
        limits = rules.limits_of(CHECKS["range-pressure"], chamber)
        assert limits.fail_above == 90.0
        assert limits.fail_below == CHECKS["range-pressure"].limits_for(chamber).fail_below


def test_an_unusable_run_rejects_its_beats_with_that_check_s_name_beside_their_own():
    found = judged(run_card("wolf", 3.0, spoils=EVERYTHING), card("bear", [0.0, 3.0, 0.0]))
    assert not found.is_usable
    assert found.rejected_by == (("wolf",), ("bear", "wolf"), ("wolf",))
    assert [check.name for check in found.failed] == ["wolf"]


@pytest.mark.parametrize("value", [1.5, np.nan, 0.0])
def test_only_a_fail_makes_a_run_unusable(value):
    found = judged(run_card("wolf", value, spoils=EVERYTHING))
    assert found.is_usable
    assert found.failed == ()
    assert found.accepted.all()


def test_a_failed_run_check_that_spoils_less_leaves_the_beats_alone():
    found = judged(run_card("wolf", 3.0, spoils=EVERYTHING - {"Ees"}), card("bear", [0.0, 0.0, 3.0]))
    assert found.is_usable
    assert found.rejected_by == ((), (), ("bear",))
    assert spoilers(frozenset({"SV"}), found.failed) == found.failed
    assert spoilers(frozenset({"Ees"}), found.failed) == ()


def test_checks_that_wait_for_the_beats_see_which_were_accepted():
    def accepted_beats(subject):
        return single(float(subject.accepted.sum()))

    late = Check("late", Level.RUN, accepted_beats, "1", Limits(fail_below=3.0), "{value:g} under {limit:g}", "Late", after_beats=True)
    found = judged(late, card("bear", [0.0, 3.0, 0.0]), run_card("wolf", 0.0))
    assert of(found, "late").value.tolist() == [2.0]
    assert [check.name for check in found.failed] == ["late"]


def test_every_check_is_evaluated_whatever_another_found():
    names = [judged.check.name for judged in judged_run(simulated()).judged]
    mine = [check for check in ALL if check.level is not Level.ACQUISITION and "steady" in check.run_kinds]
    assert sorted(names) == sorted(check.name for check in mine)
    ruined = judged(run_card("wolf", 3.0, spoils=EVERYTHING), card("bear", [0.0] * 3), run_card("fox", 3.0))
    assert len(ruined.judged) == 3


def test_a_check_that_raises_stops_no_other():
    def broken(_subject):
        message = "no such thing"
        raise KeyError(message)

    raising = Check("broken", Level.BEAT, broken, "1", LIMITS, "{value} {limit}", "Broken", required=True)
    found = judged(raising, card("bear", [0.0, 3.0, 0.0]))
    assert found.rejected_by == (("broken",), ("bear", "broken"), ("broken",))
    told = [finding.reason for finding in found.findings if finding.check.name == "broken"]
    assert told == ["Broken: not evaluated (KeyError: 'no such thing')"] * 3


def test_checks_of_another_kind_of_run_are_not_asked():
    ramp_only = run_card("ramp-only", 3.0, run_kinds=("preload-reduction",))
    assert judged(ramp_only).judged == ()
    ramp = drawn(3, facts=RunFacts("ramp", "preload-reduction", sampling_rate_hz=200.0))
    assert len(judge_run(ramp, [ramp_only], Rules({})).judged) == 1


def test_a_run_without_beats_has_no_beat_verdicts_but_its_own():
    bare = RunSubject(drawn().facts, None, trouble="x.csv: is empty")
    found = judge_run(bare, ALL, Rules({}))
    assert found.rejected_by == ()
    assert found.accepted.size == 0
    assert not found.is_usable


def test_each_verdict_that_is_no_pass_is_one_row_of_the_log():
    found = judged(card("bear", [0.0, 1.5, 3.0]), run_card("wolf", 3.0, spoils=frozenset({"Ees"})), run_card("fox", 0.5))
    rows = [(row.check.name, row.beat, row.verdict, row.decisive, row.value, row.limit, row.action) for row in found.findings]
    assert rows == [
        ("wolf", None, F, True, 3.0, 2.0, "withhold"),
        ("bear", 2, S, False, 1.5, 1.0, "none"),
        ("bear", 3, F, True, 3.0, 2.0, "reject"),
    ]
    assert {row.run for row in found.findings} == {"drawn"}


@pytest.mark.parametrize(
    ("value", "fields", "action", "decisive"),
    [
        (3.0, {"spoils": EVERYTHING}, "reject", True),
        (3.0, {"spoils": frozenset({"Ees"})}, "withhold", True),
        (3.0, {"spoils": frozenset({"Ees"}), "corrected": True}, "withhold", True),
        (3.0, {}, "query", True),
        (1.5, {"corrected": True}, "correct", False),
        (1.5, {}, "none", False),
        (np.nan, {"corrected": True}, "none", False),
    ],
)
def test_what_follows_from_a_run_check(value, fields, action, decisive):
    (row,) = judged(run_card("wolf", value, **fields)).findings
    assert (row.action, row.decisive) == (action, decisive)


def test_a_check_that_could_say_nothing_of_any_beat_has_one_row_for_the_run_unless_it_is_required():
    silent = card("bear", [np.nan] * 3)
    (row,) = judged(silent).findings
    assert (row.beat, row.verdict, row.decisive, row.value) == (None, N, False, None)
    assert [row.beat for row in judged(replace(silent, required=True)).findings] == [1, 2, 3]
    assert [row.beat for row in judged(card("bear", [np.nan, 0.0, np.nan])).findings] == [1, 3]


def test_a_fact_shows_no_number_and_a_row_never_holds_nan():
    (fact,) = judged(run_card("wolf", 3.0, is_fact=True, reason="the wolf is there")).findings
    assert (fact.value, fact.limit, fact.reason) == (None, None, "the wolf is there")
    (silent,) = judged(run_card("wolf", np.nan)).findings
    assert (silent.value, silent.limit, silent.at_s) == (None, None, None)
    assert silent.reason == "Wolf: not evaluated, nothing to evaluate it by"


def test_what_stopped_a_run_stands_in_the_reasons_of_what_could_not_be_evaluated():
    bare = RunSubject(drawn().facts, None, trouble="x.csv: is empty")
    rows = {row.check.name: row.reason for row in judge_run(bare, ALL, Rules({})).findings}
    assert rows["beats-found"] == "Beats were found: not evaluated (ValueError: x.csv: is empty)"
    assert "x.csv: is empty" in rows["readable"]


@pytest.mark.parametrize("check", [check for check in ALL if check.level is not Level.ACQUISITION], ids=lambda check: check.name)
def test_no_check_passes_a_run_that_was_not_read(check):
    bare = RunSubject(replace(drawn().facts, kind=check.run_kinds[0]), None, trouble="x.csv: is empty")
    assert judge(check, bare, check.limits, 3).worst() is not P


@pytest.mark.parametrize("name", ["pressure-zero", "zero-drift", "pressure-gain", "pressure-sensor", "reference-volumes"])
def test_no_check_passes_an_acquisition_that_declares_nothing(name):
    (judged_one,), _ = judge_acquisition(AcquisitionSubject(AcquisitionFacts()), [CHECKS[name]], Rules({}))
    assert judged_one.worst() is not P


def test_an_acquisition_s_findings_have_neither_run_nor_beat_nor_instant():
    check = card("owl", 3.0, Level.ACQUISITION, spoils=frozenset({"Ees"}))
    judged_all, findings = judge_acquisition(AcquisitionSubject(AcquisitionFacts()), [check, card("bear", [3.0])], Rules({}))
    assert [one.check.name for one in judged_all] == ["owl"]
    assert [(row.run, row.beat, row.at_s, row.action) for row in findings] == [(None, None, None, "withhold")]


def test_acquisition_limits_come_from_protocol_and_chamber():
    check = card("owl", 3.0, Level.ACQUISITION, limits_rv=Limits(fail_above=9.0))
    for chamber, rules, expected in (("LV", {}, F), ("RV", {}, P), ("RV", {"owl": {"fail_above": 2.5}}, F)):
        subject = AcquisitionSubject(AcquisitionFacts(chamber=chamber))
        found, _ = judge_acquisition(subject, [check], Rules(rules))
        assert found[0].worst() is expected


def test_detected_beats_are_accepted_or_rejected_and_nothing_else():
    for subject in (simulated(), drawn(5, pmax_mmhg=[120.0, 900.0, np.nan, 120.0, 5.0]), drawn(2)):
        found = judged_run(subject)
        assert len(found.rejected_by) == len(subject.beats)
        assert int(found.accepted.sum()) + len(rejected(subject)) == len(subject.beats)


def test_judging_again_says_the_same():
    first, second = judged_run(simulated()), judged_run(simulated())
    assert first.rejected_by == second.rejected_by
    assert first.findings == second.findings


COUNTS = {
    "landmarks",
    "duplicated-samples",
    "time-base",
    "pressure-clipping",
    "volume-clipping",
}
"""Checks that count something no sound run has: their limit is no number a reader needs."""


def limit_crossed(check, chamber):
    """A value beyond each fail bound of a check, and the bound."""
    limits = check.limits_for(chamber)
    if limits.fail_above is not None:
        yield 1.37 * limits.fail_above + 0.5, limits.fail_above
    if limits.fail_below is not None:
        yield limits.fail_below - 0.37 * abs(limits.fail_below) - 0.011, limits.fail_below


@pytest.mark.parametrize("check", ALL, ids=lambda check: check.name)
def test_every_reason_is_a_sentence_that_holds_value_and_limit(check):
    for chamber in ("LV", "RV"):
        for value, limit in limit_crossed(check, chamber):
            found = of_value(check, value, chamber)
            assert found.worst() is F
            assert found.limit.tolist() == [limit]
            told = sentence(found, 0, trouble="the file is cut")
            assert told == told.strip()
            assert not told.endswith(".")
            assert "{" not in told
            assert "nan" not in told
            assert told[0].islower() or told[0].isdigit()
            if not check.is_fact:
                assert any(digits in told for digits in spellings(value)), told
                assert check.name in COUNTS or any(digits in told for digits in spellings(limit)), told


def of_value(check, value, chamber="LV"):
    """What a check says of a value it might have measured."""
    measured = replace(check, measure=lambda _subject: single(value))
    run = replace(drawn(1).facts, chamber=chamber, kind=check.run_kinds[0])
    if check.level is Level.ACQUISITION:
        return judge_acquisition(AcquisitionSubject(AcquisitionFacts(chamber=chamber)), [measured], Rules({}))[0][0]
    return next(one for one in judge_run(drawn(1, facts=run), [measured], Rules({})).judged)


def spellings(number):
    """How a number may stand in a sentence."""
    return {form.format(number) for form in ("{:.0f}", "{:.1f}", "{:.2f}", "{:.3f}", "{:g}", "{:.0%}", "{:.1%}", "{:.2%}")}


@pytest.mark.parametrize("check", ALL, ids=lambda check: check.name)
def test_what_was_not_evaluated_is_told_by_the_check_s_title(check):
    told = sentence(of_value(check, np.nan), 0)
    assert told == f"{check.title}: not evaluated, nothing to evaluate it by"
