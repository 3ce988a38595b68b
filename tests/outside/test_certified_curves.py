"""Curves by least squares against certified values and against an independent library.

Outside authority: the National Institute of Standards and Technology's Statistical Reference Datasets, nonlinear regression. Misra1a
(observed, dental research) with its certified values and starts was read; BoxBOD (observed, biochemical oxygen demand), DanWood
(observed, radiation of a filament) and Rat42 (observed, growth of pasture) are from memory, starts too, and were refitted apart from
this program to all printed digits. Second opinion: scipy's curve_fit.
"""

from dataclasses import dataclass

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import curve_fit

from metrics.stats.curves import exponential, least_squares_curves, power

DIGITS = 1e-8
"""Relative; six certified digits were asked for, eight are there."""


def saturation(x, parameters):
    """b1 (1 - exp(-b2 x)): Misra1a and BoxBOD."""
    b1, b2 = parameters[:, :1], parameters[:, 1:]
    left = np.exp(-b2 * x)
    return b1 * (1.0 - left), np.stack([1.0 - left, b1 * x * left], axis=2)


def growth(x, parameters):
    """b1 / (1 + exp(b2 - b3 x)): Rat42."""
    b1, b2, b3 = (parameters[:, place, None] for place in range(3))
    share = 1.0 / (1.0 + np.exp(b2 - b3 * x))
    steep = b1 * share * (1.0 - share)
    return b1 * share, np.stack([share, -steep, x * steep], axis=2)


@dataclass(frozen=True)
class Certified:
    """A set, the starts it is tried from, and what is certified of it; ``sds`` where they are known."""

    name: str
    curve: object
    x: str
    y: str
    starts: tuple[tuple[float, ...], ...]
    parameters: tuple[float, ...]
    squares_left: float
    sds: tuple[float, ...] = ()


MISRA1A = Certified(
    "Misra1a",
    saturation,
    "77.6 114.9 141.1 190.8 239.9 289.0 332.8 378.4 434.8 477.3 536.8 593.1 689.1 760.0",
    "10.07 14.73 17.94 23.93 29.61 35.18 40.02 44.82 50.76 55.05 61.01 66.40 75.47 81.78",
    ((500.0, 0.0001), (250.0, 0.0005)),
    (238.94212918, 5.5015643181e-4),
    0.12455138894,
    (2.7070075241, 7.2668688436e-6),
)
BOX_BOD = Certified(
    "BoxBOD",
    saturation,
    "1 2 3 5 7 10",
    "109 149 149 191 213 224",
    ((100.0, 0.75),),
    (213.80940889, 0.54723748542),
    1168.0088766,
    (12.354515176, 0.10455993237),
)
DAN_WOOD = Certified(
    "DanWood",
    power,
    "1.309 1.471 1.490 1.565 1.611 1.680",
    "2.138 3.421 3.597 4.340 4.882 5.660",
    ((1.0, 5.0), (0.7, 4.0)),
    (0.76886226176, 3.8604055871),
    0.0043173084083,
    (0.018281973860, 0.051726610913),
)
RAT42 = Certified(
    "Rat42",
    growth,
    "9 14 21 28 42 57 63 70 79",
    "8.93 10.8 18.59 22.33 39.35 56.11 61.73 64.62 67.08",
    ((100.0, 1.0, 0.1), (75.0, 2.5, 0.07)),
    (72.462237576, 2.6180768402, 0.067359200066),
    8.0565229338,
)
SETS = (MISRA1A, BOX_BOD, DAN_WOOD, RAT42)


def numbers(text):
    return np.array(text.split(), dtype=np.float64)


def fitted(certified):
    """All starts at once, a row each."""
    starts = np.array(certified.starts)
    x, y = (np.tile(numbers(text), (len(starts), 1)) for text in (certified.x, certified.y))
    return least_squares_curves(certified.curve, x, y, starts)


@pytest.mark.parametrize("certified", SETS, ids=lambda certified: certified.name)
def test_certified_parameters_from_every_start(certified):
    fits = fitted(certified)
    for row in range(len(certified.starts)):
        np.testing.assert_allclose(fits.parameters[row], certified.parameters, rtol=DIGITS)
        assert fits.squares_left[row] == pytest.approx(certified.squares_left, rel=DIGITS)
        if certified.sds:
            np.testing.assert_allclose(np.sqrt(np.diag(fits.covariance[row])), certified.sds, rtol=1e-6)


def test_residual_sd_of_misra1a():
    fits = fitted(MISRA1A)
    np.testing.assert_allclose(np.sqrt(fits.squares_left / fits.freedom), 0.10187876330, rtol=DIGITS)


def test_sets_of_one_curve_are_fitted_side_by_side():
    wide = 14
    rows = [MISRA1A, BOX_BOD]
    x, y, inside = np.ones((2, wide)), np.zeros((2, wide)), np.zeros((2, wide), dtype=bool)
    for row, certified in enumerate(rows):
        own = numbers(certified.x)
        x[row, : own.size], y[row, : own.size], inside[row, : own.size] = own, numbers(certified.y), True
    fits = least_squares_curves(saturation, x, y, np.array([(250.0, 0.0005), (100.0, 0.75)]), inside)
    for row, certified in enumerate(rows):
        np.testing.assert_allclose(fits.parameters[row], certified.parameters, rtol=DIGITS)
        np.testing.assert_allclose(np.sqrt(np.diag(fits.covariance[row])), certified.sds, rtol=1e-6)
    assert fits.freedom.tolist() == [12.0, 4.0]


def test_a_hard_start_gives_the_certified_curve_or_none():
    x, y = numbers(BOX_BOD.x)[None], numbers(BOX_BOD.y)[None]
    assert np.isnan(least_squares_curves(saturation, x, y, np.array([[1.0, 1.0]])).parameters).all()
    both = np.array([[1.0, 1.0], [100.0, 0.75]])
    fits = least_squares_curves(saturation, np.tile(x, (2, 1)), np.tile(y, (2, 1)), both)
    np.testing.assert_allclose(fits.parameters[np.nanargmin(fits.squares_left)], BOX_BOD.parameters, rtol=DIGITS)


@given(st.integers(8, 30), st.floats(0.005, 0.05), st.floats(0.02, 0.3), st.integers(0, 2**32 - 1))
def test_coefficients_and_their_covariance_are_those_of_scipy(count, bend, slope, seed):
    rng = np.random.default_rng(seed)
    x = np.linspace(-30.0, 30.0, count)
    y = 6.0 + slope * np.expm1(bend * x) / bend + rng.normal(0.0, 0.1, count)
    start = np.array([6.0, slope, bend])
    found, covariance = curve_fit(lambda x, h, s, b: exponential(x[None], np.array([[h, s, b]]))[0][0], x, y, start)
    fits = least_squares_curves(exponential, x[None], y[None], start[None])
    np.testing.assert_allclose(fits.parameters[0], found, rtol=1e-4, atol=1e-6)
    np.testing.assert_allclose(fits.covariance[0], covariance, rtol=2e-2, atol=1e-6)
