"""Lines of ordinary least squares beside those that know of noise in the load."""

import numpy as np
import pytest

from metrics.indices import ALL
from metrics.indices.card import StageBeats, Withheld
from metrics.indices.end_systole import end_systolic_line
from metrics.indices.least_squares import ESTIMATOR
from metrics.stats.lines import deming_fit, least_squares, least_squares_fit, least_squares_line
from tests.metrics.made_beats import boxes, measured_run
from tests.metrics.recorded_hearts import heart_runs, signals_and_beats

OWN = {index.name: index for index in ALL if index.estimator == ESTIMATOR}
CHIEF = {index.name: index for index in ALL if index.primary}
STAGE = StageBeats(steady=(boxes([130.0] * 7, run="rest"),), preload=(boxes(np.linspace(150.0, 110.0, 9)),), v0_ml=10.0)


def test_three_indices_have_this_estimator_and_none_is_primary():
    assert set(OWN) == {"Ees", "V0", "PRSW"}
    assert not any(index.primary for index in OWN.values())


def test_on_points_without_noise_it_is_the_primary_line():
    assert OWN["Ees"].compute(STAGE).value == pytest.approx(2.5)
    assert OWN["V0"].compute(STAGE).value == pytest.approx(10.0)


def test_recruitable_work_by_hand():
    # EDV 100..140, SW 4900..7700: 70 mmHg
    ramp = measured_run(edv_ml=np.arange(100.0, 141.0, 10.0), sw_mmhg_ml=np.arange(4900.0, 7701.0, 700.0))
    found = OWN["PRSW"].compute(StageBeats(preload=(ramp,)))
    assert (found.value, found.fit_low, found.fit_high) == pytest.approx((70.0, 70.0, 70.0))


def test_its_interval_through_few_beats_is_the_classical_one():
    edv_ml = np.array([62.0, 58.0, 55.0, 50.0, 46.0, 43.0, 39.0])
    work = np.array([118.0, 112.0, 101.0, 93.0, 80.0, 74.0, 62.0])
    found = OWN["PRSW"].compute(StageBeats(preload=(measured_run(edv_ml=edv_ml, sw_mmhg_ml=work),)))
    assert (found.value, found.fit_low, found.fit_high) == pytest.approx((2.4483584, 2.198430, 2.698287), abs=1e-6)


@pytest.mark.parametrize("name", sorted(OWN))
def test_without_an_occlusion_there_is_none(name):
    with pytest.raises(Withheld, match="no usable preload-reduction run"):
        OWN[name].compute(StageBeats(steady=STAGE.steady))


def test_its_end_systole_is_iterated_with_the_v0_of_its_own_line():
    signals, beats = signals_and_beats(heart_runs("normal", catheter="noisy")["ramp"])
    chosen = np.arange(beats.start.size) >= beats.start.size - 14
    found = end_systolic_line(signals, beats, chosen, least_squares_fit())
    again = least_squares(found.volume_ml, found.pressure_mmhg)
    assert (found.line.slope, -found.line.slope * found.line.axis_intercept) == pytest.approx(again[:2])
    assert found.line.slope < end_systolic_line(signals, beats, chosen).line.slope


def test_noise_in_the_load_draws_its_slope_down_and_its_axis_to_the_left():
    draw = np.random.default_rng(12)
    loads = np.linspace(70.0, 50.0, 14)
    slopes, axes = [], []
    for _ in range(300):
        x, y = loads + 2.0 * draw.standard_normal(14), 2.0 * (loads - 15.0) + draw.standard_normal(14)
        line = least_squares_line(x, y)
        slopes.append(line.slope)
        axes.append(line.axis_intercept)
    # var(loads) is 38.5 mL2 and the noise's 4: the slope comes to about 38.5 / 42.5 of itself
    assert 1.80 < np.mean(slopes) < 1.88
    assert np.median(axes) < 13.0


@pytest.mark.parametrize("fit", [least_squares_fit(), deming_fit(1.0)])
def test_a_fit_s_bare_line_is_that_of_its_whole_one(fit):
    x, y = np.array([62.0, 58.0, 55.0, 50.0, 46.0]), np.array([118.0, 112.0, 101.0, 93.0, 80.0])
    whole = fit.whole(x, y)
    assert fit.bare(x, y) == pytest.approx((whole.slope, whole.constant))
    for refused in (fit.bare, fit.whole):
        with pytest.raises(ValueError, match="3 points where a line needs 4"):
            refused(x[:3], y[:3])


def test_the_sensitivity_of_its_intercept_is_that_of_its_own_slope():
    moved = OWN["V0"].sensitivity(STAGE, 10.0)
    assert (moved.pressure_mmhg, moved.volume_gain, moved.volume_ml, moved.pressure_gain) == pytest.approx((-0.4, 10.0, 1.0, 0.0))
