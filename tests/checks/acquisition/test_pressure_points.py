import pytest

from checks.check import Verdict, judge
from checks.spoils import PRESSURE_GAIN
from checks.subject import AcquisitionSubject, RunSubject
from checks.verdicts import Rules, sentence
from metrics.signals.facts import AcquisitionFacts, PressureCalibration, RunFacts
from tests.checks.made_subjects import CHECKS

P, S, F = Verdict.PASS, Verdict.SUSPECT, Verdict.FAIL
CHECK = CHECKS["pressure-points"]
DEMANDED = Rules({"pressure-points": {"fail_below": 2.0}}).limits_of(CHECK, "LV")


def run(*applied, kind="steady"):
    points = tuple((mmhg, 1.01 * mmhg) for mmhg in applied)
    return RunSubject(RunFacts("run", kind, pressure=PressureCalibration(points=points)), None)


def found(limits, *runs):
    return judge(CHECK, AcquisitionSubject(AcquisitionFacts(), runs), limits)


@pytest.mark.parametrize(
    ("applied", "own", "demanded"),
    [((0.0, 100.0), P, P), ((0.0, 25.0, 50.0, 100.0), P, P), ((0.0, 40.0), S, F), ((100.0, 100.0), S, F), ((100.0,), S, F), ((), S, F)],
)
def test_two_pressures_50_mmhg_apart_tell_a_gain_and_fewer_only_fail_where_the_protocol_demands_them(applied, own, demanded):
    assert found(CHECK.limits, run(*applied)).worst() is own
    assert found(DEMANDED, run(*applied)).worst() is demanded
    assert CHECK.spoils == PRESSURE_GAIN


def test_the_run_with_the_fewest_counts_and_saline_runs_need_none():
    assert found(DEMANDED, run(0.0, 100.0), run()).worst() is F
    assert found(DEMANDED, run(0.0, 100.0), run(kind="saline")).worst() is P
    assert found(DEMANDED).worst() is F


def test_what_is_missing_is_told():
    assert ": 0;" in sentence(found(DEMANDED, run()), 0)
