import numpy as np
import pytest

from checks.acquisition.visits_agree import ALL, HEART_RATE, PRESSURE, VOLUME
from checks.check import Verdict, judge
from checks.subject import AcquisitionSubject
from metrics.signals.facts import AcquisitionFacts
from tests.checks.made_subjects import never_improves

P, S, F, N = Verdict.PASS, Verdict.SUSPECT, Verdict.FAIL, Verdict.NOT_EVALUATED
AT_REST = {("EDV", "baseline"): 120.0, ("Pmax", "baseline"): 115.0, ("HR", "baseline"): 70.0}


def judged(check, own, *earlier):
    return judge(check, AcquisitionSubject(AcquisitionFacts(), rested=own, earlier=earlier), check.limits)


def times(factor, index="EDV"):
    return {key: value * (factor if key[0] == index else 1.0) for key, value in AT_REST.items()}


@pytest.mark.parametrize(("factor", "expected"), [(1.0, P), (1.3, P), (0.75, P), (1.6, S), (0.6, S), (2.2, F), (0.4, F)])
def test_end_diastolic_volume_jumps_either_way(factor, expected):
    found = judged(VOLUME, times(factor), AT_REST)
    assert found.worst() is expected
    assert found.value[0] == pytest.approx(max(factor, 1.0 / factor))


def test_pressure_and_heart_rate_may_change_by_more():
    assert judged(PRESSURE, times(1.55, "Pmax"), AT_REST).worst() is P
    assert judged(PRESSURE, times(2.6, "Pmax"), AT_REST).worst() is F
    assert judged(HEART_RATE, times(1.7, "HR"), AT_REST).worst() is P
    assert judged(HEART_RATE, times(2.0, "HR"), AT_REST).worst() is S
    assert judged(HEART_RATE, times(3.2, "HR"), AT_REST).worst() is F


def test_one_that_was_odd_accuses_none_after_it():
    assert judged(VOLUME, times(2.2), AT_REST).worst() is F
    assert judged(VOLUME, AT_REST, AT_REST, times(2.2)).worst() is P
    assert judged(VOLUME, times(2.1), AT_REST, times(1.1)).worst() is S


def test_without_an_earlier_one_or_a_stage_or_value_in_common_nothing_is_said():
    for check in ALL:
        assert judged(check, AT_REST).worst() is N
        assert judged(check, {}, AT_REST).worst() is N
        assert judged(check, AT_REST, {}).worst() is N
        assert judged(check, {(index, "inotrope"): value for (index, _), value in AT_REST.items()}, AT_REST).worst() is N
        assert judged(check, dict.fromkeys(AT_REST, -3.0), AT_REST).worst() is N


def test_an_ever_greater_jump_never_improves_the_verdict_and_withholds_nothing():
    for check, index in ((VOLUME, "EDV"), (PRESSURE, "Pmax"), (HEART_RATE, "HR")):
        climbs = [judged(check, times(factor, index), AT_REST).worst() for factor in np.linspace(1.0, 4.0, 13)]
        assert never_improves(climbs)
        assert (climbs[0], climbs[-1]) == (P, F)
        assert not check.spoils
