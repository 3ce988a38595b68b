"""Faults of a whole acquisition, six steps each: found by their own check before they are gross, and no milder as they grow."""

import pytest

from checks.check import Verdict
from flows.sources.simulated.corpus import clean_acquisition
from flows.sources.simulated.ladders import ACQUISITION_LADDERS
from tests.checks.made_acquisitions import judged

GRADE = {Verdict.PASS: 0, Verdict.NOT_EVALUATED: 0, Verdict.SUSPECT: 1, Verdict.FAIL: 2}
FAILS_FROM = {
    ("pressure-bent", "pressure-linearity"): 4.0,
    ("alpha-vc-wrong", "saline-agreement"): 20.0,
    ("alpha-vc-sign-wrong", "alpha-vc-plausible"): 0.6,
    ("calibration-stale", "calibration-age"): 12.0,
    ("saline-disagrees", "saline-agreement"): 40.0,
    ("run-copied", "copied-signal"): 0.2,
    ("run-copied-with-new-noise", "copied-signal"): 0.2,
    ("run-copied-with-new-ecg", "copied-signal"): 0.2,
    ("rest-as-ramp", "copied-signal"): 0.2,
    ("replicate-differs", "replicates-agree"): 0.3,
}
"""By which step at the latest a check fails."""

SUSPECTS_FROM = {("alpha-wrong", "alpha-plausible"): 0.6}


@pytest.mark.parametrize(("name", "check"), [*FAILS_FROM, *SUSPECTS_FROM])
@pytest.mark.parametrize("heart", ["normal", "right-small"])
def test_a_fault_is_found_by_its_check_and_never_judged_milder_as_it_grows(name, check, heart):
    acquisition, _ = clean_acquisition(heart, 250.0, 3)
    ladder = next(one for one in ACQUISITION_LADDERS if one.name == name)
    grades = []
    for severity in ladder.severities:
        _, found, _ = judged(ladder.inject(acquisition, severity).acquisition)
        grades.append(max(GRADE[one.worst()] for one in found if one.check.name == check))
    assert grades == sorted(grades)
    assert grades[0] == 0
    if (name, check) in FAILS_FROM:
        assert grades[ladder.severities.index(FAILS_FROM[name, check])] == 2
    else:
        assert grades[ladder.severities.index(SUSPECTS_FROM[name, check])] == 1
