from dataclasses import replace

import pytest

from checks.acquisition.replicates_agree import pair_variation, replicate_variation
from checks.check import Verdict, judge
from checks.spoils import PRELOAD_SLOPES
from checks.subject import AcquisitionSubject, RunSubject
from metrics.signals.facts import AcquisitionFacts
from tests.checks.made_subjects import CHECKS, RAMP, REST, judged_run, simulated

P, S, F, N = Verdict.PASS, Verdict.SUSPECT, Verdict.FAIL, Verdict.NOT_EVALUATED
CHECK, INTERCEPT = CHECKS["replicates-agree"], CHECKS["replicate-intercepts-agree"]


def ramp(name, factor=1.0, conditions=RAMP, seed=0, **facts):
    """A judged occlusion whose slope is ``factor`` times the heart's."""
    subject = judged_run(simulated(conditions=conditions, seed=seed)).subject
    signals = replace(subject.signals, pressure_mmhg=factor * subject.signals.pressure_mmhg)
    return RunSubject(replace(subject.facts, run=name, **facts), subject.recording, signals, subject.beats, subject.accepted)


def verdict(*runs, spoiled=None, check=CHECK):
    return judge(check, AcquisitionSubject(AcquisitionFacts(), runs, spoiled or {}), check.limits).worst()


def test_replicates_of_one_heart_agree_and_those_of_two_do_not():
    assert verdict(ramp("a"), ramp("b", seed=1)) is P
    assert verdict(ramp("a"), ramp("b", 1.1, seed=1)) is P
    assert verdict(ramp("a"), ramp("b", 1.5, seed=1)) is F
    assert verdict(ramp("a"), ramp("b", seed=1), ramp("c", 1.5)) is F
    assert CHECK.spoils == PRELOAD_SLOPES - {"V0"}


def moved(name, ml):
    """A judged occlusion with volumes ``ml`` larger."""
    one = ramp(name)
    signals = replace(one.signals, volume_ml=one.signals.volume_ml + ml)
    beats = replace(one.beats, edv_ml=one.beats.edv_ml + ml, esv_ml=one.beats.esv_ml + ml)
    return RunSubject(one.facts, one.recording, signals, beats, one.accepted)


def test_a_stronger_heart_keeps_its_v0_and_a_catheter_that_moved_its_slope():
    rest = judged_run(simulated(conditions=REST)).subject
    assert verdict(ramp("a"), ramp("b", 1.5), rest, check=INTERCEPT) is P
    assert [verdict(ramp("a"), moved("b", ml), rest, check=INTERCEPT) for ml in (0.0, 2.0, 9.0, 30.0, -30.0)] == [P, P, S, F, F]
    assert verdict(ramp("a"), moved("b", 30.0)) is P
    assert verdict(ramp("a"), moved("b", 30.0), check=INTERCEPT) is N
    assert verdict(ramp("a"), moved("b", 30.0), rest, check=INTERCEPT, spoiled={"b": frozenset({"V0"})}) is N
    assert "V0" in INTERCEPT.spoils
    assert not {"Ees", "PRSW"} & INTERCEPT.spoils


def test_other_stages_and_manoeuvres_are_no_replicates():
    assert verdict(ramp("a"), ramp("b", 1.5, stage="inotrope")) is N
    assert verdict(ramp("a"), ramp("b", 1.5, manoeuvre="Valsalva")) is N
    assert verdict(ramp("a"), judged_run(simulated(conditions=REST)).subject) is N


def test_one_occlusion_has_nothing_to_agree_with():
    assert verdict(ramp("a")) is N
    assert verdict() is N


def test_a_run_whose_slope_is_spoiled_already_does_not_spoil_the_others():
    assert verdict(ramp("a"), ramp("b", 1.5), spoiled={"b": frozenset({"Ees"})}) is N
    assert verdict(ramp("a"), ramp("b", 1.5), spoiled={"b": frozenset({"EDV"})}) is F


def test_a_run_without_beats_is_left_out():
    lost = RunSubject(ramp("b").facts, None)
    none = replace(ramp("b"), accepted=ramp("b").accepted & False)
    assert verdict(ramp("a"), lost, none) is N


@pytest.mark.parametrize(
    ("first", "second", "variation"),
    [((2.0, 0.2), (2.6, 0.2), 0.0), ((2.0, 0.01), (2.6, 0.01), 0.6 / 2**0.5 / 2.3), ((3.0, 0.1), (2.0, 0.1), 1.0 / 2**0.5 / 2.5)],
)
def test_slopes_that_differ_by_chance_do_not_vary(first, second, variation):
    assert pair_variation(first, second) == pytest.approx(variation)
    assert pair_variation(second, first) == pytest.approx(variation)


def test_the_measure_is_a_coefficient_of_variation():
    runs = (ramp("a"), ramp("b", 1.5))
    assert float(replicate_variation(AcquisitionSubject(AcquisitionFacts(), runs)).value) == pytest.approx(0.5 / 2**0.5 / 1.25, rel=0.02)
