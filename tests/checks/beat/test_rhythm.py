from dataclasses import replace

import numpy as np
import pytest

from checks.beat.cycle_length import preceding_ratio
from checks.check import Verdict
from checks.verdicts import Rules, sentence
from flows.sources.simulated.rhythm import Breathing, Conditions
from metrics.signals.facts import RunFacts
from tests.checks.made_subjects import (
    FIBRILLATING,
    REST,
    SINUS_ARRHYTHMIA,
    beats_at,
    drawn,
    judged_run,
    never_improves,
    of,
    rejected,
    rerecorded,
    simulated,
    truth,
)

P, S, F, N = Verdict.PASS, Verdict.SUSPECT, Verdict.FAIL, Verdict.NOT_EVALUATED
FIBRILLATION = RunFacts("drawn", "steady", rhythm="atrial-fibrillation", sampling_rate_hz=200.0)
EXTRASYSTOLES = Conditions(duration_s=18.0, premature_s=(7.0, 12.5), coupling=0.6)


def intervals(*, early=0.6, pause=1.4, at=10, count=16, **columns):
    """A drawn run in which beat ``at`` (from 0) comes ``early`` and a pause follows it."""
    rr = np.ones(count)
    rr[at - 1], rr[at] = early, pause
    return drawn(count, rr_s=rr, **columns)


def verdicts(subject, name="cycle-length", **rules):
    return of(judged_run(subject, Rules({}, **rules)), name).verdict


def test_a_premature_beat_and_the_one_after_it_fail_and_no_other():
    subject = intervals()
    assert [place for place, one in enumerate(verdicts(subject)) if one is F] == [10]
    assert [place for place, one in enumerate(verdicts(subject, "post-premature")) if one is F] == [11]
    assert rejected(subject) == {11: ("cycle-length",), 12: ("post-premature",)}


@pytest.mark.parametrize("heart", ["normal", "fast", "stiff", "right"])
def test_of_a_simulated_extrasystole_only_it_and_the_next_beat_are_lost(heart):
    subject = simulated(heart, EXTRASYSTOLES)
    beats = truth(heart, EXTRASYSTOLES).beats
    early = np.flatnonzero(beats.premature)
    lost = beats_at(subject, beats.middle_s[early]) | beats_at(subject, beats.middle_s[early + 1])
    assert len(lost) == 4
    assert set(rejected(subject)) == lost
    assert not lost & {number - 1 for number in beats_at(subject, beats.middle_s[early])}


def test_a_short_interval_alone_is_suspect_and_keeps_its_beat():
    subject = intervals(pause=1.0)
    assert verdicts(subject)[10] is S
    assert rejected(subject) == {}
    assert set(rejected(subject, Rules({}, suspect_rejects=True))) == {11}


def test_a_weak_contraction_is_a_second_sign_too():
    dpdt = np.full(16, 1500.0)
    dpdt[10] = 1000.0
    assert verdicts(intervals(pause=1.0, dpdt_max_mmhg_per_s=dpdt))[10] is F


def test_a_pause_or_a_weak_beat_at_the_usual_interval_is_no_fault():
    dpdt = np.full(16, 1500.0)
    dpdt[10] = 900.0
    assert rejected(intervals(early=1.0, pause=1.6, dpdt_max_mmhg_per_s=dpdt)) == {}


def test_a_beat_ever_earlier_never_improves_its_verdict():
    found = [verdicts(intervals(early=early))[10] for early in (1.0, 0.9, 0.81, 0.79, 0.7, 0.5, 0.3)]
    assert found == [P, P, P, F, F, F, F]
    assert never_improves(found)


@pytest.mark.parametrize("sinus_depth", [0.05, 0.1, 0.15, 0.2])
def test_sinus_arrhythmia_costs_no_beat(sinus_depth):
    breathing = Conditions(duration_s=18.0, breathing=Breathing(sinus_depth=sinus_depth))
    for heart in ("normal", "large", "fast"):
        assert rejected(simulated(heart, breathing)) == {}


def test_declared_fibrillation_fails_no_beat_by_its_interval():
    for heart in ("normal", "stiff", "right"):
        found = judged_run(simulated(heart, FIBRILLATING))
        assert F not in of(found, "cycle-length").verdict
        assert F not in of(found, "post-premature").verdict
        assert found.accepted.all()
    assert F not in verdicts(intervals(facts=FIBRILLATION))
    assert S in verdicts(intervals(facts=FIBRILLATION))


def test_two_premature_beats_in_a_row_lose_the_pair_and_the_next():
    rr = np.ones(16)
    rr[8], rr[9], rr[10] = 0.55, 0.55, 1.5
    dpdt = np.full(16, 1500.0)
    dpdt[[9, 10]] = 900.0
    assert set(rejected(drawn(16, rr_s=rr, dpdt_max_mmhg_per_s=dpdt))) == {10, 11, 12}


def test_a_heart_that_speeds_up_beat_by_beat_is_not_premature():
    assert rejected(drawn(20, rr_s=np.geomspace(1.0, 0.6, 20))) == {}


@pytest.mark.parametrize("at", [1, 2, 3])
def test_early_in_a_run_the_run_s_own_median_stands_in(at):
    assert verdicts(intervals(at=at))[at] is F


def test_the_first_beat_has_no_interval_before_it_and_is_not_rejected_for_that():
    assert verdicts(drawn())[0] is N
    assert judged_run(drawn()).accepted[0]


def test_intervals_count_against_their_own_usual_length_whatever_the_clock():
    rr = np.array([1.0, 1.1, 0.9, 1.0, 1.05, 0.6, 1.3, 1.0])
    np.testing.assert_allclose(preceding_ratio(rr), preceding_ratio(3.7 * rr))


@pytest.mark.parametrize("count", [0, 1, 2])
def test_very_short_runs_do_not_raise(count):
    judged = of(judged_run(drawn(count)), "cycle-length") if count else None
    assert judged is None or judged.trouble is None
    assert preceding_ratio(np.ones(count)).size == count


def test_a_run_cut_later_judges_the_same_beats_alike():
    whole = simulated("normal", EXTRASYSTOLES)
    rate = whole.facts.sampling_rate_hz
    first = round(2.3 * rate)
    channels = {name: channel.samples[first:] for name, channel in whole.recording.channels.items()}
    stamps = whole.recording.channels["pressure"].time_s[first:] - first / rate
    later = rerecorded(whole, time_s=stamps, **channels)

    def instants(subject):
        return np.array([subject.start_s()[number - 1] for number in sorted(rejected(subject))])

    assert instants(whole).size == 4
    np.testing.assert_allclose(instants(later) + first / rate, instants(whole), atol=0.01)


def test_the_interval_is_told_with_value_and_limit():
    found = of(judged_run(intervals()), "cycle-length")
    assert sentence(found, 10) == "the beat comes after 60% of the usual interval (limit 80%)"
    assert found.at_s[10] == pytest.approx(10.0)


def test_a_steady_run_passes_and_rhythm_does_not_judge_a_run_without_beats():
    assert set(verdicts(simulated("normal", REST))) <= {P, N}
    bare = replace(drawn(), beats=None, trouble="no beats")
    assert "cycle-length" not in {judged.check.name for judged in judged_run(bare).judged}


def test_breathing_that_moves_the_interval_by_15_percent_is_at_most_suspect():
    assert F not in verdicts(simulated("normal", SINUS_ARRHYTHMIA))
