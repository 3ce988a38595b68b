from dataclasses import replace

import numpy as np
import pytest

from checks import ALL
from checks.check import Verdict
from checks.subject import RunSubject
from checks.verdicts import judge_run, sentence
from flows.sources.simulated.rhythm import Conditions, Occlusion
from metrics.signals.facts import RunFacts
from tests.checks.made_subjects import (
    BREATHING_RAMP,
    FIBRILLATING_RAMP,
    OWN_LIMITS,
    RAMP,
    REFLEX,
    declared,
    drawn,
    judged_run,
    never_improves,
    of,
    rerecorded,
    simulated,
    worst,
)

P, S, F, N = Verdict.PASS, Verdict.SUSPECT, Verdict.FAIL, Verdict.NOT_EVALUATED
FACTS = RunFacts("ramp", "preload-reduction", sampling_rate_hz=200.0, events=((4.0, "occlusion-on"),))


def falling(share, beats=10, before=5, **columns):
    """A run whose EDV holds and then falls by ``share`` over ``beats`` beats."""
    edv = np.concatenate([np.full(before, 120.0), 120.0 * (1.0 - share * np.linspace(0.0, 1.0, beats))])
    edv = np.append(edv, np.full(2, edv[-1]))
    return drawn(edv.size, edv_ml=edv, esv_ml=edv * 0.45, volume_at_ends_ml=np.append(edv, edv[-1]), facts=FACTS, **columns)


def shallow(floor):
    return simulated("normal", Conditions(14.0, occlusion=Occlusion(onset_s=4.0, floor=floor)))


def test_a_fall_of_a_fifth_passes_and_one_too_small_for_a_slope_fails():
    assert [worst(falling(share), "preload-adequacy") for share in (0.4, 0.25, 0.17, 0.05, 0.0)] == [P, P, S, F, F]
    assert [worst(falling(share), "preload-adequacy-work") for share in (0.4, 0.25, 0.17, 0.14, 0.0)] == [P, P, S, F, F]


def test_an_occlusion_ever_shallower_never_improves_the_verdict():
    verdicts = [worst(shallow(floor), "preload-adequacy") for floor in (0.2, 0.45, 0.65, 0.8, 0.9, 1.0)]
    assert (verdicts[0], verdicts[-1]) == (P, F)
    assert never_improves(verdicts)


def test_one_stray_beat_is_no_load_range():
    subject = falling(0.02, beats=12)
    edv = subject.beats.edv_ml.copy()
    edv[9] = 60.0
    assert worst(replace(subject, beats=replace(subject.beats, edv_ml=edv)), "preload-adequacy") is F


def test_only_accepted_beats_of_the_window_count():
    subject = falling(0.4)
    assert worst(subject, "preload-beats") is P
    pmax = np.full(len(subject.beats), 120.0)
    pmax[6:] = 900.0
    spoiled = replace(subject, beats=replace(subject.beats, pmax_mmhg=pmax))
    verdict = judged_run(spoiled)
    assert of(verdict, "preload-beats").worst() is F
    assert verdict.is_usable


def test_a_window_without_accepted_beats_has_too_few_and_no_load_range_at_all():
    subject = falling(0.4, pmax_mmhg=900.0)
    verdict = judged_run(subject)
    assert of(verdict, "preload-beats").worst() is F
    assert of(verdict, "preload-adequacy").worst() is N
    assert sentence(of(verdict, "preload-beats"), 0) == "only 0 accepted beats lie in the usable window (limit 5)"


def test_five_beats_are_few_and_four_too_few():
    whole = falling(0.4)
    verdicts, counts = [], []
    for lost in range(int(whole.in_window.sum()) + 1):
        pmax = np.full(len(whole.beats), 120.0)
        pmax[np.flatnonzero(whole.in_window)[:lost]] = 900.0
        found = of(judged_run(replace(whole, beats=replace(whole.beats, pmax_mmhg=pmax))), "preload-beats")
        verdicts.append(found.worst())
        counts.append(int(found.value[0]))
    assert dict(zip(counts, verdicts, strict=True)).items() >= {7: P, 6: P, 5: S, 4: F, 0: F}.items()
    assert never_improves(verdicts)


@pytest.mark.parametrize("heart", ["normal", "small", "large", "fast", "failing", "stiff", "high-afterload", "right", "right-loaded"])
def test_no_sound_occlusion_is_gated_by_how_flat_or_how_loose_its_line_is(heart):
    for conditions in (RAMP, BREATHING_RAMP):
        verdict = judged_run(simulated(heart, conditions))
        assert [of(verdict, name).worst() for name in ("preload-adequacy", "preload-beats")] == [P, P]
    irregular = judged_run(simulated(heart, FIBRILLATING_RAMP))
    assert not {of(irregular, name).worst() for name in ("preload-adequacy", "preload-beats")} & {F, N}


def test_a_failing_heart_whose_pressure_hardly_falls_with_its_load_is_still_adequate():
    subject = falling(0.3, pmax_mmhg=120.0, dpdt_max_mmhg_per_s=700.0, sw_mmhg_ml=2500.0)
    assert [worst(subject, name) for name in ("preload-adequacy", "preload-beats")] == [P, P]


def test_a_reflex_ends_the_window_and_enough_of_it_is_left():
    with_reflex, without = (
        simulated("normal", REFLEX),
        simulated("normal", replace(REFLEX, occlusion=replace(REFLEX.occlusion, reflex=0.0))),
    )
    assert with_reflex.window.ended_by == "reflex"
    assert with_reflex.in_window.sum() < without.in_window.sum()
    assert worst(with_reflex, "preload-beats") is P


def test_in_declared_fibrillation_no_reflex_ends_the_window():
    subject = simulated("normal", FIBRILLATING_RAMP)
    assert subject.window.ended_by != "reflex"
    undeclared = declared(subject, rhythm="sinus")
    assert undeclared.in_window.sum() <= subject.in_window.sum()


def test_a_wrong_gain_does_not_change_how_far_preload_falls():
    subject = simulated("normal", RAMP)
    volume = subject.recording.channels["volume"].samples
    scaled = rerecorded(subject, volume=1.7 * volume)
    values = [of(judged_run(one), "preload-adequacy").value[0] for one in (subject, scaled)]
    assert values[0] == pytest.approx(values[1], rel=1e-6)


def test_a_longer_lead_in_changes_nothing():
    subject = falling(0.25)
    later = falling(0.25, before=9)
    late = replace(later, facts=replace(FACTS, events=((8.0, "occlusion-on"),)))
    values = [of(judged_run(one), "preload-adequacy").value[0] for one in (subject, late)]
    assert values[0] == pytest.approx(values[1])


def test_steady_runs_are_not_asked_for_a_fall():
    names = {judged.check.name for judged in judged_run(simulated()).judged}
    assert not names & {"preload-adequacy", "preload-beats"}


def test_a_run_that_was_not_read_is_not_asked_either():
    lost = RunSubject(FACTS, None, trouble="ramp.csv: is empty")
    names = {judged.check.name for judged in judge_run(lost, ALL, OWN_LIMITS).judged}
    assert not names & {"preload-adequacy", "preload-beats"}


def test_what_is_told_of_a_shallow_fall_holds_value_and_limit():
    told = sentence(of(judged_run(falling(0.05)), "preload-adequacy"), 0)
    assert "5%" in told
    assert "12%" in told
