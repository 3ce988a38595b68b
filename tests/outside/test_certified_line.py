"""Ordinary least squares against certified values and against an independent library.

Outside authority: the National Institute of Standards and Technology's Statistical Reference Datasets, linear regression, set Norris
(observed, 36 rows; calibration of ozone monitors). Data and certified values were copied as numbers and refitted to all printed digits.
Second opinion: statsmodels OLS (BSD-3-Clause).
"""

import numpy as np
import pytest
import statsmodels.api as sm
from hypothesis import given
from hypothesis import strategies as st

from metrics.stats.lines import least_squares

NORRIS_Y_X = """
0.1 0.2; 338.8 337.4; 118.1 118.2; 888.0 884.6; 9.2 10.1; 228.1 226.5; 668.5 666.3; 998.5 996.3; 449.1 448.6; 778.9 777.0;
559.2 558.2; 0.3 0.4; 0.1 0.6; 778.1 775.5; 668.8 666.9; 339.3 338.0; 448.9 447.5; 10.8 11.6; 557.7 556.0; 228.3 228.1;
998.0 995.8; 888.8 887.6; 119.6 120.2; 0.3 0.3; 0.6 0.3; 557.6 556.8; 339.3 339.1; 888.0 887.2; 998.5 999.0; 778.9 779.0;
10.2 11.1; 117.6 118.3; 228.9 229.2; 668.4 669.1; 449.2 448.9; 0.2 0.5
"""
Y, X = np.array([row.split() for row in NORRIS_Y_X.replace("\n", " ").split(";")], dtype=np.float64).T

CERTIFIED = {
    "slope": 1.00211681802045,
    "constant": -0.262323073774029,
    "slope_sd": 0.000429796848199937,
    "constant_sd": 0.232818234301152,
    "residual_sd": 0.884796396144373,
}
DIGITS = 1e-9
"""Relative; six certified digits were asked for, nine are there."""


def test_norris_is_whole():
    assert X.size == Y.size == 36


def test_norris():
    slope, constant, var_slope, var_constant, _ = least_squares(X, Y)
    found = {
        "slope": slope,
        "constant": constant,
        "slope_sd": np.sqrt(var_slope),
        "constant_sd": np.sqrt(var_constant),
        "residual_sd": np.sqrt(np.sum((Y - constant - slope * X) ** 2) / 34.0),
    }
    for name, value in CERTIFIED.items():
        assert found[name] == pytest.approx(value, rel=DIGITS), name


@given(st.integers(4, 40), st.floats(-5.0, 5.0), st.floats(-200.0, 200.0), st.floats(0.1, 30.0), st.integers(0, 2**32 - 1))
def test_coefficients_errors_and_their_covariance_are_those_of_statsmodels(count, slope, constant, noise, seed):
    rng = np.random.default_rng(seed)
    x = rng.uniform(40.0, 160.0, count)
    y = constant + slope * x + rng.normal(0.0, noise, count)
    fitted = sm.OLS(y, sm.add_constant(x)).fit()
    found = least_squares(x, y)
    covariance = fitted.cov_params()
    expected = [fitted.params[1], fitted.params[0], covariance[1, 1], covariance[0, 0], covariance[0, 1]]
    np.testing.assert_allclose(found, expected, rtol=1e-6, atol=1e-8)
