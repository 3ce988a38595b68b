import numpy as np
import pytest

from metrics.signals.facts import PressureCalibration, VolumeCalibration, ZeroReading
from metrics.signals.uncertainty import CalibrationUncertainty, calibration_uncertainty

POINTS = ((0.0, 0.0), (100.0, 100.0))
SAID = VolumeCalibration()


def zeros(*readings):
    return tuple(ZeroReading(mmhg, at_s) for mmhg, at_s in readings)


def pressure(**declared):
    found = calibration_uncertainty(PressureCalibration(**declared), SAID)
    return found.pressure_gain, found.pressure_mmhg


def test_nothing_declared_is_nothing_known():
    assert calibration_uncertainty(PressureCalibration(), SAID) == CalibrationUncertainty(None, None, None, None)
    assert pressure(points=POINTS) == (None, None)
    assert pressure(zeros=zeros((0.4, -60.0))) == (None, None)


def test_the_declared_sd_of_a_reading_is_that_of_zero_and_over_the_points_spread_that_of_gain():
    # two points 100 mmHg apart: 50^2 + 50^2 = 5000, and 0.5 / sqrt(5000) = 0.00707
    assert pressure(points=POINTS, zero_sd_mmhg=0.5) == (pytest.approx(0.5 / np.sqrt(5000.0), abs=1e-6), 0.5)
    assert pressure(zero_sd_mmhg=0.5) == (None, 0.5)


def test_a_reading_s_error_goes_through_the_two_point_line():
    # a sensor that shows 0.8 of what there is: an error of 0.4 shown is one of 0.5
    assert pressure(points=((0.0, 0.0), (100.0, 80.0)), zero_sd_mmhg=0.4) == (pytest.approx(0.5 / np.sqrt(5000.0), abs=1e-6), 0.5)
    turned = pressure(points=((0.0, 0.0), (100.0, -80.0)), zero_sd_mmhg=0.4)
    assert turned == (pytest.approx(0.5 / np.sqrt(5000.0), abs=1e-6), 0.5)
    assert pressure(points=((0.0, 3.0), (100.0, 3.0)), zero_sd_mmhg=0.4) == (None, None)


def test_zeros_without_a_clock_are_uncertain_by_half_their_difference():
    assert pressure(zeros=zeros((0.2, None), (1.2, None)))[1] == 0.5
    assert pressure(zeros=zeros((0.2, None), (0.9, 40.0), (1.2, None)))[1] == 0.5
    assert pressure(zeros=zeros((0.0, None), (0.6, None)), zero_sd_mmhg=0.4)[1] == 0.5
    assert pressure(zeros=zeros((0.0, None), (0.4, None)), points=((0.0, 0.0), (100.0, 80.0)))[1] == 0.25
    assert pressure(zeros=zeros((0.2, None)))[1] is None


def test_zeros_with_clocks_are_interpolated_and_their_drift_is_no_uncertainty():
    assert pressure(zeros=zeros((0.2, -60.0), (1.2, 600.0)))[1] is None
    assert pressure(zeros=zeros((0.2, -60.0), (1.2, 600.0)), zero_sd_mmhg=0.3)[1] == 0.3


def test_three_points_tell_the_gain_by_what_they_leave_over_their_line():
    # read 0, 51, 100 of 0, 50, 100: the line is x + 1/3, so -1/3, 2/3, -1/3 are left; sqrt(6/9 / 1) / sqrt(5000)
    gain, zero = pressure(points=((0.0, 0.0), (50.0, 51.0), (100.0, 100.0)))
    assert gain == pytest.approx(np.sqrt(6.0 / 9.0) / np.sqrt(5000.0), abs=1e-6)
    assert zero is None


def test_alpha_divides_both_terms_of_the_volume():
    raw = VolumeCalibration(calibrated=False, alpha=0.5, alpha_sd=0.02, alpha_vc_ml=40.0, alpha_vc_sd_ml=3.0)
    found = calibration_uncertainty(PressureCalibration(), raw)
    assert (found.volume_gain, found.volume_ml) == (0.04, 6.0)
    assert calibration_uncertainty(PressureCalibration(), VolumeCalibration(alpha_vc_sd_ml=3.0)).volume_ml == 3.0


def test_runs_of_one_stage_have_the_larger_of_their_uncertainties_and_none_where_one_has_none():
    one, other = CalibrationUncertainty(0.01, 0.5, 0.05, None), CalibrationUncertainty(0.02, 0.3, None, 4.0)
    assert one.joined(other) == other.joined(one) == CalibrationUncertainty(0.02, 0.5, None, None)
