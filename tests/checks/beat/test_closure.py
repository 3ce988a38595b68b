from dataclasses import replace

import numpy as np
import pytest

from checks.check import Verdict
from checks.verdicts import Rules, sentence
from flows.sources.simulated.rhythm import Conditions, Occlusion
from metrics.signals.facts import RunFacts
from tests.checks.made_subjects import (
    BREATHING,
    BREATHING_RAMP,
    FIBRILLATING,
    RAMP,
    RELEASED,
    beats_at,
    drawn,
    judged_run,
    never_improves,
    of,
    rejected,
    rerecorded,
    simulated,
    truth,
    worst,
)

P, S, F, N = Verdict.PASS, Verdict.SUSPECT, Verdict.FAIL, Verdict.NOT_EVALUATED


def stepped(ml, subject=None, beats=4):
    """A steady run whose volume jumps by ``ml`` while the heart fills, and back some beats later; with the two beats touched."""
    subject = subject or simulated()
    first = len(subject.beats) // 2
    rate = subject.facts.sampling_rate_hz
    up, down = (int(subject.beats.start[beat] + 0.75 * subject.beats.rr_s[beat] * rate) for beat in (first, first + beats))
    volume = subject.recording.channels["volume"].samples.copy()
    volume[up:down] += ml
    return rerecorded(subject, volume=volume), {first + 1, first + beats + 1}


def gaps(*ml, **columns):
    """A drawn run whose volumes at the beats' ends follow from these gaps."""
    ends = 120.0 + np.concatenate([[0.0], np.cumsum(ml)])
    return drawn(len(ml), volume_at_ends_ml=ends, **columns)


def closure(subject):
    return of(judged_run(subject), "loop-closure")


@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_a_jump_of_volume_and_its_way_back_lose_the_two_beats_that_hold_them(sign):
    subject, touched = stepped(sign * 25.0)
    assert set(rejected(subject)) == touched
    assert all("loop-closure" in names for names in rejected(subject).values())


def test_a_growing_jump_never_improves_the_verdict():
    verdicts = [worst(stepped(ml)[0], "loop-closure") for ml in (0.0, 2.0, 5.0, 8.0, 15.0, 30.0)]
    assert (verdicts[0], verdicts[-1]) == (P, F)
    assert S in verdicts
    assert never_improves(verdicts)


def test_a_beat_to_its_15_percent_of_stroke_volume_and_beyond():
    rng = np.random.default_rng(1)
    small = rng.normal(0.0, 0.3, 16)
    for share, expected in ((0.05, P), (0.10, S), (0.20, F)):
        gap = small.copy()
        gap[8] = share * 70.0
        assert closure(gaps(*gap)).verdict[8] is expected


def test_a_gap_within_four_standard_deviations_of_the_others_is_none():
    restless = np.resize([6.0, -6.0, 5.0, -5.0, 7.0, -7.0], 20)
    restless[10] = 14.0
    assert set(closure(gaps(*restless)).verdict) == {P}


@pytest.mark.parametrize("drift_ml", [-6.0, -2.0, 3.0])
def test_a_drift_all_beats_share_is_the_run_s_own_trend(drift_ml):
    steady = drift_ml + np.random.default_rng(2).normal(0.0, 0.3, 16)
    assert set(closure(gaps(*steady)).verdict) == {P}


def test_the_verdict_does_not_change_with_the_unit_of_volume():
    gap = np.random.default_rng(3).normal(0.0, 0.3, 16)
    gap[[5, 11]] = 20.0, 8.0
    one, thousand = gaps(*gap), gaps(*gap)
    litres = replace(thousand.signals, volume_ml=thousand.signals.volume_ml * 1e-3)
    beats = replace(thousand.beats, edv_ml=thousand.beats.edv_ml * 1e-3, esv_ml=thousand.beats.esv_ml * 1e-3)
    np.testing.assert_allclose(closure(replace(thousand, signals=litres, beats=beats)).value, closure(one).value)


@pytest.mark.parametrize("conditions", [RAMP, BREATHING_RAMP, BREATHING, RELEASED], ids=["ramp", "breathing-ramp", "breathing", "released"])
@pytest.mark.parametrize("heart", ["normal", "large", "fast", "stiff", "right"])
def test_loops_that_are_meant_to_move_are_not_open(heart, conditions):
    found = closure(simulated(heart, conditions))
    assert F not in found.verdict
    assert P in found.verdict


@pytest.mark.parametrize("time_constant_s", [1.2, 3.5, 6.0])
def test_a_sudden_or_a_slow_occlusion_opens_no_loop(time_constant_s):
    conditions = Conditions(14.0, occlusion=Occlusion(onset_s=4.0, time_constant_s=time_constant_s))
    assert F not in closure(simulated("normal", conditions)).verdict


def test_in_an_irregular_heart_closure_is_not_evaluated_and_rejects_nothing():
    found = judged_run(simulated("normal", FIBRILLATING))
    assert set(of(found, "loop-closure").verdict) == {N}
    assert found.accepted.all()
    told = [finding for finding in found.findings if finding.check.name == "loop-closure"]
    assert [(finding.beat, finding.decisive) for finding in told] == [(None, False)]


def test_declared_fibrillation_is_irregular_even_where_a_few_beats_happen_to_be_even():
    gap = np.zeros(12)
    gap[6] = 21.0
    even = gaps(*gap, facts=RunFacts("drawn", "steady", rhythm="atrial-fibrillation", sampling_rate_hz=200.0))
    assert set(closure(even).verdict) == {N}


def test_after_the_window_of_an_occlusion_closure_is_not_evaluated():
    subject = simulated("normal", RELEASED)
    after = np.arange(len(subject.beats)) > subject.window.last_at
    assert after.sum() > 2
    assert {one for one, late in zip(closure(subject).verdict, after, strict=True) if late} == {N}


def test_a_jump_inside_the_fall_of_preload_is_still_found():
    subject = simulated("normal", RAMP)
    at = int(np.flatnonzero(subject.in_window)[2])
    volume = subject.recording.channels["volume"].samples.copy()
    volume[(subject.beats.start[at] + subject.beats.end[at]) // 2 :] += 30.0
    found = closure(rerecorded(subject, volume=volume))
    assert found.verdict[at] is F


def test_the_beat_before_a_premature_one_is_cut_short_and_stays():
    conditions = Conditions(duration_s=18.0, premature_s=(7.0, 12.5), coupling=0.6)
    subject = simulated("normal", conditions)
    beats = truth("normal", conditions).beats
    before = {number - 1 for number in beats_at(subject, beats.middle_s[np.asarray(beats.premature)])}
    found = closure(subject)
    assert {found.verdict[number - 1] for number in before} == {N}
    assert not before & set(rejected(subject))


def test_a_beat_that_ejects_nothing_is_not_divided_by_its_stroke_volume():
    gap = np.zeros(12)
    gap[6] = 30.0
    esv = np.full(12, 50.0)
    esv[3] = 120.0
    found = closure(gaps(*gap, esv_ml=esv))
    assert found.verdict[6] is F
    assert np.isfinite(found.value[6])
    nothing = closure(gaps(*gap, esv_ml=120.0))
    assert set(nothing.verdict) == {N}


@pytest.mark.parametrize("count", [1, 2, 3, 4, 5])
def test_short_runs_are_judged_without_raising(count):
    for kind in ("steady", "preload-reduction"):
        subject = drawn(count, facts=RunFacts("drawn", kind, sampling_rate_hz=200.0))
        assert closure(subject).trouble is None


def test_a_signal_that_is_not_there_is_not_evaluated_and_rejects_no_beat():
    subject = replace(drawn(), signals=None, trouble="no time base")
    found = judged_run(subject)
    assert set(of(found, "loop-closure").verdict) == {N}
    assert not any("loop-closure" in names for names in found.rejected_by)


def test_the_gap_is_told_with_value_and_limit_and_its_beat_s_instant():
    gap = np.zeros(12)
    gap[6] = 21.0
    found = closure(gaps(*gap))
    assert "30% of stroke volume" in sentence(found, 6)
    assert "(limit 15%)" in sentence(found, 6)
    assert found.at_s[6] == pytest.approx(6.0)


def test_a_stricter_protocol_rejects_what_is_suspect_by_default():
    gap = np.zeros(12)
    gap[6] = 7.0
    assert rejected(gaps(*gap)) == {}
    assert set(rejected(gaps(*gap), Rules({"loop-closure": {"fail_above": 0.08}}))) == {7}
