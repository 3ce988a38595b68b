from dataclasses import replace

import numpy as np
import pytest

from checks.check import Verdict, judge
from checks.spoils import PRESSURE_GAIN, VOLUME_GAIN, VOLUME_OFFSET
from checks.subject import AcquisitionSubject
from checks.verdicts import sentence
from flows.sources.simulated.heart import HEARTS, UNUSUAL_HEARTS
from metrics.signals.facts import AcquisitionFacts
from tests.checks.made_subjects import (
    BREATHING,
    BREATHING_RAMP,
    CHECKS,
    FIBRILLATING,
    FIBRILLATING_RAMP,
    RAMP,
    REST,
    SINUS_ARRHYTHMIA,
    judged_run,
    never_improves,
    simulated,
    solution,
)

P, S, F, N = Verdict.PASS, Verdict.SUSPECT, Verdict.FAIL, Verdict.NOT_EVALUATED
PRESSURE, STROKE, VOLUME = (CHECKS[f"runs-agree-{name}"] for name in ("pressure", "stroke-volume", "volume"))
PRESSURES, VOLUMES = ("edp_mmhg", "pmax_mmhg"), ("edv_ml", "esv_ml")


def run(name, conditions=REST, heart="normal", *, pressure=1.0, volume=1.0, shift_ml=0.0, seed=0, **facts):
    """A judged run whose pressures and volumes are multiplied, and its volumes moved."""
    subject = judged_run(simulated(heart, conditions, seed=seed)).subject
    changed = {column: pressure * getattr(subject.beats, column) for column in PRESSURES}
    changed |= {column: volume * getattr(subject.beats, column) + shift_ml for column in VOLUMES}
    return replace(subject, facts=replace(subject.facts, run=name, **facts), beats=replace(subject.beats, **changed))


def verdicts(*runs, spoiled=None):
    subject = AcquisitionSubject(AcquisitionFacts(), runs, spoiled or {})
    return tuple(judge(check, subject, check.limits).worst() for check in (PRESSURE, STROKE, VOLUME))


def test_rest_and_the_beats_before_an_occlusion_show_one_heart():
    assert verdicts(run("rest"), run("ramp", RAMP, seed=1)) == (P, P, P)
    assert verdicts(run("ramp", RAMP), run("again", RAMP, seed=1)) == (P, P, P)


@pytest.mark.parametrize("conditions", [REST, RAMP])
def test_another_unit_or_calibration_in_one_run_contradicts_the_others(conditions):
    assert verdicts(run("rest"), run("other", conditions, pressure=1.36)) == (F, P, P)
    assert verdicts(run("rest"), run("other", conditions, volume=1.4)) == (P, F, F)
    assert verdicts(run("rest"), run("other", conditions, shift_ml=40.0)) == (P, P, F)
    assert verdicts(run("rest"), run("other", conditions, pressure=1.19, volume=1.19)) == (S, S, S)


def test_strokes_that_differ_by_little_count_where_the_volumes_they_empty_differ_by_much():
    assert verdicts(run("rest"), run("other", volume=1.1)) == (P, P, P)
    assert verdicts(run("rest"), run("other", volume=1.1, shift_ml=40.0)) == (P, F, F)


def test_a_shifted_pressure_is_no_other_gain():
    moved = run("ramp", RAMP)
    beats = replace(moved.beats, edp_mmhg=moved.beats.edp_mmhg + 40.0, pmax_mmhg=moved.beats.pmax_mmhg + 40.0)
    assert verdicts(run("rest"), replace(moved, beats=beats)) == (P, P, P)


def test_stages_are_never_compared():
    assert verdicts(run("rest"), run("other", pressure=1.36, stage="inotrope")) == (N, N, N)


def test_other_heart_rates_empty_the_ventricle_otherwise_but_a_run_at_the_same_rate_is_compared():
    paced = run("paced", volume=0.7)
    faster = replace(paced, beats=replace(paced.beats, rr_s=0.7 * paced.beats.rr_s))
    assert verdicts(run("rest"), faster) == (N, N, N)
    assert verdicts(run("rest"), faster, paced) == (P, F, F)


def test_one_run_or_too_few_beats_at_rest_say_nothing():
    few = run("few")
    few = replace(few, accepted=few.accepted & (np.arange(few.accepted.size) < 2))
    assert verdicts(run("rest")) == (N, N, N)
    assert verdicts(run("rest"), few) == (N, N, N)
    assert verdicts() == (N, N, N)


def test_a_run_whose_own_check_spoils_the_value_is_left_out():
    wrong = run("wrong", pressure=1.36, volume=1.4)
    assert verdicts(run("rest"), run("ramp", RAMP), wrong, spoiled={"wrong": frozenset({"Pmax", "SV", "EDV"})}) == (P, P, P)
    assert verdicts(run("rest"), run("ramp", RAMP), wrong, spoiled={"wrong": frozenset({"EF"})}) == (F, F, F)


@pytest.mark.parametrize("heart", [heart.name for heart in HEARTS + UNUSUAL_HEARTS])
def test_breathing_and_irregular_hearts_raise_no_alarm(heart):
    for conditions in ((BREATHING, BREATHING_RAMP), (SINUS_ARRHYTHMIA, BREATHING_RAMP), (FIBRILLATING, FIBRILLATING_RAMP)):
        runs = [run(str(place), one, heart, seed=place) for place, one in enumerate(conditions)]
        assert set(verdicts(*runs)) <= {P, N}, conditions
    solution.cache_clear()


def test_a_growing_disagreement_never_improves_the_verdict():
    for place, change in enumerate(("pressure", "volume", "volume")):
        assert never_improves(
            [verdicts(run("rest"), run("ramp", RAMP, **{change: 1.0 + excess}))[place] for excess in np.linspace(0, 1, 21)]
        )


def test_what_differs_is_told_and_what_it_reaches_withheld():
    told = judge(PRESSURE, AcquisitionSubject(AcquisitionFacts(), (run("rest"), run("other", pressure=1.5))), PRESSURE.limits)
    assert "20%" in sentence(told, 0)
    assert PRESSURE.spoils >= PRESSURE_GAIN
    assert STROKE.spoils >= VOLUME_GAIN
    assert VOLUME.spoils >= VOLUME_OFFSET
    assert not {"PRSW", "SV", "SW", "Ees"} & VOLUME.spoils
    assert not {"V0", "SV", "HR"} & PRESSURE.spoils
    assert not {"PRSW", "Pmax", "EDP", "HR"} & STROKE.spoils
