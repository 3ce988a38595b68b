import numpy as np
import pytest

from flows.sources.simulated.rhythm import Conditions, Occlusion
from metrics.signals.r_waves import r_waves, running_peak, thresholds
from tests.metrics.recorded_hearts import heart_runs, run_in_memory

RATES_HZ = (250.0, 360.0, 1000.0)
REST = {rate_hz: run_in_memory("normal", Conditions(duration_s=60.0), rate_hz=rate_hz) for rate_hz in RATES_HZ}


def found_s(ecg_mv, rate_hz):
    return r_waves(ecg_mv, rate_hz) / rate_hz


def lost(run, at_s, within_s=0.02):
    """How many true R waves have no detected one near them."""
    true_s = run.truth.beats.r_s
    return true_s.size if at_s.size == 0 else int((np.abs(true_s[:, None] - at_s).min(axis=1) > within_s).sum())


def false_ones(run, at_s, within_s=0.02):
    """How many detected R waves lie within the truth's complete beats and near none of their R waves."""
    true_s = run.truth.beats.r_s
    inside = at_s[(at_s > true_s[0] - 0.1) & (at_s < true_s[-1] + 0.1)]
    return int((np.abs(inside[:, None] - true_s).min(axis=1) > within_s).sum())


def spike(run, at_s, height_mv):
    return height_mv * np.exp(-0.5 * ((run.signals.time_s - at_s) / 0.02) ** 2)


def test_thresholds_and_running_peaks_are_pan_and_tompkins_s():
    # worked: signal peak 1.0 and noise peak 0.2 make .4; a new peak of 1.6 moves the signal peak to 1.075
    assert thresholds(1.0, 0.2) == pytest.approx((0.4, 0.2))
    assert running_peak(1.0, 1.6) == pytest.approx(1.075)
    assert running_peak(1.0, 1.6, 0.25) == pytest.approx(1.15)


@pytest.mark.parametrize("rate_hz", RATES_HZ)
@pytest.mark.parametrize("gain", [1.0, -1.0, 0.001, 2000.0])
def test_every_r_wave_is_found_where_it_is_whatever_unit_and_polarity(rate_hz, gain):
    run = REST[rate_hz]
    at_s = found_s(gain * run.signals.ecg_mv, rate_hz)
    assert lost(run, at_s, within_s=0.006) == 0
    assert false_ones(run, at_s) == 0


@pytest.mark.parametrize("heart", ["small", "fast", "failing", "right"])
def test_other_hearts_and_their_occlusions(heart):
    for run in heart_runs(heart).values():
        at_s = found_s(run.signals.ecg_mv, 250.0)
        assert (lost(run, at_s), false_ones(run, at_s)) == (0, 0)


@pytest.mark.parametrize(
    "conditions",
    [
        Conditions(duration_s=40.0, premature_s=(8.0, 15.0, 15.9, 27.0)),
        Conditions(duration_s=40.0, fibrillating=True),
        Conditions(duration_s=20.0, occlusion=Occlusion(onset_s=5.0, reflex=0.4)),
    ],
    ids=["premature", "fibrillating", "reflex"],
)
def test_irregular_rhythms(conditions):
    run = run_in_memory("normal", conditions, seed=3)
    at_s = found_s(run.signals.ecg_mv, 250.0)
    assert (lost(run, at_s, within_s=0.03), false_ones(run, at_s, within_s=0.03)) == (0, 0)


@pytest.mark.parametrize("noise_mv", [0.05, 0.15])
def test_noise_hides_no_r_wave(noise_mv):
    run = REST[360.0]
    ecg_mv = run.signals.ecg_mv + np.random.default_rng(1).normal(0.0, noise_mv, run.signals.ecg_mv.size)
    at_s = found_s(ecg_mv, 360.0)
    assert (lost(run, at_s), false_ones(run, at_s)) == (0, 0)


def test_a_wandering_baseline_and_mains_hum_change_nothing():
    run = REST[1000.0]
    time_s = run.signals.time_s
    at_s = found_s(run.signals.ecg_mv + 2.0 * np.sin(2.0 * np.pi * 0.3 * time_s) + 0.3 * np.sin(2.0 * np.pi * 50.0 * time_s), 1000.0)
    assert (lost(run, at_s), false_ones(run, at_s)) == (0, 0)


@pytest.mark.parametrize("rate_hz", [250.0, 1000.0])
@pytest.mark.parametrize("at_s", [0.5, 1.2, 20.3, 59.9])
@pytest.mark.parametrize("height_mv", [5.0, 10.0, 30.0])  # beyond that an amplifier is at its rail
def test_an_artefact_costs_no_more_than_the_beats_under_it(rate_hz, at_s, height_mv):
    run = REST[rate_hz]
    found = found_s(run.signals.ecg_mv + spike(run, at_s, height_mv), rate_hz)
    assert lost(run, found) <= 2
    assert false_ones(run, found) <= 3


def test_a_lead_that_comes_off_costs_the_beats_of_that_stretch():
    run = REST[250.0]
    ecg_mv = run.signals.ecg_mv.copy()
    ecg_mv[20 * 250 : 40 * 250] = 0.0
    off = (run.truth.beats.r_s > 19.5) & (run.truth.beats.r_s < 40.5)
    at_s = found_s(ecg_mv, 250.0)
    assert int(off.sum()) - 2 <= lost(run, at_s) <= int(off.sum())
    assert false_ones(run, at_s) <= 2


def test_a_flat_a_short_and_a_slow_ecg_hold_no_r_wave():
    assert r_waves(np.full(5000, 0.4), 250.0).size == 0
    assert r_waves(REST[250.0].signals.ecg_mv[:400], 250.0).size == 0
    assert r_waves(REST[250.0].signals.ecg_mv, 50.0).size == 0
    assert r_waves(np.empty(0), 250.0).size == 0


@pytest.mark.parametrize("size", [500, 620, 751])
def test_a_run_of_two_or_three_seconds_has_its_r_waves(size):
    run = REST[250.0]
    at_s = found_s(run.signals.ecg_mv[:size], 250.0)
    there = run.truth.beats.r_s[run.truth.beats.r_s < size / 250.0 - 0.1]
    assert np.abs(there[:, None] - at_s).min(axis=1).max() < 0.02


def test_r_waves_ascend_and_keep_a_refractory_distance():
    at = r_waves(REST[1000.0].signals.ecg_mv, 1000.0)
    assert (np.diff(at) > 200).all()
