import numpy as np
import pytest

from checks.acquisition.pressure_gain import gain_error
from checks.acquisition.zero_drift import drift_mmhg
from checks.check import Verdict, judge
from checks.subject import AcquisitionSubject, RunSubject
from checks.verdicts import sentence
from metrics.signals.facts import AcquisitionFacts, PressureCalibration, RunFacts, ZeroReading
from tests.checks.made_subjects import CHECKS, never_improves

P, S, F, N = Verdict.PASS, Verdict.SUSPECT, Verdict.FAIL, Verdict.NOT_EVALUATED
HOUR_S = 3600.0


def acquisition(*calibrations, pressure_kind=None):
    runs = tuple(RunSubject(RunFacts(f"run-{n}", "steady", pressure=one), None) for n, one in enumerate(calibrations))
    return AcquisitionSubject(AcquisitionFacts(pressure_kind=pressure_kind), runs)


def found(name, *calibrations, **facts):
    check = CHECKS[name]
    return judge(check, acquisition(*calibrations, **facts), check.limits)


def verdict(name, *calibrations, **facts):
    return found(name, *calibrations, **facts).worst()


def zeros(*mmhg, points=(), re_zeros_s=()):
    readings = tuple(ZeroReading(value, place * HOUR_S) for place, value in enumerate(mmhg))
    return PressureCalibration(points=points, zeros=readings, re_zeros_s=re_zeros_s)


def gain(k, applied=(0.0, 100.0)):
    return PressureCalibration(points=tuple((one, k * one + 0.4) for one in applied))


def test_two_zero_readings_pass_one_is_suspect_none_fails():
    assert [verdict("pressure-zero", zeros(*[0.0] * count)) for count in (5, 2, 1, 0)] == [P, P, S, F]


def test_the_run_with_the_fewest_zero_readings_speaks():
    assert verdict("pressure-zero", zeros(0.0, 0.0), zeros()) is F


def test_how_many_zeros_were_sent_stands_in_the_reason():
    judged = found("pressure-zero", zeros())
    assert sentence(judged, 0).startswith("zero readings sent: 0;")


@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_drift_to_2_mmhg_is_silent_to_5_flagged_beyond_fails_whatever_its_sign(sign):
    ladder = [verdict("zero-drift", zeros(0.0, sign * mmhg)) for mmhg in (0.0, 2.0, 2.1, 5.0, 5.1, 40.0)]
    assert ladder == [P, P, S, S, F, F]


def test_without_two_readings_drift_is_not_evaluated():
    assert [verdict("zero-drift", zeros(*[9.0] * count)) for count in (0, 1)] == [N, N]


def test_drift_is_counted_in_applied_pressure():
    doubled = ((0.0, 0.0), (100.0, 200.0))
    assert drift_mmhg(zeros(0.0, 3.0, points=doubled)) == pytest.approx(1.5)


def test_the_widest_of_many_readings_counts_not_the_last():
    assert drift_mmhg(zeros(0.0, 4.0, 0.5)) == 4.0


def test_what_a_re_zero_took_away_is_no_drift():
    half_an_hour = 0.5 * HOUR_S
    assert drift_mmhg(zeros(8.0, 0.3, 0.5, re_zeros_s=(half_an_hour,))) == pytest.approx(0.2)
    assert drift_mmhg(zeros(1.0, 7.0, 0.0, 0.5, re_zeros_s=(1.5 * HOUR_S,))) == pytest.approx(6.0)
    assert np.isnan(drift_mmhg(zeros(8.0, 0.0, re_zeros_s=(half_an_hour,))))


def test_readings_without_a_clock_are_compared_as_a_whole():
    loose = PressureCalibration(zeros=(ZeroReading(0.0, None), ZeroReading(3.0, 100.0)), re_zeros_s=(50.0,))
    assert drift_mmhg(loose) == 3.0


def test_drift_is_told_with_value_and_limit():
    assert sentence(found("zero-drift", zeros(0.0, 6.25)), 0) == "the pressure zero moved by 6.2 mmHg between its readings (limit 5 mmHg)"


@pytest.mark.parametrize("direction", [1.0, -1.0])
def test_a_gain_error_to_3_percent_passes_to_20_is_corrected_beyond_fails(direction):
    ladder = [verdict("pressure-gain", gain(1.0 + direction * error)) for error in (0.0, 0.02, 0.05, 0.19, 0.21, 0.9)]
    assert ladder == [P, P, S, S, F, F]


def test_the_worst_calibrated_run_speaks_for_the_gain():
    assert verdict("pressure-gain", gain(1.0), gain(1.5), PressureCalibration()) is F


@pytest.mark.parametrize("calibration", [PressureCalibration(), gain(1.5, (0.0,)), gain(1.5, (0.0, 49.0)), gain(1.5, (70.0, 70.0))])
def test_points_that_do_not_fix_a_gain_leave_it_not_evaluated(calibration):
    assert np.isnan(gain_error(calibration))
    assert verdict("pressure-gain", calibration) is N


def test_gain_does_not_care_where_zero_is_shown():
    moved = PressureCalibration(points=tuple((applied, read + 30.0) for applied, read in gain(1.1).points))
    assert gain_error(moved) == pytest.approx(gain_error(gain(1.1)))


@pytest.mark.parametrize(("kind", "expected"), [("tip-manometer", P), ("fluid-filled", F), (None, N)])
def test_a_fluid_filled_line_does_not_carry_rates_of_change(kind, expected):
    assert verdict("pressure-sensor", zeros(), pressure_kind=kind) is expected


def test_a_growing_drift_or_gain_error_never_improves_the_verdict():
    sizes = np.geomspace(0.01, 60.0, 40).tolist()
    assert never_improves([verdict("zero-drift", zeros(0.0, size)) for size in sizes])
    assert never_improves([verdict("pressure-gain", gain(1.0 + size / 50.0)) for size in sizes])


def test_without_any_run_the_acquisition_s_own_calibration_is_judged():
    alone = AcquisitionSubject(AcquisitionFacts(pressure=zeros(0.0, 9.0)))
    check = CHECKS["zero-drift"]
    assert judge(check, alone, check.limits).worst() is F
