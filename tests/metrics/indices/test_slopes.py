import numpy as np
import pytest
from scipy import stats

from metrics.indices.card import StageBeats, Withheld
from metrics.indices.slopes import Pool, intercept_estimate, pooled_lines, slope_estimate
from metrics.stats.lines import Line
from tests.metrics.made_beats import boxes


def line(slope=2.5, slope_se=0.1, points=10, *, axis_intercept=12.0, down=4.0, up=3.0, g=0.01):
    half = stats.t.ppf(0.975, points - 2) * slope_se
    return Line(slope, axis_intercept, slope - half, slope + half, axis_intercept - down, axis_intercept + up, slope_se, g, points)


def test_one_line_keeps_its_own_interval():
    one = line()
    estimate = slope_estimate(Pool((one,)))
    assert (estimate.value, estimate.fit_low, estimate.fit_high) == pytest.approx((2.5, one.slope_low, one.slope_high))
    intercept = intercept_estimate(Pool((one,)))
    assert (intercept.value, intercept.fit_low, intercept.fit_high) == pytest.approx((12.0, 8.0, 15.0))


def test_two_lines_join_errors_in_quadrature_and_add_their_freedom():
    estimate = slope_estimate(Pool((line(2.4, 0.3, 8), line(2.8, 0.4, 12))))
    half = stats.t.ppf(0.975, 6 + 10) * 0.5 / 2.0
    assert (estimate.value, estimate.fit_low, estimate.fit_high) == pytest.approx((2.6, 2.6 - half, 2.6 + half))
    assert estimate.beats == 20


def test_each_side_of_a_lopsided_intercept_is_joined_by_itself():
    estimate = intercept_estimate(Pool((line(axis_intercept=10.0), line(axis_intercept=14.0))))
    shrunk = stats.t.ppf(0.975, 16) / stats.t.ppf(0.975, 8) / np.sqrt(2.0)
    assert (estimate.value, estimate.fit_low, estimate.fit_high) == pytest.approx((12.0, 12.0 - 4.0 * shrunk, 12.0 + 3.0 * shrunk))


def stage(*runs):
    return StageBeats(preload=tuple(boxes(np.linspace(130.0, 100.0, 8), run=run) for run in runs))


def test_a_run_without_a_line_is_passed_over_and_the_last_reason_told():
    def bad(run):
        if run.run != "good":
            message = f"no line in {run.run}"
            raise ValueError(message)
        return line()

    pool = pooled_lines(stage("one", "good", "two"), bad)
    assert len(pool.lines) == 1
    assert pool.left_out == ("run one: no line in one", "run two: no line in two")
    assert slope_estimate(pool).runs == 1
    with pytest.raises(Withheld, match="run two: no line in two"):
        pooled_lines(stage("one", "two"), bad)


@pytest.mark.parametrize(
    ("found", "reason"),
    [
        (line(-0.3), "the slope is -0.3, not positive"),
        (line(0.0), "the slope is 0, not positive"),
        (line(np.nan), "the slope is nan, not positive"),
        (line(g=1.0), r"cannot be told from zero \(Fieller g = 1.00\)"),
        (line(g=np.inf), "cannot be told from zero"),
    ],
)
def test_lines_that_say_nothing_are_withheld(found, reason):
    with pytest.raises(Withheld, match=reason):
        pooled_lines(stage("ramp"), lambda _: found)


def test_a_slope_just_told_from_zero_is_published():
    assert pooled_lines(stage("ramp"), lambda _: line(g=0.999)).lines
