"""Intervals of series of beats that resemble their neighbours."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats
from scipy.signal import lfilter

from metrics.stats.bootstrap import (
    FEWEST_FOR_BLOCKS,
    block_length,
    block_mean_interval,
    block_median_interval,
    block_positions,
    correlation,
    generator,
)
from metrics.stats.medians import median_interval

DRAWS = 300


def autoregression(draw, count, near):
    return lfilter([1.0], [1.0, -near], draw.standard_normal(count + 50))[50:]


def breathing(draw, count, period, depth):
    return depth * np.sin(2.0 * np.pi * np.arange(count) / period + draw.uniform(0.0, 2.0 * np.pi)) + draw.standard_normal(count)


def covered(interval, series):
    """How often in a hundred the interval holds 0, the middle of every series."""
    draw = np.random.default_rng(20)
    bounds = np.array([interval(series(draw))[1:] for _ in range(DRAWS)])
    return 100.0 * np.mean((bounds[:, 0] <= 0.0) & (bounds[:, 1] >= 0.0))


@pytest.mark.parametrize("interval", [block_median_interval, block_mean_interval])
@pytest.mark.parametrize("count", [5, 11, 12, 20, 60, 200])
def test_independent_beats_are_covered_as_often_as_promised(interval, count):
    assert 92.0 <= covered(interval, lambda draw: draw.standard_normal(count)) <= 99.5


@pytest.mark.parametrize("interval", [block_median_interval, block_mean_interval])
@pytest.mark.parametrize(("count", "near", "least"), [(8, 0.3, 90.0), (20, 0.3, 88.0), (60, 0.3, 91.0), (60, 0.6, 88.0), (200, 0.6, 90.0)])
def test_correlated_beats_are_nearly(interval, count, near, least):
    assert least <= covered(interval, lambda draw: autoregression(draw, count, near)) <= 99.0


@pytest.mark.parametrize(("count", "period", "depth"), [(20, 4.3, 1.5), (40, 4.3, 1.5), (80, 5.7, 2.0), (200, 3.4, 2.0)])
def test_a_breath_is_drawn_as_a_whole_and_so_its_swing_does_not_widen_the_interval(count, period, depth):
    assert 91.0 <= covered(block_median_interval, lambda draw: breathing(draw, count, period, depth)) <= 99.5
    draw = np.random.default_rng(3)
    series = [breathing(draw, 80, period, 3.0) for _ in range(20)]
    wide, plain = (np.median([high - low for _, low, high in map(of, series)]) for of in (block_median_interval, median_interval))
    assert wide < 0.8 * plain


def test_order_statistics_cover_less_where_neighbours_resemble_each_other():
    plain = covered(median_interval, lambda draw: autoregression(draw, 60, 0.6))
    assert plain < 84.0 < covered(block_median_interval, lambda draw: autoregression(draw, 60, 0.6))


def test_beats_that_are_skewed_have_a_lopsided_interval_that_covers():
    assert 92.0 <= covered(block_median_interval, lambda draw: draw.exponential(size=40) - np.log(2.0)) <= 99.5
    draw = np.random.default_rng(1)
    median, low, high = np.transpose([block_median_interval(draw.exponential(size=40)) for _ in range(50)])
    assert np.median((high - median) / (median - low)) > 1.1


def test_few_beats_have_the_interval_of_t():
    # alternating: no positive correlation, so the plain errors; a median's is sqrt(pi / 2) times a mean's
    values = np.array([1.0, -1.0, 1.0, -1.0, 1.0, -1.0])
    half = stats.t.ppf(0.975, 5) * np.sqrt(6.0 / 5.0) / np.sqrt(6.0)
    assert block_mean_interval(values) == pytest.approx((0.0, -half, half))
    assert block_median_interval(values) == pytest.approx((0.0, -half * np.sqrt(np.pi / 2.0), half * np.sqrt(np.pi / 2.0)))


@pytest.mark.parametrize("interval", [block_median_interval, block_mean_interval])
def test_one_or_two_beats_have_none_and_no_beat_no_middle(interval):
    for values in ([3.0], [3.0, 5.0]):
        middle, *bounds = interval(np.array(values))
        assert middle == np.mean(values)
        assert np.isnan(bounds).all()
    with pytest.raises(ValueError, match="no beat has a value"):
        interval(np.array([np.nan, np.inf]))


@pytest.mark.parametrize("interval", [block_median_interval, block_mean_interval])
@pytest.mark.parametrize("count", [3, 11, 12, 200])
def test_equal_beats_are_certain(interval, count):
    assert interval(np.full(count, 0.3)) == pytest.approx((0.3, 0.3, 0.3))


SERIES = st.lists(st.integers(-1000, 1000), min_size=3, max_size=40)


@pytest.mark.parametrize("interval", [block_median_interval, block_mean_interval])
@given(values=SERIES, gain=st.sampled_from([0.5, 2.0, 8.0]), offset=st.integers(-64, 64))
def test_a_change_of_units_changes_the_units_alone(interval, values, gain, offset):
    plain = np.array(interval(np.array(values, dtype=np.float64)))
    moved = interval(gain * np.array(values) + offset)
    np.testing.assert_allclose(moved, gain * plain + offset, rtol=1e-9, atol=1e-9)


@pytest.mark.parametrize("interval", [block_median_interval, block_mean_interval])
@given(values=SERIES)
def test_the_middle_lies_inside_and_missing_beats_do_not_count(interval, values):
    series = np.array(values, dtype=np.float64)
    found = interval(series)
    assert found[1] <= found[0] <= found[2]
    assert interval(np.insert(series, 1, np.nan)) == found


def test_the_same_beats_have_the_same_draws_and_others_have_others():
    series = np.random.default_rng(5).standard_normal(30)
    first = generator(series).integers(0, 1000, 50)
    np.testing.assert_array_equal(generator(series.copy()).integers(0, 1000, 50), first)
    assert np.any(generator(series[::-1]).integers(0, 1000, 50) != first)


def test_block_lengths():
    draw = np.random.default_rng(8)
    assert np.median([block_length(draw.standard_normal(60)) for _ in range(40)]) <= 2.0
    assert 3.0 <= np.median([block_length(autoregression(draw, 60, 0.5)) for _ in range(40)]) <= 7.0
    assert np.median([block_length(breathing(draw, 60, 5.0, 2.0)) for _ in range(40)]) == 5.0
    assert block_length(np.zeros(30)) == 1
    assert block_length(np.arange(30.0)) == 5
    assert block_length(np.array([1.0, 2.0])) == 1


def test_a_resample_is_made_of_whole_blocks_of_neighbours():
    at = block_positions(np.random.default_rng(2).standard_normal(22), 4)
    assert at.shape == (2000, 24)
    assert np.all(np.diff(at.reshape(2000, 6, 4), axis=2) == 1)
    assert (at.min(), at.max()) == (0, 21)


def test_correlation_by_hand():
    np.testing.assert_allclose(correlation(np.array([1.0, 0.0, -1.0]), 4), [1.0, 0.0, -0.5, 0.0, 0.0])
    np.testing.assert_array_equal(correlation(np.full(4, 2.0), 2), [0.0, 0.0, 0.0])


def test_blocks_begin_where_the_docstring_says():
    assert FEWEST_FOR_BLOCKS == 12
