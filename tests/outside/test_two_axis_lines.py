"""Lines with noise in both axes against published answers and an independent fitter.

Outside authority: Pearson 1901, Philos Mag (6) 2:559, whose ten points have the orthogonal line of slope -0.5455612 and constant
5.7840438 (data and answers from memory, recomputed apart from this program; the same points carry York's weights, York 1966, Can J Phys
44:1079). Second opinion: ODRPACK through scipy.odr (public domain; BSD-3-Clause).
"""

import warnings

import numpy as np
import pytest

from metrics.stats.lines import deming, deming_line, least_squares

X = np.array([0.0, 0.9, 1.8, 2.6, 3.3, 4.4, 5.2, 6.1, 6.5, 7.4])
Y = np.array([5.9, 5.4, 4.4, 4.6, 3.5, 3.7, 2.8, 2.8, 2.4, 1.5])

RELATIONS = {
    "pearson": (X, Y),
    "end-systolic": (np.array([62.0, 58.0, 55.0, 50.0, 46.0, 43.0, 39.0]), np.array([118.0, 112.0, 101.0, 93.0, 80.0, 74.0, 62.0])),
    "work": (np.array([140.0, 133.0, 127.0, 118.0, 112.0, 104.0]), np.array([7750.0, 7150.0, 6870.0, 6080.0, 5790.0, 5130.0])),
}


def fitted_by_odrpack(x, y, noise_ratio):
    """Slope and constant that make the sum of weighted squared distances smallest."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)  # on its way out of scipy, its results are not
        from scipy import odr  # noqa: PLC0415

        data = odr.RealData(x, y, sx=1.0, sy=np.sqrt(noise_ratio))
        start = np.polyfit(x, y, 1)
        fit = odr.ODR(data, odr.Model(lambda beta, at: beta[0] * at + beta[1]), beta0=start, sstol=1e-15, partol=1e-15, maxit=500)
        return fit.run().beta


def test_pearson_s_line_of_closest_fit():
    assert deming(X, Y, 1.0) == pytest.approx((-0.5455612, 5.7840438), abs=5e-8)


def test_the_ordinary_and_the_inverse_line_of_the_same_points():
    slope, constant, *_ = least_squares(X, Y)
    assert (slope, constant) == pytest.approx((-0.539577, 5.761185), abs=5e-7)
    inverse = 1.0 / least_squares(Y, X)[0]
    assert (inverse, Y.mean() - inverse * X.mean()) == pytest.approx((-0.565889, 5.861696), abs=5e-7)


@pytest.mark.parametrize("relation", RELATIONS)
@pytest.mark.parametrize("noise_ratio", [0.05, 0.25, 1.0, 4.0, 400.0])
def test_two_axis_fits_agree_with_odrpack(relation, noise_ratio):
    x, y = RELATIONS[relation]
    slope, constant = deming(x, y, noise_ratio)
    np.testing.assert_allclose((slope, constant), fitted_by_odrpack(x, y, noise_ratio), rtol=1e-5)


def test_jackknife_errors_are_of_the_size_of_odrpack_s():
    # two different estimates of one error: the same to a third where points are few
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", DeprecationWarning)
        from scipy import odr  # noqa: PLC0415

        fit = odr.ODR(odr.RealData(X, Y, sx=1.0, sy=1.0), odr.unilinear).run()
    line = deming_line(X, Y, 1.0)
    assert line.slope_se == pytest.approx(fit.sd_beta[0], rel=0.34)
