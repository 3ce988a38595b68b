"""Faults of a whole acquisition, six steps each: found by their own check before they are gross, and no milder as they grow."""

import pytest

from checks.check import Verdict
from flows.sources.simulated.corpus import clean_acquisition
from flows.sources.simulated.ladders import ACQUISITION_LADDERS, RUN_LADDERS
from tests.checks.made_acquisitions import judged

GRADE = {Verdict.PASS: 0, Verdict.NOT_EVALUATED: 0, Verdict.SUSPECT: 1, Verdict.FAIL: 2}
FAILS_FROM = {
    ("pressure-bent", "pressure-linearity"): 4.0,
    ("alpha-vc-wrong", "saline-agreement"): 20.0,
    ("alpha-vc-sign-wrong", "alpha-vc-plausible"): 0.6,
    ("calibration-stale", "calibration-age"): 12.0,
    ("calibration-stale-no-saline", "parallel-volume-age"): 12.0,
    ("alpha-wrong", "reference-stroke-volume"): 0.6,
    ("resistivity-wrong", "reference-stroke-volume"): 0.3,
    ("alpha-vc-wrong", "reference-volumes"): 20.0,
    ("reference-offset-wrong", "reference-volumes"): 20.0,
    ("replicate-shifted", "replicate-intercepts-agree"): 40.0,
    ("saline-disagrees", "saline-agreement"): 40.0,
    ("run-copied", "copied-signal"): 0.2,
    ("run-copied-with-new-noise", "copied-signal"): 0.2,
    ("run-copied-with-new-ecg", "copied-signal"): 0.2,
    ("rest-as-ramp", "copied-signal"): 0.2,
    ("replicate-differs", "replicates-agree"): 0.3,
}
"""By which step at the latest a check fails."""

AT_EVERY_STEP = {
    ("points-missing", "pressure-points"): 1,
    ("alpha-missing", "volume-gain-known"): 2,
    ("alpha-vc-missing", "volume-offset-known"): 2,
    ("fluid-filled", "pressure-sensor"): 2,
}
"""Faults that take the evidence away, and how gravely the check that misses it judges: at every step, since none tells its size."""

CONTRADICTING = {("pressure-sent-in-cmh2o", "runs-agree-pressure"), ("volume-calibrated-twice", "runs-agree-volume")}
CONTRADICTING |= {("volume-calibrated-twice", "runs-agree-stroke-volume")}
"""Faults of some runs, and the check by which these contradict the others: where all have the fault nothing does."""

SUSPECTS_FROM = {("alpha-wrong", "alpha-plausible"): 0.6}


LADDERS = {ladder.name: ladder for ladder in RUN_LADDERS + ACQUISITION_LADDERS}


def climbed(name, check, heart):
    """How gravely a check judges each severity of a fault."""
    acquisition, _ = clean_acquisition(heart, 250.0, 3)
    grades = []
    for severity in LADDERS[name].severities:
        _, found, _ = judged(LADDERS[name].inject(acquisition, severity).acquisition)
        grades.append(max(GRADE[one.worst()] for one in found if one.check.name == check))
    return grades


@pytest.mark.parametrize(("name", "check"), [*FAILS_FROM, *SUSPECTS_FROM])
@pytest.mark.parametrize("heart", ["normal", "right-small"])
def test_a_fault_is_found_by_its_check_and_never_judged_milder_as_it_grows(name, check, heart):
    grades, ladder = climbed(name, check, heart), LADDERS[name]
    assert grades == sorted(grades)
    assert grades[0] == 0
    if (name, check) in FAILS_FROM:
        assert grades[ladder.severities.index(FAILS_FROM[name, check])] == 2
    else:
        assert grades[ladder.severities.index(SUSPECTS_FROM[name, check])] == 1


@pytest.mark.parametrize(("name", "check"), AT_EVERY_STEP)
@pytest.mark.parametrize("heart", ["normal", "right-small"])
def test_evidence_that_is_gone_is_missed_at_every_step(name, check, heart):
    assert set(climbed(name, check, heart)) == {AT_EVERY_STEP[name, check]}


@pytest.mark.parametrize(("name", "check"), sorted(CONTRADICTING))
@pytest.mark.parametrize("heart", ["normal", "right-small"])
def test_runs_contradict_each_other_while_only_some_have_the_fault(name, check, heart):
    assert climbed(name, check, heart) == [0, 2, 2, 2, 0, 0]
