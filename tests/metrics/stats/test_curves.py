import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from metrics.stats.curves import exponential, least_squares_curves, logistic, power

X = np.linspace(0.0, 3.0, 9)[None]
CURVES = [(exponential, [5.0, -3.0, -0.5]), (logistic, [6.0, 1.5, 1.0]), (power, [2.0, 1.7])]
by_curve = pytest.mark.parametrize(("curve", "parameters"), CURVES, ids=["exponential", "logistic", "power"])


@by_curve
def test_derivatives_are_those_of_the_curve(curve, parameters):
    parameters = np.array([parameters])
    x = X + 0.1
    _, slopes = curve(x, parameters)
    for place in range(parameters.shape[1]):
        step = np.zeros_like(parameters)
        step[0, place] = 1e-6
        difference = (curve(x, parameters + step)[0] - curve(x, parameters - step)[0]) / 2e-6
        np.testing.assert_allclose(slopes[:, :, place], difference, rtol=1e-6, atol=1e-8)


@pytest.mark.parametrize("bend", [1e-3, 2e-5, 1e-9, 0.0, -2e-5, -1e-3])
def test_an_exponential_runs_on_through_the_straight_line(bend):
    value, slopes = exponential(X, np.array([[5.0, 3.0, bend]]))
    np.testing.assert_allclose(value, 5.0 + 3.0 * X * (1.0 + bend * X / 2.0 + (bend * X) ** 2 / 6.0), rtol=1e-9)
    np.testing.assert_allclose(slopes[:, :, 2], 3.0 * X**2 * (0.5 + bend * X / 3.0), rtol=1e-5)


@by_curve
def test_points_on_a_curve_give_it_back_with_no_error(curve, parameters):
    x = X + 0.1
    y, _ = curve(x, np.array([parameters]))
    fits = least_squares_curves(curve, x, y, 0.7 * np.array([parameters]))
    np.testing.assert_allclose(fits.parameters[0], parameters, rtol=1e-9)
    assert fits.squares_left[0] == pytest.approx(0.0, abs=1e-18)
    np.testing.assert_allclose(fits.covariance, 0.0, atol=1e-15)
    assert fits.freedom.tolist() == [9.0 - len(parameters)]


def test_rows_do_not_look_at_each_other_nor_at_what_is_outside():
    rng = np.random.default_rng(3)
    x = np.tile(X, (5, 1))
    y = exponential(x, rng.normal([[5.0, -3.0, -0.5]], 0.2, (5, 3)))[0] + rng.normal(0.0, 0.05, x.shape)
    inside = rng.random(x.shape) < 0.8
    start = np.tile([5.0, -3.0, -0.5], (5, 1))
    together = least_squares_curves(exponential, x, np.where(inside, y, 1e6), start, inside)
    for row in range(5):
        own = inside[row]
        alone = least_squares_curves(exponential, x[row, own][None], y[row, own][None], start[:1])
        np.testing.assert_allclose(together.parameters[row], alone.parameters[0], rtol=1e-8)
        np.testing.assert_allclose(together.covariance[row], alone.covariance[0], rtol=1e-6)


def test_too_few_points_bear_no_curve_and_just_enough_no_error():
    y = exponential(X, np.array([[5.0, -3.0, -0.5]]))[0]
    inside = np.zeros((2, 9), dtype=bool)
    inside[0, :2], inside[1, :3] = True, True
    fits = least_squares_curves(exponential, np.tile(X, (2, 1)), np.tile(y, (2, 1)), np.array([[5.0, -3.0, -0.4]] * 2), inside)
    assert np.isnan(fits.parameters[0]).all()
    np.testing.assert_allclose(fits.parameters[1], [5.0, -3.0, -0.5], rtol=1e-8)
    assert not np.isfinite(np.diag(fits.covariance[1])).any()


def test_no_rows_give_no_fits():
    fits = least_squares_curves(power, np.empty((0, 4)), np.empty((0, 4)), np.empty((0, 2)))
    assert fits.parameters.shape == (0, 2)


def test_a_parameter_that_moves_nothing_is_no_curve():
    # a level line has no bend
    fits = least_squares_curves(exponential, X, np.full(X.shape, 4.0), np.array([[4.0, 0.0, -0.5]]))
    assert np.isnan(fits.parameters).all()


@given(st.integers(0, 2**32 - 1), st.floats(-2.0, 2.0))
def test_no_neighbour_of_what_is_found_leaves_smaller_squares(seed, bend):
    rng = np.random.default_rng(seed)
    y = exponential(X, np.array([[5.0, 2.0, bend]]))[0] + rng.normal(0.0, 0.1, X.shape)
    fits = least_squares_curves(exponential, X, y, np.array([[4.0, 1.0, 0.5 * bend]]))
    if np.isnan(fits.squares_left[0]):
        return
    for step in np.vstack([np.eye(3), -np.eye(3)]):
        nearby = fits.parameters + 1e-2 * step * np.sqrt(np.diag(fits.covariance[0]))
        assert np.sum((y - exponential(X, nearby)[0]) ** 2) >= fits.squares_left[0]
