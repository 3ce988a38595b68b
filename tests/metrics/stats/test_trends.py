import numpy as np
import pytest

from metrics.stats.trends import is_trend_by_blocks, swing, trend_per_s

TIME_S = np.arange(0.0, 40.0, 0.9)


def test_a_trend_is_the_slope_whatever_a_few_beats_do():
    values = 100.0 - 0.3 * TIME_S
    values[[5, 20]] += 40.0
    assert trend_per_s(TIME_S, values) == pytest.approx(-0.3, abs=0.02)


def test_a_long_run_is_thinned_and_keeps_its_slope():
    time_s = np.arange(3000.0)
    assert trend_per_s(time_s, 0.01 * time_s) == pytest.approx(0.01)


def test_blocks_bear_out_a_trend_and_not_a_swing():
    assert is_trend_by_blocks(TIME_S, 100.0 - 0.3 * TIME_S, 5.0) is True
    assert is_trend_by_blocks(TIME_S, 100.0 + 5.0 * np.sin(2.0 * np.pi * 0.25 * TIME_S), 5.0) is False
    assert is_trend_by_blocks(TIME_S[:10], TIME_S[:10], 5.0) is None
    assert is_trend_by_blocks(np.empty(0), np.empty(0), 5.0) is None


def test_the_best_sine_is_the_one_that_is_there():
    rates = np.linspace(0.1, 0.5, 41)
    amplitude, explained, left = swing(TIME_S, 100.0 + 0.2 * TIME_S + 6.0 * np.sin(2.0 * np.pi * 0.25 * TIME_S), rates)
    best = int(np.argmax(explained))
    assert rates[best] == pytest.approx(0.25)
    assert amplitude[best] == pytest.approx(6.0, rel=0.05)
    assert explained[best] > 0.98
    assert np.abs(left[best]).max() < 1.0


def test_values_left_out_do_not_bend_the_sine():
    values = 6.0 * np.sin(2.0 * np.pi * 0.25 * TIME_S)
    spoiled, usual = values.copy(), np.ones(TIME_S.size, dtype=bool)
    spoiled[[7, 30]], usual[[7, 30]] = 90.0, False
    amplitude, explained, _ = swing(TIME_S, spoiled, np.array([0.25]), usual)
    assert amplitude[0] == pytest.approx(6.0, rel=0.02)
    assert explained[0] > 0.99
