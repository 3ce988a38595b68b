import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from metrics.arrays import argmax_within, argmin_within, median_before, robust_sd, running_median, spans, taken

NUMBERS = st.one_of(st.floats(-1e6, 1e6), st.just(math.nan), st.sampled_from([0.0, 1.0, -1.0]))


@st.composite
def values_and_spans(draw):
    values = np.array(draw(st.lists(NUMBERS, min_size=1, max_size=30)))
    edges = st.integers(0, values.size)
    pairs = draw(st.lists(st.tuples(edges, edges), max_size=12))
    start, stop = (np.array([pair[side] for pair in pairs], dtype=np.int64) for side in (0, 1))
    return values, start, stop


def looked_for(values, low, high, is_better):
    """The first best sample of a span by a plain loop; NaN is worse than any number."""
    best = -1
    for at in range(low, high):
        if best < 0 or (not math.isnan(values[at]) and (math.isnan(values[best]) or is_better(values[at], values[best]))):
            best = at
    return best


@given(values_and_spans())
def test_spans_list_every_sample_of_every_span_in_order(case):
    _, start, stop = case
    positions, owner = spans(start, stop)
    expected = [(at, which) for which, (low, high) in enumerate(zip(start, stop, strict=True)) for at in range(low, high)]
    assert list(zip(positions.tolist(), owner.tolist(), strict=True)) == expected


@given(values_and_spans())
def test_extremes_within_spans_are_those_a_loop_finds(case):
    values, start, stop = case
    pairs = list(zip(start, stop, strict=True))
    assert argmax_within(values, start, stop).tolist() == [looked_for(values, low, high, lambda a, b: a > b) for low, high in pairs]
    assert argmin_within(values, start, stop).tolist() == [looked_for(values, low, high, lambda a, b: a < b) for low, high in pairs]


def test_extremes_of_no_spans_and_of_empty_spans():
    nothing = np.empty(0, dtype=np.int64)
    assert argmax_within(np.array([1.0]), nothing, nothing).tolist() == []
    assert argmax_within(np.empty(0), np.array([0, 0]), np.array([0, 0])).tolist() == [-1, -1]
    assert argmin_within(np.array([1.0, 2.0]), np.array([2, 1]), np.array([1, 1])).tolist() == [-1, -1]


def test_minus_infinity_is_larger_than_missing():
    values = np.array([math.nan, -math.inf, math.nan])
    assert argmax_within(values, np.array([0]), np.array([3])).tolist() == [1]


@given(st.lists(st.floats(-1e6, 1e6), max_size=10), st.lists(st.integers(-1, 9), max_size=10))
def test_taken_is_indexing_with_gaps(values, at):
    at = [place for place in at if place < len(values)]
    got = taken(np.array(values), np.array(at, dtype=np.int64))
    np.testing.assert_array_equal(got, [math.nan if place < 0 else values[place] for place in at])


def middle(window):
    known = [value for value in window if not math.isnan(value)]
    return float(np.median(known)) if known else math.nan


@given(st.lists(NUMBERS, max_size=25), st.sampled_from([1, 3, 5, 11]))
def test_running_median_is_that_of_a_loop(values, width):
    half = width // 2
    expected = [middle(values[max(0, at - half) : at + half + 1]) for at in range(len(values))]
    np.testing.assert_allclose(running_median(np.array(values), width), expected, rtol=1e-12, atol=1e-9)


@given(st.lists(NUMBERS, max_size=25), st.integers(1, 9))
def test_median_before_is_that_of_a_loop(values, width):
    expected = [middle(values[max(0, at - width) : at]) for at in range(len(values))]
    np.testing.assert_allclose(median_before(np.array(values), width), expected, rtol=1e-12, atol=1e-9)


def test_robust_sd_of_a_normal_sample_is_its_sd():
    assert robust_sd(np.random.default_rng(5).normal(3.0, 2.0, 20_000)) == pytest.approx(2.0, rel=0.03)


@given(st.lists(st.floats(-1e3, 1e3), min_size=1, max_size=30), st.floats(-1e3, 1e3), st.floats(0.01, 100.0))
def test_robust_sd_scales_with_the_values_and_ignores_their_level_and_gaps(values, level, scale):
    plain = np.array(values)
    moved = np.append(level + scale * plain, math.nan)
    assert robust_sd(moved) == pytest.approx(scale * robust_sd(plain), rel=1e-6, abs=1e-6)


def test_robust_sd_of_nothing_is_not_a_number():
    assert math.isnan(robust_sd(np.array([math.nan, math.inf])))
    assert math.isnan(robust_sd(np.empty(0)))
