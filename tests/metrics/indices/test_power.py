from dataclasses import replace

import numpy as np
import pytest
from scipy import signal

from metrics.indices.card import RunBeats, StageBeats, Withheld
from metrics.indices.power import LARGEST_POWER, LARGEST_POWER_BY_FILLING, WATT, flow_ml_per_s, strongest_ejection
from tests.metrics.made_beats import made_beats, made_signals
from tests.metrics.recorded_hearts import heart_runs, signals_and_beats

RATE_HZ = 500.0
PERIOD = 400


def waves(count=4, noise_ml=0.0, pressure_mmhg=100.0):
    """Beats whose volume is a cosine of 40 mL about 90 mL, at one pressure: the flow is largest where the volume passes 90 mL."""
    volume = 90.0 + 40.0 * np.cos(2.0 * np.pi * np.arange(PERIOD * count + 1) / PERIOD)
    volume += np.random.default_rng(1).normal(0.0, noise_ml, volume.size)
    beats = made_beats(count, rr_s=PERIOD / RATE_HZ, rate_hz=RATE_HZ, edv_ml=[130.0] * count)
    beats = replace(beats, dpdt_min_at=beats.start + PERIOD // 2)
    signals = made_signals(np.full(volume.size, pressure_mmhg), volume, rate_hz=RATE_HZ)
    return RunBeats("rest", signals, beats, np.ones(count, dtype=bool))


STEEPEST_ML_PER_S = 40.0 * 2.0 * np.pi / PERIOD * RATE_HZ


def test_power_is_pressure_times_flow_at_its_largest():
    power_w, flow = strongest_ejection(waves())
    assert flow == pytest.approx([STEEPEST_ML_PER_S] * 4, rel=5e-3)
    assert power_w == pytest.approx(WATT * 100.0 * flow)


def test_noise_hardly_lifts_the_maximum():
    quiet, loud = (LARGEST_POWER.compute(StageBeats(steady=(waves(12, noise),))).value for noise in (0.0, 0.6))
    assert loud == pytest.approx(quiet, rel=0.02)
    plain = -100.0 * WATT * np.gradient(waves(12, 0.6).signals.volume_ml) * RATE_HZ
    assert plain.max() > 1.5 * quiet


def test_filling_is_no_ejection_and_beats_without_landmarks_have_no_power():
    run = waves()
    beats = replace(run.beats, dpdt_min_at=np.where(np.arange(4) == 2, -1, run.beats.dpdt_min_at))
    power_w, flow = strongest_ejection(replace(run, beats=beats))
    assert np.isnan(power_w).tolist() == np.isnan(flow).tolist() == [False, False, True, False]
    lost = replace(run, beats=replace(beats, dpdt_min_at=np.full(4, -1)))
    with pytest.raises(Withheld, match="0 accepted steady beats"):
        LARGEST_POWER.compute(StageBeats(steady=(lost,)))


def test_only_chosen_beats_count():
    run = waves()
    run.signals.pressure_mmhg[:PERIOD] = 500.0
    chosen = np.array([False, True, True, True])
    found = LARGEST_POWER.compute(StageBeats(steady=(replace(run, chosen=chosen),)))
    assert found.value == pytest.approx(WATT * 100.0 * STEEPEST_ML_PER_S, rel=5e-3)
    assert found.beats == 3


def test_the_flow_is_the_slope_of_the_local_cubic_and_calm_at_the_ends():
    volume = np.random.default_rng(2).normal(0.0, 1.0, 300).cumsum()
    window = 61
    expected = -signal.savgol_filter(volume, window, 3, deriv=1, delta=1.0 / RATE_HZ)
    found = flow_ml_per_s(volume, RATE_HZ, 200.0)
    np.testing.assert_allclose(found[30:-30], expected[30:-30], atol=1e-9)
    assert np.abs(found[[0, -1]]).max() < np.abs(expected).max()
    assert flow_ml_per_s(np.full(6, 80.0), RATE_HZ, 400.0) == pytest.approx(np.zeros(6), abs=1e-9)


def test_by_filling_the_square_of_edv_counts():
    stage = StageBeats(steady=(waves(),))
    whole, by_filling = LARGEST_POWER.compute(stage).value, LARGEST_POWER_BY_FILLING.compute(stage).value
    assert by_filling == pytest.approx(1000.0 * whole / 130.0**2)
    by_offset = LARGEST_POWER.sensitivity(stage, whole).pressure_mmhg
    higher = LARGEST_POWER.compute(StageBeats(steady=(waves(pressure_mmhg=105.0),))).value
    assert higher - whole == pytest.approx(5.0 * by_offset)
    assert LARGEST_POWER_BY_FILLING.sensitivity(stage, by_filling).volume_ml == pytest.approx(-2.0 * by_filling / 130.0)


@pytest.mark.parametrize(("heart", "true_w"), [("normal", 10.667), ("failing", 8.767), ("right", 2.445)])
@pytest.mark.parametrize("catheter", ["noiseless", "noisy"])
def test_simulated_hearts_have_the_power_of_their_solution(heart, true_w, catheter):
    # the largest -P dV/dt of the noise-free solution on its grid of 0.5 ms, by finite differences; medians of the beats
    signals, beats = signals_and_beats(heart_runs(heart, catheter=catheter)["rest"])
    run = RunBeats("rest", signals, beats, np.ones(len(beats), dtype=bool))
    assert LARGEST_POWER.compute(StageBeats(steady=(run,))).value == pytest.approx(true_w, rel=0.025)
