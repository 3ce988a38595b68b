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
    assert (estimate.beats, estimate.notes) == (20, ())


def test_runs_that_differ_beyond_their_fits_widen_the_interval_and_say_so():
    # errors of 0.1 leave 0.1 / sqrt 2 open; runs 0.4 apart show 0.2, of whose square 7/8 is beyond the fits
    estimate = slope_estimate(Pool((line(2.3), line(2.7))))
    fits, runs = stats.t.ppf(0.975, 16), stats.t.ppf(0.975, 2)
    half = 0.2 * (fits + 7.0 / 8.0 * (runs - fits))
    assert (estimate.value, estimate.fit_low, estimate.fit_high) == pytest.approx((2.5, 2.5 - half, 2.5 + half))
    assert estimate.notes == ("its 2 runs differ by more than their own fits leave open (SD 0.283), which widens its interval",)


def test_two_runs_never_reach_for_t_of_one_degree():
    far = slope_estimate(Pool((line(1.0, 1e-6), line(3.0, 1e-6))))
    assert far.fit_high - far.value == pytest.approx(stats.t.ppf(0.975, 2) * 1.0, rel=1e-6)
    three = slope_estimate(Pool((line(1.0, 1e-6), line(2.0, 1e-6), line(3.0, 1e-6))))
    assert three.fit_high - three.value == pytest.approx(stats.t.ppf(0.975, 2) / np.sqrt(3.0), rel=1e-6)
    many = slope_estimate(Pool(tuple(line(slope, 1e-6, 4) for slope in np.linspace(1.0, 3.0, 40))))
    assert many.fit_high - many.value == pytest.approx(stats.t.ppf(0.975, 39) * np.std(np.linspace(1.0, 3.0, 40), ddof=1) / np.sqrt(40.0))


def test_a_replicate_a_seventh_steeper_leaves_the_true_slope_inside():
    estimate = slope_estimate(Pool((line(2.5, 0.03, 12), line(1.15 * 2.5, 0.03, 12))))
    assert estimate.fit_low < 2.5 < estimate.value
    alone = line(estimate.value, 0.03 / np.sqrt(2.0), 22)
    assert alone.slope_low > 2.5


@pytest.mark.parametrize(
    ("runs", "apart", "least", "most"), [(2, 0.0, 95.0, 98.5), (2, 3.0, 80.0, 90.0), (3, 3.0, 88.0, 96.0), (4, 1.0, 90.0, 97.0)]
)
def test_how_often_the_interval_of_a_mean_of_runs_holds_the_truth(runs, apart, least, most):
    draw = np.random.default_rng(17)
    hits = 0
    for _ in range(800):
        errors = 0.1 * np.sqrt(draw.chisquare(10, runs) / 10.0)
        slopes = 2.5 + 0.1 * draw.standard_normal(runs) * np.hypot(1.0, apart)
        found = slope_estimate(Pool(tuple(line(slope, error, 12) for slope, error in zip(slopes, errors, strict=True))))
        hits += found.fit_low <= 2.5 <= found.fit_high
    assert least < hits / 8.0 < most


def test_each_side_of_a_lopsided_intercept_is_joined_by_itself():
    estimate = intercept_estimate(Pool((line(axis_intercept=11.0), line(axis_intercept=13.0))))
    shrunk = stats.t.ppf(0.975, 16) / stats.t.ppf(0.975, 8) / np.sqrt(2.0)
    # fits leave 1.227 open below, more than the runs' own 1; above 0.920, of which 1 exceeds a share of 1 - 0.846
    beyond = 1.0 - (3.0 / stats.t.ppf(0.975, 8)) ** 2 / 2.0
    up = stats.t.ppf(0.975, 16) + beyond * (stats.t.ppf(0.975, 2) - stats.t.ppf(0.975, 16))
    assert (estimate.value, estimate.fit_low, estimate.fit_high) == pytest.approx((12.0, 12.0 - 4.0 * shrunk, 12.0 + up))


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
