from functools import partial

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats
from scipy.signal import lfilter

from metrics.stats import lines
from metrics.stats.lines import deming, deming_line, fieller, interval_of, least_squares, least_squares_line, unattenuated_line

# an end-systolic relation of seven beats; every answer below was computed apart from this program
VOLUME_ML = np.array([62.0, 58.0, 55.0, 50.0, 46.0, 43.0, 39.0])
PRESSURE_MMHG = np.array([118.0, 112.0, 101.0, 93.0, 80.0, 74.0, 62.0])


def test_least_squares_of_the_worked_relation():
    slope, constant, var_slope, var_constant, covariance = least_squares(VOLUME_ML, PRESSURE_MMHG)
    assert slope == pytest.approx(2.4483584, abs=5e-8)
    assert -constant / slope == pytest.approx(13.085766, abs=5e-7)
    assert np.sqrt(var_slope) == pytest.approx(0.0972263, abs=5e-8)
    fitted = interval_of(slope, constant, np.array([[var_slope, covariance], [covariance, var_constant]]), 7)
    assert (fitted.slope_low, fitted.slope_high) == pytest.approx((2.198430, 2.698287), abs=1e-6)
    assert (fitted.intercept_low, fitted.intercept_high) == pytest.approx((8.7597, 16.6253), abs=5e-5)
    assert fitted.fieller_g == pytest.approx(0.01042, abs=5e-6)
    assert fitted.constant == pytest.approx(constant)


@pytest.mark.parametrize(("ratio", "slope"), [(0.25, 2.4668958), (1.0, 2.4649190), (4.0, 2.4599588), (1e7, 2.4483584), (1e-7, 2.4676631)])
def test_deming_of_the_worked_relation(ratio, slope):
    found, constant = deming(VOLUME_ML, PRESSURE_MMHG, ratio)
    assert found == pytest.approx(slope, abs=5e-8)
    assert PRESSURE_MMHG.mean() == pytest.approx(found * VOLUME_ML.mean() + constant)
    if ratio == 1.0:
        assert -constant / found == pytest.approx(13.336654, abs=5e-7)


def test_deming_s_line_carries_jackknife_intervals():
    line = deming_line(VOLUME_ML, PRESSURE_MMHG, 1.0)
    left_out = np.array([deming(np.delete(VOLUME_ML, at), np.delete(PRESSURE_MMHG, at), 1.0)[0] for at in range(7)])
    # Tukey's pseudovalues: their mean's standard error is the jackknife's
    pseudo = 7.0 * line.slope - 6.0 * left_out
    assert line.slope_se == pytest.approx(pseudo.std(ddof=1) / np.sqrt(7.0))
    half = stats.t.ppf(0.975, 5) * line.slope_se
    assert (line.slope_low, line.slope_high) == pytest.approx((line.slope - half, line.slope + half))
    assert line.intercept_low < line.axis_intercept < line.intercept_high
    assert line.points == 7


def test_a_line_without_scatter_is_found_exactly():
    line = deming_line(VOLUME_ML, 2.5 * (VOLUME_ML - 10.0), 3.0)
    assert (line.slope, line.axis_intercept) == pytest.approx((2.5, 10.0))
    assert (line.slope_se, line.fieller_g) == pytest.approx((0.0, 0.0), abs=1e-9)


POINTS = st.lists(st.tuples(st.floats(-3.0, 3.0), st.floats(-15.0, 15.0)), min_size=5, max_size=15)


def scattered(points):
    """A falling load with scatter in both axes about a line of slope 2."""
    across, along = np.array(points).T
    x = np.linspace(90.0, 50.0, across.size) + across
    return x, 2.0 * x - 20.0 + along


@given(POINTS, st.floats(0.05, 20.0), st.floats(0.2, 5.0), st.floats(0.2, 5.0), st.floats(-50.0, 50.0), st.floats(-50.0, 50.0))
def test_deming_s_line_follows_a_change_of_units(points, ratio, x_gain, y_gain, x_shift, y_shift):
    x, y = scattered(points)
    plain = deming_line(x, y, ratio)
    moved = deming_line(x_gain * x + x_shift, y_gain * y + y_shift, ratio * (y_gain / x_gain) ** 2)
    assert moved.slope == pytest.approx(plain.slope * y_gain / x_gain, rel=1e-6)
    assert moved.slope_se == pytest.approx(plain.slope_se * y_gain / x_gain, rel=1e-5, abs=1e-9)
    assert moved.axis_intercept == pytest.approx(x_gain * plain.axis_intercept + x_shift - y_shift / moved.slope, rel=1e-6, abs=1e-4)
    assert moved.fieller_g == pytest.approx(plain.fieller_g, rel=1e-4, abs=1e-9)


@given(POINTS, st.floats(0.05, 20.0))
def test_deming_treats_both_axes_alike(points, ratio):
    x, y = scattered(points)
    assert deming(y, x, 1.0 / ratio)[0] == pytest.approx(1.0 / deming(x, y, ratio)[0], rel=1e-6)


@given(POINTS, st.floats(0.05, 20.0))
def test_deming_lies_between_both_regressions(points, ratio):
    x, y = scattered(points)
    onto_y, onto_x = least_squares(x, y)[0], 1.0 / least_squares(y, x)[0]
    assert onto_y - 1e-9 <= deming(x, y, ratio)[0] <= onto_x + 1e-9


@given(POINTS)
def test_deming_makes_the_weighted_distances_smallest(points):
    x, y = scattered(points)
    slope, constant = deming(x, y, 2.0)

    def badness(tilt, lift):
        return np.sum((y - constant - lift - (slope + tilt) * x) ** 2) / (2.0 + (slope + tilt) ** 2)

    for tilt, lift in ((1e-3, 0.0), (-1e-3, 0.0), (0.0, 1e-2), (0.0, -1e-2), (1e-3, -0.1), (-1e-3, 0.1)):
        assert badness(tilt, lift) >= badness(0.0, 0.0) * (1.0 - 1e-9)


def test_deming_follows_a_falling_relation():
    assert deming(VOLUME_ML, -PRESSURE_MMHG, 1.0)[0] == pytest.approx(-2.4649190, abs=5e-8)


@pytest.mark.parametrize("fit", [least_squares, lambda x, y: deming_line(x, y, 1.0)])
def test_too_few_points_and_points_at_one_load_carry_no_line(fit):
    with pytest.raises(ValueError, match="2 points where a line needs"):
        fit(np.array([1.0, 2.0]), np.array([1.0, 2.0]))
    with pytest.raises(ValueError, match="same load"):
        fit(np.full(6, 50.0), np.arange(6.0))


def test_a_line_that_one_point_alone_holds_up_is_boundless():
    line = deming_line(np.array([50.0, 50.0, 50.0, 50.0, 60.0]), np.array([80.0, 81.0, 79.0, 80.0, 105.0]), 1.0)
    assert np.isfinite(line.slope)
    assert (line.slope_low, line.slope_high, line.intercept_low, line.intercept_high) == (-np.inf, np.inf, -np.inf, np.inf)
    assert line.fieller_g >= 1.0


def test_points_that_do_not_vary_together_carry_no_line():
    x, y = np.array([-1.0, 1.0, -1.0, 1.0]), np.array([1.0, 1.0, -1.0, -1.0])
    with pytest.raises(ValueError, match="do not vary together"):
        deming_line(x, y, 1.0)
    with pytest.raises(ValueError, match="do not vary together"):
        deming_line(VOLUME_ML, np.full(7, 80.0), 1.0)


def test_fieller_is_the_set_of_ratios_that_cannot_be_told_from_the_truth():
    # by definition r is inside when |a - r b| <= t sd(a - r b)
    a, b, var_a, var_b, covariance, t = 12.0, 3.0, 4.0, 0.25, 0.4, 2.2
    low, high, g = fieller(a, b, var_a, var_b, covariance, t)
    for edge in (low, high):
        assert abs(a - edge * b) == pytest.approx(t * np.sqrt(var_a - 2.0 * edge * covariance + edge**2 * var_b))
    assert low < a / b < high
    assert g == pytest.approx(t**2 * var_b / b**2)


def test_fieller_of_a_slope_that_may_be_zero_is_unbounded():
    assert fieller(1.0, 1.0, 1.0, 1.0, 0.0, 2.0) == (-np.inf, np.inf, 4.0)
    assert fieller(1.0, 0.0, 1.0, 1.0, 0.0, 2.0)[2] == np.inf


def test_jackknife_and_fieller_intervals_hold_the_truth_as_often_as_they_say():
    rng = np.random.default_rng(8)
    true_x = np.linspace(40.0, 70.0, 12)
    held = []
    for _ in range(600):
        x, y = true_x + rng.normal(0.0, 0.8, 12), 2.4 * (true_x - 12.0) + rng.normal(0.0, 1.0, 12)
        line = deming_line(x, y, (1.0 / 0.8) ** 2)
        held.append((line.slope_low <= 2.4 <= line.slope_high, line.intercept_low <= 12.0 <= line.intercept_high))
    assert np.all(np.abs(np.mean(held, axis=0) - 0.95) < 0.03)


def test_deming_takes_out_what_noise_on_the_load_axis_does_to_least_squares():
    rng = np.random.default_rng(9)
    true_x = np.tile(np.linspace(40.0, 60.0, 10), 400)
    x, y = true_x + rng.normal(0.0, 2.0, true_x.size), 2.0 * true_x + rng.normal(0.0, 2.0, true_x.size)
    assert least_squares(x, y)[0] < 1.85
    assert deming(x, y, 1.0)[0] == pytest.approx(2.0, rel=0.01)


WAYS = {
    "deming": lambda x, y: deming_line(x, y, (2.0 / 0.8) ** 2),
    "unattenuated": lambda x, y: unattenuated_line(x, y, 0.64),
    "least squares": least_squares_line,
}
WAY = pytest.mark.parametrize("line_of", WAYS.values(), ids=WAYS)


def occlusion(draw, count, near=0.0):
    """Points of slope 2 about 15 whose scatter correlates from beat to beat."""
    loads = np.linspace(120.0, 75.0, count)
    scatter = lfilter([np.sqrt(1.0 - near**2)], [1.0, -near], draw.standard_normal(count + 50))[50:]
    return loads + 0.8 * draw.standard_normal(count), 2.0 * (loads - 15.0) + 2.0 * scatter


@WAY
@pytest.mark.parametrize(("count", "near", "least"), [(15, 0.0, 91.0), (16, 0.0, 91.0), (20, 0.3, 88.0), (40, 0.0, 91.0), (40, 0.3, 89.0)])
def test_lines_hold_the_truth_whichever_way_their_interval_is_made(line_of, count, near, least):
    draw = np.random.default_rng(14)
    held = []
    for _ in range(150):
        line = line_of(*occlusion(draw, count, near))
        held.append((line.slope_low <= 2.0 <= line.slope_high, line.intercept_low <= 15.0 <= line.intercept_high))
    assert np.all(100.0 * np.mean(held, axis=0) >= least)
    assert np.all(100.0 * np.mean(held, axis=0) <= 99.4)


def test_blocks_widen_the_interval_where_neighbours_resemble_each_other_and_the_jackknife_does_not():
    draw = np.random.default_rng(15)
    errors = {near: np.median([deming_line(*occlusion(draw, 60, near), 6.25).slope_se for _ in range(30)]) for near in (0.0, 0.7)}
    assert errors[0.7] > 1.4 * errors[0.0]


@WAY
@pytest.mark.parametrize("gain", [0.5, 4.0])
def test_an_interval_by_blocks_follows_a_change_of_units(line_of, gain):
    x, y = occlusion(np.random.default_rng(16), 30)
    plain, moved = (
        line_of(x, y),
        deming_line(x, gain * y + 8.0, 6.25 * gain**2) if line_of is WAYS["deming"] else line_of(x, gain * y + 8.0),
    )
    for name in ("slope", "slope_low", "slope_high", "slope_se"):
        assert getattr(moved, name) == pytest.approx(gain * getattr(plain, name), rel=1e-6)


@WAY
def test_a_long_line_without_scatter_is_found_exactly(line_of):
    x = np.linspace(120.0, 75.0, 24)
    line = line_of(x, 2.0 * (x - 15.0))
    tolerance = 0.02 if line_of is WAYS["unattenuated"] else 1e-6
    assert (line.slope, line.axis_intercept) == pytest.approx((2.0, 15.0), rel=tolerance)
    assert line.slope_low <= line.slope <= line.slope_high


@WAY
def test_a_long_line_is_the_same_each_time_and_without_its_memory(line_of):
    x, y = occlusion(np.random.default_rng(17), 24)
    first = line_of(x, y)
    lines._by_blocks.cache_clear()
    assert line_of(x.copy(), y.copy()) == first
    assert line_of(x[::2].repeat(2), y) != first


def test_what_each_point_adds_to_a_slope_is_what_leaving_it_out_takes_away():
    x, y = occlusion(np.random.default_rng(18), 200)
    others = ~np.eye(200, dtype=bool)
    for rows in (partial(lines._deming_rows, noise_ratio=6.25), partial(lines._unattenuated_rows, noise_variance=0.64)):
        slope, _, moved = rows(x[None, :], y[None, :])
        left_out, _, _ = rows(np.tile(x, (200, 1))[others].reshape(200, 199), np.tile(y, (200, 1))[others].reshape(200, 199))
        assert moved.sum() == pytest.approx(0.0, abs=1e-9)
        np.testing.assert_allclose(moved[0], slope - left_out, atol=0.05 * np.abs(moved).max())
