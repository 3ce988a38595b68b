from dataclasses import replace

import numpy as np
import pytest

from flows.sources.simulated.rhythm import Breathing, Conditions
from metrics.signals.landmarks import beats_of
from metrics.signals.segment import upstrokes
from tests.metrics.recorded_hearts import heart_runs, nearest_true, run_in_memory, signals_and_beats

NOTHING = np.empty(0, dtype=np.int64)


def bumps(heights, rate_hz=250.0, rr_s=0.8):
    """A made-up dP/dt: one upstroke of each height, and the deep negative swing of relaxation after it."""
    time_s = np.arange(round((len(heights) + 1) * rr_s * rate_hz)) / rate_hz
    total = np.zeros(time_s.size)
    for place, height in enumerate(heights):
        at_s = (place + 0.5) * rr_s
        total += height * np.exp(-0.5 * ((time_s - at_s) / 0.02) ** 2) - 900.0 * np.exp(-0.5 * ((time_s - at_s - 0.3) / 0.03) ** 2)
    return total


def samples(places, rate_hz=250.0, rr_s=0.8):
    return [round((place + 0.5) * rr_s * rate_hz) for place in places]


def test_without_r_waves_only_strong_upstrokes_count():
    dpdt = bumps([1000.0, 1000.0, 450.0, 1000.0, 350.0, 1000.0, 1000.0])
    peak, r_at = upstrokes(dpdt, NOTHING, 250.0)
    assert peak.tolist() == samples([0, 1, 2, 3, 5, 6])
    assert (r_at == -1).all()


def test_a_weak_upstroke_counts_when_an_r_wave_stands_before_it():
    dpdt = bumps([1000.0, 1000.0, 150.0, 1000.0, 60.0, 1000.0])
    every = np.array(samples(range(6))) - 20
    peak, r_at = upstrokes(dpdt, every, 250.0)
    assert peak.tolist() == samples([0, 1, 2, 3, 5])
    assert r_at.tolist() == [at - 20 for at in samples([0, 1, 2, 3, 5])]


def test_an_r_wave_too_long_before_does_not_lend_its_weight():
    dpdt = bumps([1000.0, 1000.0, 150.0, 1000.0])
    peak, r_at = upstrokes(dpdt, np.array(samples(range(4))) - 75, 250.0)
    assert peak.tolist() == samples([0, 1, 3])
    assert (r_at == -1).all()


def test_one_r_wave_belongs_to_one_upstroke_the_tallest_after_it():
    dpdt = bumps([1000.0, 1000.0, 1000.0])
    dpdt += 600.0 * np.exp(-0.5 * ((np.arange(dpdt.size) - samples([1])[0] - 40) / 5.0) ** 2)
    peak, r_at = upstrokes(dpdt, np.array(samples([0, 1, 2])) - 15, 250.0)
    assert r_at[peak == samples([1])[0]].tolist() == [samples([1])[0] - 15]
    assert sorted(r_at[r_at >= 0].tolist()) == [at - 15 for at in samples([0, 1, 2])]


@pytest.mark.parametrize("dpdt", [np.empty(0), np.zeros(500), np.full(500, -3.0), np.linspace(0.0, 9.0, 500)])
def test_pressure_without_upstrokes_has_no_beats(dpdt):
    peak, r_at = upstrokes(dpdt, NOTHING, 250.0)
    assert peak.size == r_at.size == 0


@pytest.mark.parametrize("scale", [0.05, 8.0])
def test_the_height_of_all_upstrokes_does_not_matter(scale):
    dpdt = bumps([1000.0, 800.0, 1000.0, 300.0, 1000.0])
    np.testing.assert_array_equal(upstrokes(scale * dpdt, NOTHING, 250.0)[0], upstrokes(dpdt, NOTHING, 250.0)[0])


def test_upstrokes_may_fade_in_an_occlusion():
    heights = np.linspace(1400.0, 350.0, 24)
    assert upstrokes(bumps(heights), NOTHING, 250.0)[0].size == 24


@pytest.mark.parametrize("heart", ["normal", "fast", "failing", "right"])
@pytest.mark.parametrize("run", ["rest", "ramp"])
@pytest.mark.parametrize("catheter", ["noiseless", "noisy"])
def test_pressure_alone_finds_the_beats_that_the_ecg_finds(heart, run, catheter):
    recorded = heart_runs(heart, catheter=catheter)[run]
    _, with_ecg = signals_and_beats(recorded)
    _, without = signals_and_beats(recorded, ("pressure", "volume"))
    assert (with_ecg.detector, without.detector) == ("ecg", "pressure")
    np.testing.assert_array_equal(without.start, with_ecg.start)
    np.testing.assert_array_equal(without.esv_at, with_ecg.esv_at)
    assert (without.r_at == -1).all()
    assert np.median(without.rr_s) == pytest.approx(np.median(with_ecg.rr_s), abs=0.01)


def test_a_lead_off_stretch_costs_r_waves_but_no_beat():
    recorded = heart_runs("normal")["rest"]
    ecg_mv = recorded.signals.ecg_mv.copy()
    ecg_mv[6 * 250 : 14 * 250] = 0.0
    signals, whole = signals_and_beats(recorded)
    beats = beats_of(replace(signals, ecg_mv=ecg_mv), "LV")
    np.testing.assert_array_equal(beats.start, whole.start)
    without = beats.r_at == -1
    in_stretch = (beats.start > 6.2 * 250) & (beats.start < 13.8 * 250)
    assert without[in_stretch].all()
    assert without.sum() <= in_stretch.sum() + 2
    assert beats.detector == "ecg"


PREMATURE = Conditions(duration_s=30.0, premature_s=(6.0, 12.0, 12.8, 20.0), coupling=0.6)


@pytest.mark.parametrize("heart", ["normal", "fast", "failing", "right"])
def test_premature_beats_are_beats_too(heart):
    recorded = run_in_memory(heart, PREMATURE, seed=2)
    _, beats = signals_and_beats(recorded)
    own, late_s = nearest_true(recorded, beats, 250.0)
    near = np.abs(late_s) < 0.03
    assert set(own[near].tolist()) == set(range(len(recorded.truth.beats)))
    assert len(beats) - near.sum() <= 1  # the truth leaves a beat out that begins before the run


@pytest.mark.parametrize("conditions", [Conditions(duration_s=30.0, fibrillating=True), Conditions(duration_s=30.0, breathing=Breathing())])
def test_irregular_and_breathing_hearts(conditions):
    recorded = run_in_memory("normal", conditions, seed=5)
    _, beats = signals_and_beats(recorded)
    own, late_s = nearest_true(recorded, beats, 250.0)
    assert sorted(own[np.abs(late_s) < 0.03].tolist()) == list(range(len(recorded.truth.beats)))


@pytest.mark.parametrize("heart", ["normal", "failing", "right"])
@pytest.mark.parametrize("run", ["rest", "ramp"])
def test_noise_makes_no_beats(heart, run):
    for seed in range(3):
        recorded = heart_runs(heart, catheter="twice-noisy", seed=seed)[run]
        _, beats = signals_and_beats(recorded)
        own, late_s = nearest_true(recorded, beats, 250.0)
        true = recorded.truth.beats
        inside = (beats.start / 250.0 > true.start_s[0] - 0.1) & (beats.start / 250.0 < true.start_s[-1] + 0.1)
        assert set(own[np.abs(late_s) < 0.05].tolist()) == set(range(len(true)))
        assert (np.abs(late_s[inside]) > 0.05).sum() == 0
