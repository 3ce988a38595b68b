from dataclasses import replace

import numpy as np
import pytest

from metrics.signals.calibrate import Signals
from metrics.signals.filters import steadied
from metrics.signals.landmarks import beats_of, end_diastoles, end_of_ejection, loop_areas
from tests.metrics.recorded_hearts import heart_runs, nearest_true, signals_and_beats

HEARTS = ("normal", "small", "large", "fast", "failing", "stiff", "high-afterload", "right", "right-loaded")
FIELDS = ("edv_ml", "esv_ml", "edp_mmhg", "pmax_mmhg", "sw_mmhg_ml", "dpdt_max_mmhg_per_s", "dpdt_min_mmhg_per_s", "rr_s")


def errors(heart, rate_hz, catheter, run="rest"):
    """What was found minus what is true, beat by beat; work and slopes as fractions, ``start_s`` in seconds."""
    recorded = heart_runs(heart, rate_hz, catheter)[run]
    _, beats = signals_and_beats(recorded)
    own, late_s = nearest_true(recorded, beats, rate_hz)
    near = np.abs(late_s) < 0.05
    assert set(own[near].tolist()) == set(range(len(recorded.truth.beats)))
    found = {"start_s": late_s[near]}
    for name in FIELDS:
        value, true = getattr(beats, name)[near], getattr(recorded.truth.beats, name)[own[near]]
        found[name] = value / true - 1.0 if name.startswith(("sw", "dpdt")) else value - true
    return found


def largest(found, name):
    return float(np.abs(found[name]).max())


@pytest.mark.parametrize("heart", HEARTS)
@pytest.mark.parametrize("run", ["rest", "ramp"])
def test_landmarks_of_noise_free_beats(heart, run):
    found = errors(heart, 250.0, "noiseless", run)
    right = heart.startswith("right")
    assert largest(found, "start_s") < 0.008
    assert largest(found, "edv_ml") < (0.5 if right else 0.3)
    assert largest(found, "esv_ml") < 0.06
    assert largest(found, "edp_mmhg") < 0.4
    assert largest(found, "pmax_mmhg") < 0.1
    assert largest(found, "sw_mmhg_ml") < 0.001
    assert largest(found, "dpdt_max_mmhg_per_s") < 0.01
    assert largest(found, "dpdt_min_mmhg_per_s") < (0.035 if right else 0.006)  # the cubic rounds off a fast relaxation
    assert largest(found, "rr_s") < 0.005


@pytest.mark.parametrize("heart", ["normal", "failing", "right"])
def test_a_higher_rate_brings_landmarks_nearer(heart):
    found = errors(heart, 1000.0, "noiseless")
    assert largest(found, "start_s") < 0.003
    assert largest(found, "edv_ml") < 0.25
    assert largest(found, "edp_mmhg") < 0.1
    assert largest(found, "sw_mmhg_ml") < 0.0001
    assert largest(found, "rr_s") < 0.0015


@pytest.mark.parametrize("heart", ["normal", "fast", "failing", "right"])
@pytest.mark.parametrize("rate_hz", [250.0, 1000.0])
def test_landmarks_of_noisy_beats(heart, rate_hz):
    found = errors(heart, rate_hz, "noisy")
    # 10 % of a right ventricle's dP/dt maximum is about what noise makes of diastole at 250 Hz
    assert largest(found, "start_s") < (0.020 if heart == "right" else 0.008)
    assert largest(found, "edv_ml") < (2.0 if heart == "right" else 1.0)
    assert largest(found, "esv_ml") < 1.2
    assert largest(found, "sw_mmhg_ml") < 0.015
    edv_bound_ml = 0.6 if heart == "right" and rate_hz < 500.0 else 0.2
    for name, bound in (("edv_ml", edv_bound_ml), ("esv_ml", 0.45), ("edp_mmhg", 0.3), ("sw_mmhg_ml", 0.002), ("rr_s", 0.001)):
        assert abs(np.median(found[name])) < bound, name


def made_up(pressure, volume, dpdt, rate_hz=25.0):
    """Signals so slow that no smoothing reaches them."""
    arrays = [np.asarray(values, dtype=np.float64) for values in (pressure, volume, dpdt)]
    return Signals(rate_hz, *arrays, np.zeros(arrays[0].size, dtype=bool), 0.0, 0.0, {})


def test_a_run_without_an_upstroke_has_no_beats():
    flat = made_up(np.full(500, 8.0), np.full(500, 100.0), np.zeros(500), 250.0)
    beats = beats_of(flat, "LV")
    assert len(beats) == 0
    assert beats.detector == "pressure"
    assert beats.sv_ml.size == beats.ef.size == beats.sw_mmhg_ml.size == 0


def test_one_upstroke_bounds_no_beat():
    rise = np.zeros(500)
    rise[200:220] = np.hanning(20) * 1000.0
    assert len(beats_of(made_up(np.full(500, 8.0), np.full(500, 100.0), rise, 250.0), "RV")) == 0


@pytest.mark.parametrize("heart", ["normal", "right"])
def test_beats_follow_each_other_and_their_landmarks_keep_their_order(heart):
    for run in heart_runs(heart, catheter="noisy").values():
        _, beats = signals_and_beats(run)
        np.testing.assert_array_equal(beats.end[:-1], beats.start[1:])
        assert (beats.start < beats.dpdt_max_at).all()
        assert (beats.dpdt_max_at < beats.esv_at).all()
        assert (beats.dpdt_max_at < beats.dpdt_min_at).all()
        assert (beats.dpdt_min_at < beats.end).all()
        assert heart == "right" or (beats.esv_at <= beats.dpdt_min_at).all()
        np.testing.assert_allclose(beats.ef, (beats.edv_ml - beats.esv_ml) / beats.edv_ml)


def test_beats_do_not_depend_on_how_the_run_goes_on():
    run = heart_runs("normal")["rest"]
    signals, whole = signals_and_beats(run)
    cut = {name: getattr(signals, name)[:3000] for name in ("pressure_mmhg", "volume_ml", "dpdt_mmhg_per_s", "missing", "ecg_mv")}
    part = beats_of(replace(signals, **cut), "LV")
    assert 8 < len(part) < len(whole)
    np.testing.assert_array_equal(part.start, whole.start[: len(part)])
    np.testing.assert_allclose(part.sw_mmhg_ml, whole.sw_mmhg_ml[: len(part)])


def test_end_diastole_is_the_last_sample_at_or_below_a_tenth_of_the_steepest_rise():
    dpdt = np.array([0.0, 300.0, 50.0, 99.0, 100.0, 101.0, 700.0, 1000.0, 400.0])
    assert end_diastoles(dpdt, np.array([7]), 250.0).tolist() == [4]
    assert end_diastoles(dpdt, np.empty(0, dtype=np.int64), 250.0).size == 0


def test_where_pressure_never_stands_still_end_diastole_is_the_slowest_rise_within_a_quarter_second():
    slower_before = np.linspace(400.0, 500.0, 400)
    assert end_diastoles(slower_before, np.array([300]), 250.0).tolist() == [300 - 61]


def test_an_upstroke_the_run_begins_inside_of_has_no_end_diastole():
    assert end_diastoles(np.full(400, 500.0), np.array([3]), 250.0).tolist() == [-1]
    for run in heart_runs("normal").values():
        signals, whole = signals_and_beats(run)
        begun = int(whole.dpdt_max_at[0]) - 3
        arrays = ("pressure_mmhg", "volume_ml", "dpdt_mmhg_per_s", "missing", "ecg_mv")
        late = beats_of(replace(signals, **{name: getattr(signals, name)[begun:] for name in arrays}), "LV")
        np.testing.assert_array_equal(late.start + begun, whole.start[1:])


def test_a_right_ventricle_ejects_until_it_is_relaxed():
    pressure = np.array([6.0, 30.0, 30.0, 20.0, 12.0, 11.0, 8.0, 6.0])
    start, end, relaxing = np.array([0]), np.array([7]), np.array([3])
    assert end_of_ejection(pressure, start, end, relaxing, "LV").tolist() == [4]
    assert end_of_ejection(pressure, start, end, relaxing, "RV").tolist() == [6]  # 11 is within 5 of 6; the span is half-open
    assert end_of_ejection(pressure + np.array([0, 0, 0, 9, 9, 9, 9, 9]), start, end, relaxing, "RV").tolist() == [7]
    assert end_of_ejection(pressure, start, end, np.array([-1]), "LV").tolist() == [7]


@pytest.mark.parametrize("rate_hz", [250.0, 1000.0])
def test_steadying_keeps_a_parabola_and_shrinks_noise(rate_hz):
    time_s = np.arange(400) / rate_hz
    parabola = 40.0 + 300.0 * (time_s - 0.3) ** 2
    np.testing.assert_allclose(steadied(parabola, rate_hz), parabola, atol=1e-9)
    noise = np.random.default_rng(1).normal(size=20_000)
    assert steadied(noise, rate_hz).std() < 0.5
    np.testing.assert_array_equal(steadied(noise[:5], rate_hz), noise[:5])


def test_the_area_of_a_box_an_ellipse_and_a_line():
    box_v, box_p = np.array([130.0, 130.0, 190.0 / 3.0, 190.0 / 3.0]), np.array([0.0, 400.0 / 3.0, 400.0 / 3.0, 0.0])
    whole = (np.array([0]), np.array([3]))
    assert loop_areas(box_p, box_v, *whole) == pytest.approx([8888.888889])
    assert loop_areas(box_p[::-1], box_v[::-1], *whole) == pytest.approx([-8888.888889])
    assert loop_areas(box_v, box_v, *whole) == pytest.approx([0.0], abs=1e-9)
    for count, area in ((720, 4712.3292), (8, 4242.6407)):
        turn = 2.0 * np.pi * np.arange(count) / count
        found = loop_areas(60.0 + 50.0 * np.sin(turn), 100.0 + 30.0 * np.cos(turn), np.array([0]), np.array([count - 1]))
        assert found == pytest.approx([area], abs=5e-5)


def test_areas_of_several_loops_and_of_none():
    volume, pressure = np.array([0.0, 2.0, 2.0, 0.0, 0.0, 0.0, 1.0, 1.0]), np.array([0.0, 0.0, 3.0, 3.0, 0.0, 1.0, 1.0, 0.0])
    assert loop_areas(pressure, volume, np.array([0, 4]), np.array([4, 7])).tolist() == [6.0, -1.0]
    assert loop_areas(pressure, volume, np.empty(0, dtype=np.int64), np.empty(0, dtype=np.int64)).size == 0
