from dataclasses import replace

import numpy as np
import pytest

from metrics.indices.card import RunBeats
from metrics.indices.end_systole import end_systole, end_systolic_line, noise_ratio
from metrics.signals.preload import preload_window
from tests.bench.accuracy_of_clean import facts_of
from tests.metrics.made_beats import boxes, made_beats, made_signals
from tests.metrics.recorded_hearts import heart_runs, signals_and_beats

HEARTS = ("normal", "small", "large", "fast", "failing", "stiff", "high-afterload", "right", "right-loaded")


def one_beat(volume, pressure, **columns):
    """One beat whose systole holds these points."""
    last = len(volume) - 1
    given = {"dpdt_max_at": [0], "dpdt_min_at": [last], "edv_ml": [volume[0]], "esv_ml": [min(volume)]} | columns
    return made_signals(pressure, volume), made_beats(1, **given)


@pytest.mark.parametrize(
    ("v0_ml", "point"), [(None, (50.0, 100.0)), (0.0, (50.0, 100.0)), (10.0, (50.0, 100.0)), (20.0, (50.0, 100.0)), (30.0, (49.0, 96.0))]
)
def test_the_point_chosen_moves_with_v0(v0_ml, point):
    # worked by hand: 98/52, 100/50 and 96/49 less V0 in each denominator
    signals, beats = one_beat([52.0, 50.0, 49.0], [98.0, 100.0, 96.0])
    found = end_systole(signals, beats, v0_ml)
    assert (found.volume_ml[0], found.esp_mmhg[0]) == point


@pytest.mark.parametrize("v0_ml", [49.0, 48.5, 60.0, 1e4])
def test_a_v0_at_or_above_the_volumes_falls_back_to_the_plain_ratio(v0_ml):
    signals, beats = one_beat([52.0, 50.0, 49.0], [98.0, 100.0, 96.0])
    assert end_systole(signals, beats, v0_ml).at.tolist() == end_systole(signals, beats, None).at.tolist() == [1]


def test_a_negative_v0_is_as_good_as_any():
    signals, beats = one_beat([52.0, 50.0, 49.0], [98.0, 100.0, 96.0])
    assert end_systole(signals, beats, -40.0).at.tolist() == [1]


@pytest.mark.parametrize("lost", ["dpdt_max_at", "dpdt_min_at"])
def test_a_beat_without_its_landmarks_has_no_end_systole(lost):
    signals, beats = one_beat([52.0, 50.0, 49.0], [98.0, 100.0, 96.0], **{lost: [-1]})
    for v0_ml in (None, 10.0):
        found = end_systole(signals, beats, v0_ml)
        assert found.at.tolist() == [-1]
        assert np.isnan([found.esp_mmhg[0], found.volume_ml[0]]).all()


def test_end_systole_is_looked_for_in_systole_only():
    run = boxes([130.0, 110.0, 90.0])
    at = end_systole(run.signals, run.beats, 10.0).at
    assert at.tolist() == [2, 6, 10]


@pytest.mark.parametrize("edp_mmhg", [0.0, 8.0])
@pytest.mark.parametrize("v0_ml", [10.0, 0.0, -15.0, 35.0])
def test_the_line_of_rectangular_loops_is_exact(v0_ml, edp_mmhg):
    run = boxes(np.linspace(130.0, 90.0, 6), v0_ml=v0_ml, edp_mmhg=edp_mmhg)
    found = run.end_systolic_line
    assert found.line.slope == pytest.approx(2.5, rel=1e-9)
    assert found.line.axis_intercept == pytest.approx(v0_ml, abs=1e-6)
    np.testing.assert_allclose(found.pressure_mmhg, 2.5 * (found.volume_ml - v0_ml))


def test_beats_that_are_not_chosen_bear_no_line():
    run = boxes(np.linspace(130.0, 90.0, 8))
    spoilt = replace(run.signals, pressure_mmhg=run.signals.pressure_mmhg.copy())
    spoilt.pressure_mmhg[4:8] *= 3.0
    chosen = run.chosen.copy()
    chosen[1] = False
    found = end_systolic_line(spoilt, run.beats, chosen)
    assert found.line.slope == pytest.approx(2.5)
    assert found.volume_ml.size == found.line.points == 7


def test_fewer_than_four_end_systoles_and_one_load_bear_no_line():
    run = boxes(np.linspace(130.0, 100.0, 4))
    assert end_systolic_line(run.signals, run.beats, run.chosen).line.points == 4
    with pytest.raises(ValueError, match="3 points"):
        end_systolic_line(run.signals, run.beats, np.array([True, True, True, False]))
    flat = boxes([120.0] * 6)
    with pytest.raises(ValueError, match="same load"):
        end_systolic_line(flat.signals, flat.beats, flat.chosen)


def test_points_that_swing_between_two_lines_come_to_rest():
    # two candidates a beat on one ray through (10, 0): one lies on a line from V0 = 20, the other on a line from 0, and each
    # line's intercept calls for the other's points
    right = np.array([60.0, 56.0, 52.0, 48.0, 44.0])
    high = 2.0 * (right - 20.0)
    ray = high / (right - 10.0)
    left = 10.0 * ray / (ray - 1.0)
    pressure, volume = np.column_stack([high, left]).ravel(), np.column_stack([right, left]).ravel()
    places = 2 * np.arange(5)
    beats = made_beats(5, dpdt_max_at=places, dpdt_min_at=places + 1, edv_ml=right, esv_ml=left)
    found = end_systolic_line(made_signals(pressure, volume), beats, np.ones(5, dtype=bool))
    assert any(np.allclose((found.line.slope, found.line.axis_intercept), line) for line in ((2.0, 20.0), (1.0, 0.0)))


@pytest.mark.parametrize(("heart", "rate_hz"), [*((heart, 250.0) for heart in HEARTS), ("normal", 1000.0), ("right", 1000.0)])
def test_an_exact_elastance_is_recovered(heart, rate_hz):
    recorded = heart_runs(heart, rate_hz)["ramp"]
    signals, beats = signals_and_beats(recorded)
    window = preload_window(beats, facts_of(recorded), rate_hz)
    line = RunBeats("ramp", signals, beats, window.inside).end_systolic_line.line
    assert line.slope == pytest.approx(recorded.truth.ees_mmhg_per_ml, rel=0.001)
    assert line.axis_intercept == pytest.approx(recorded.truth.v0_ml, abs=0.1)


@pytest.mark.parametrize("heart", ["normal", "failing", "right"])
def test_end_systole_lies_at_the_peak_of_activation(heart):
    recorded = heart_runs(heart)["rest"]
    signals, beats = signals_and_beats(recorded)
    found = end_systole(signals, beats, recorded.truth.v0_ml)
    own = np.abs(recorded.truth.beats.end_systole_s[:, None] - found.at / 250.0).argmin(axis=0)
    within = slice(1, -1)
    np.testing.assert_allclose(found.at[within] / 250.0, recorded.truth.beats.end_systole_s[own][within], atol=0.004)
    np.testing.assert_allclose(found.esp_mmhg[within], recorded.truth.beats.esp_mmhg[own][within], atol=0.6)  # half a sample
    np.testing.assert_allclose(found.volume_ml[within], recorded.truth.beats.end_systolic_volume_ml[own][within], atol=0.6)


def test_the_noise_ratio_is_that_of_the_noise_where_there_is_any():
    pressure, volume = np.array([0.0, 100.0]), np.array([40.0, 120.0])
    assert noise_ratio(made_signals(pressure, volume, pressure_noise=0.5, volume_noise=0.25)) == pytest.approx(4.0)
    for quiet in ({}, {"pressure_noise": 0.5}, {"volume_noise": 0.5}, {"pressure_noise": 0.5, "volume_noise": 1e-4}):
        assert noise_ratio(made_signals(pressure, volume, **quiet)) == pytest.approx((100.0 / 80.0) ** 2)
    assert noise_ratio(made_signals(pressure, np.full(2, 80.0))) == 1.0
