import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import stats

from metrics.stats.medians import median_interval


def test_worked_ranks():
    # binomial tails at one half: of 10 values the 2nd and 9th, of 20 the 6th and 15th
    assert median_interval(np.arange(1.0, 11.0)) == (5.5, 2.0, 9.0)
    assert median_interval(np.arange(1.0, 21.0)) == (10.5, 6.0, 15.0)
    assert median_interval(np.array([3.0, 1.0, 2.0, 6.0, 5.0, 4.0])) == (3.5, 1.0, 6.0)


@pytest.mark.parametrize("count", [1, 2, 3, 4, 5])
def test_fewer_than_six_values_have_no_interval_of_95_per_cent(count):
    median, low, high = median_interval(np.arange(float(count)))
    assert median == (count - 1) / 2.0
    assert np.isnan([low, high]).all()


@given(st.integers(6, 400))
def test_the_interval_covers_at_least_what_it_says_and_no_rank_more(count):
    _, low, high = median_interval(np.arange(1.0, count + 1.0))
    assert low + high == count + 1
    outside = 2.0 * stats.binom.cdf(low - 1, count, 0.5)
    assert outside <= 0.05
    assert 2.0 * stats.binom.cdf(low, count, 0.5) > 0.05


@given(st.lists(st.floats(-1e6, 1e6), min_size=1, max_size=40))
def test_missing_values_are_left_out_and_order_does_not_matter(values):
    plain = median_interval(np.array(values))
    assert plain[0] == np.median(values)
    mixed = np.append(np.array(values[::-1]), [np.nan, np.inf])
    np.testing.assert_array_equal(median_interval(mixed), plain)


@pytest.mark.parametrize("values", [[], [np.nan, np.nan]])
def test_nothing_has_no_median(values):
    with pytest.raises(ValueError, match="no beat has a value"):
        median_interval(np.array(values))
