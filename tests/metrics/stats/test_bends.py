import numpy as np
import pytest
from scipy import stats

from metrics.stats.bends import criterion, least_squares_curve, logarithm, parabola, straight

X = np.linspace(40.0, 80.0, 9)
NOISE = np.array([0.4, -0.2, 0.1, -0.5, 0.3, 0.2, -0.4, 0.3, -0.1])


def test_coefficients_and_covariance_are_those_of_a_reference_fit():
    y = 20.0 + 0.5 * X - 0.01 * X**2 + NOISE
    found = least_squares_curve(X, y, parabola)
    expected, covariance = np.polyfit(X, y, 2, cov=True)
    assert found.coefficients[::-1] == pytest.approx(expected, rel=1e-8)
    np.testing.assert_allclose(found.covariance[::-1, ::-1], covariance, rtol=1e-7)
    assert (found.points, found.freedom) == (9, 6)


def test_a_half_width_is_the_t_interval_of_what_is_asked():
    line = stats.linregress(X, 3.0 * X + NOISE)
    found = least_squares_curve(X, 3.0 * X + NOISE, straight)
    assert found.half_width(np.array([0.0, 1.0])) == pytest.approx(stats.t.ppf(0.975, 7) * line.stderr)
    assert found.half_width(np.array([1.0, 0.0]), 0.9) == pytest.approx(stats.t.ppf(0.95, 7) * line.intercept_stderr)


def test_the_criterion_is_akaikes_with_its_correction_for_few_points():
    squares, n, k = 7.0, 12, 4
    assert criterion(squares, n, k) == pytest.approx(n * np.log(squares / n) + 2 * k + 2 * k * (k + 1) / (n - k - 1))


@pytest.mark.parametrize(("bend", "better"), [(0.0, straight), (0.02, parabola)])
def test_the_criterion_prefers_the_form_the_points_have(bend, better):
    y = 2.0 * X + bend * X**2 + NOISE
    fits = {form: least_squares_curve(X, y, form).criterion for form in (straight, parabola)}
    assert min(fits, key=fits.get) is better


def test_points_on_a_line_are_no_better_told_by_a_parabola():
    line, curve = (least_squares_curve(X, 2.0 * X - 20.0, form) for form in (straight, parabola))
    assert line.criterion < curve.criterion


def test_a_logarithm_is_recovered_and_needs_positive_loads():
    assert least_squares_curve(X, -300.0 + 100.0 * np.log(X), logarithm).coefficients == pytest.approx([-300.0, 100.0])
    with pytest.raises(ValueError, match="no logarithm"):
        least_squares_curve(X - 40.0, X, logarithm)


def test_too_few_points_or_loads_carry_no_curve():
    with pytest.raises(ValueError, match="5 points where a curve needs 6"):
        least_squares_curve(X[:5], X[:5], parabola)
    with pytest.raises(ValueError, match="every point has the same load"):
        least_squares_curve(np.full(9, 50.0), X, straight)
    with pytest.raises(ValueError, match="too few to show a bend"):
        least_squares_curve(np.tile([40.0, 50.0], 4), np.arange(8.0), parabola)
