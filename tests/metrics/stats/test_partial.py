"""Partial regression, row by row, against the whole regression it stands for."""

from __future__ import annotations

import numpy as np
import pytest

from metrics.stats.partial import off_relation, relation

RNG = np.random.default_rng(5)
X = RNG.uniform(80.0, 120.0, (3, 30))
FORM = np.where(np.arange(30) >= 17, 1.0, 0.0) * np.ones((3, 1))
WEIGHT = np.where(np.arange(30) < np.array([[30], [25], [22]]), 1.0, 0.0)
Y = 4.0 + 0.5 * X + 0.01 * (X - 100.0) ** 2 + 3.0 * FORM + RNG.normal(0.0, 0.4, X.shape)


@pytest.mark.parametrize("bent", [False, True])
def test_gives_what_the_whole_regression_gives(bent: bool) -> None:  # noqa: FBT001  (a parameter of the test)
    found = off_relation(Y, FORM, relation(X, WEIGHT, bent=bent))
    for row in range(3):
        held = WEIGHT[row] > 0.0
        x, form = X[row, held], FORM[row, held]
        design = np.column_stack([form, np.ones(x.size), x, *([x**2] if bent else [])])
        whole, *_ = np.linalg.lstsq(design, Y[row, held], rcond=None)
        assert found.off[row] == pytest.approx(whole[0])
        assert found.freedom[row] == held.sum() - design.shape[1]
        if not bent:
            assert found.slope[row] == pytest.approx(whole[2])
        else:
            assert found.slope[row] == pytest.approx(whole[2] + 2.0 * whole[3] * x.mean())


def test_a_mean_alone_has_no_slope() -> None:
    found = off_relation(Y, FORM, relation(None, WEIGHT, bent=False))
    before, after = (WEIGHT > 0.0) & (FORM == 0.0), (WEIGHT > 0.0) & (FORM == 1.0)
    gap = [Y[row, after[row]].mean() - Y[row, before[row]].mean() for row in range(3)]
    assert found.off == pytest.approx(gap)
    assert found.slope.tolist() == [0.0, 0.0, 0.0]


def test_a_form_that_the_relation_explains_is_not_told() -> None:
    along = relation(X, WEIGHT, bent=False)
    assert np.isnan(off_relation(Y, X * 2.0 + 1.0, along).off).all()
