import numpy as np
import pytest

from checks.acquisition.pressure_linearity import departure_mmhg
from checks.check import Verdict, judge
from checks.spoils import PRESSURE_GAIN, PRESSURE_OFFSET, VOLUME_GAIN, VOLUME_OFFSET
from checks.subject import AcquisitionSubject, RunSubject
from checks.verdicts import sentence
from metrics.signals.facts import AcquisitionFacts, PressureCalibration, RunFacts, VolumeCalibration, ZeroReading
from tests.checks.made_subjects import CHECKS, drawn, never_improves

P, S, F, N = Verdict.PASS, Verdict.SUSPECT, Verdict.FAIL, Verdict.NOT_EVALUATED
ZERO = (ZeroReading(0.0, 0.0),)


def found(name, *facts):
    """What a check says of an acquisition of one drawn run for each of these facts; every beat accepted, ESV 50 mL."""
    subjects = (drawn(facts=one) for one in facts)
    runs = tuple(RunSubject(one.facts, one.recording, one.signals, one.beats, np.ones(12, dtype=bool)) for one in subjects)
    check = CHECKS[name]
    return judge(check, AcquisitionSubject(AcquisitionFacts(), runs), check.limits)


def bent(mmhg, k=1.0, zeros=ZERO):
    points = tuple((at, k * (at + mmhg * (at == 50.0))) for at in (0.0, 50.0, 100.0))
    return RunFacts("run", "steady", pressure=PressureCalibration(points=points, zeros=zeros))


def raw(kind="steady", **volume):
    return RunFacts("run", kind, volume=VolumeCalibration(calibrated=False, **volume))


def test_points_within_1_mmhg_pass_within_2_are_suspect_beyond_fail():
    assert [found("pressure-linearity", bent(mmhg)).worst() for mmhg in (0.0, 0.9, 1.1, -1.1, 1.9, 2.1, -2.1)] == [P, P, S, S, S, F, F]


def test_one_bent_run_of_several_is_enough():
    assert found("pressure-linearity", bent(0.0), bent(20.0)).worst() is F


def test_zeros_count_departures_from_the_one_at_zero():
    assert departure_mmhg(bent(3.0).pressure) == pytest.approx(3.0 * 2.0 / 3.0 + 3.0 / 3.0)
    assert departure_mmhg(bent(3.0, zeros=()).pressure) == pytest.approx(2.0)


def test_departures_are_counted_in_applied_pressure():
    assert departure_mmhg(bent(3.0, k=2.0).pressure) == pytest.approx(departure_mmhg(bent(3.0).pressure))


@pytest.mark.parametrize("points", [(), ((0.0, 0.0), (100.0, 120.0)), ((0.0, 0.0), (0.0, 9.0), (100.0, 100.0))])
def test_fewer_than_three_pressures_always_lie_on_a_line_and_tell_nothing(points):
    assert found("pressure-linearity", RunFacts("run", "steady", pressure=PressureCalibration(points=points))).worst() is N


def test_without_runs_the_acquisition_s_own_points_are_judged():
    check = CHECKS["pressure-linearity"]
    alone = AcquisitionSubject(AcquisitionFacts(pressure=bent(9.0).pressure))
    assert judge(check, alone, check.limits).worst() is F
    assert check.spoils == PRESSURE_GAIN | PRESSURE_OFFSET


@pytest.mark.parametrize(
    ("alpha", "verdict"),
    [(0.82, P), (0.4, P), (1.2, P), (0.39, S), (1.25, S), (0.19, F), (2.1, F), (82.0, F), (None, N)],
)
def test_alpha_is_judged_as_far_as_a_raw_volume_uses_it(alpha, verdict):
    assert found("alpha-plausible", raw(alpha=alpha)).worst() is verdict
    assert found("alpha-plausible", RunFacts("run", "steady", volume=VolumeCalibration(alpha=alpha))).worst() is N


def test_the_least_likely_alpha_of_several_speaks():
    assert found("alpha-plausible", raw(alpha=0.9), raw(alpha=0.1), raw(alpha=1.3)).value.tolist() == [0.1]
    assert CHECKS["alpha-plausible"].spoils == VOLUME_GAIN


@pytest.mark.parametrize(("ml", "verdict"), [(40.0, P), (5.0, P), (1.0, S), (0.0, S), (-1.0, F), (-400.0, N), (None, N)])
def test_the_parallel_volume_is_a_positive_part_of_the_raw_one(ml, verdict):
    assert found("alpha-vc-plausible", raw(alpha=0.8, alpha_vc_ml=ml)).worst() is verdict


def test_a_parallel_volume_above_the_raw_end_systolic_one_leaves_no_blood():
    facts = raw(alpha=0.8, alpha_vc_ml=60.0)
    below_zero = drawn(facts=facts, esv_ml=np.full(12, -10.0))
    run = RunSubject(facts, below_zero.recording, below_zero.signals, below_zero.beats, np.ones(12, dtype=bool))
    check = CHECKS["alpha-vc-plausible"]
    judged = judge(check, AcquisitionSubject(AcquisitionFacts(), (run,)), check.limits)
    assert judged.worst() is F
    assert "115%" in sentence(judged, 0)
    assert check.spoils == VOLUME_OFFSET


def test_the_intercept_of_a_fitted_line_may_be_negative():
    assert found("alpha-vc-plausible", raw(alpha=0.8, alpha_vc_ml=-5.0, method="two-point")).worst() is N
    assert found("alpha-vc-plausible", raw(alpha=0.8, alpha_vc_ml=5.0, method="two-point")).worst() is P
    assert found("alpha-vc-plausible", RunFacts("run", "steady", volume=VolumeCalibration(alpha_vc_ml=-5.0))).worst() is N


@pytest.mark.parametrize(("hours", "verdict"), [(0.3, P), (4.0, P), (4.1, S), (12.0, S), (12.1, F), (-13.0, F), (None, N)])
def test_a_calibration_of_another_session_spoils_gain_and_offset(hours, verdict):
    assert found("calibration-age", raw(age_hours=hours)).worst() is verdict
    assert found("parallel-volume-age", raw(age_hours=hours)).worst() is verdict
    assert CHECKS["calibration-age"].spoils == VOLUME_GAIN
    assert CHECKS["parallel-volume-age"].spoils == VOLUME_OFFSET


def test_the_age_of_what_no_run_uses_does_not_count():
    assert (
        found("calibration-age", RunFacts("run", "steady", volume=VolumeCalibration(age_hours=99.0)), raw("saline", age_hours=99.0)).worst()
        is N
    )
    assert found("calibration-age", raw(age_hours=1.0), raw(age_hours=99.0)).worst() is F


def test_a_growing_departure_gain_or_age_never_improves_the_verdict():
    sizes = np.geomspace(0.01, 99.0, 30).tolist()
    assert never_improves([found("pressure-linearity", bent(size)).worst() for size in sizes])
    assert never_improves([found("alpha-plausible", raw(alpha=1.0 + size)).worst() for size in sizes])
    assert never_improves([found("calibration-age", raw(age_hours=size)).worst() for size in sizes])
