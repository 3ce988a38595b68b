import numpy as np
import pytest

from flows.sources.simulated.catheter import Catheter
from flows.sources.simulated.recorded import NOISELESS, ORDINARY, recorded
from flows.sources.simulated.rhythm import Conditions, Occlusion

SHORT = {"rest": Conditions(duration_s=5.0)}


def one(catheter: Catheter = NOISELESS, rate_hz: float = 250.0, runs=SHORT, seed: int = 0):
    return next(iter(recorded("normal", runs, catheter=catheter, rate_hz=rate_hz, seed=seed).values()))


def test_a_rest_run_and_a_ramp_are_recorded_with_kinds_and_events():
    runs = recorded(
        "normal", {"rest": Conditions(duration_s=4.0), "ramp": Conditions(duration_s=9.0, occlusion=Occlusion(2.0, deflation_s=7.0))}
    )
    assert [run.kind for run in runs.values()] == ["steady", "preload-reduction"]
    assert runs["ramp"].events == ((2.0, "occlusion-on"), (7.0, "occlusion-off"))
    assert runs["rest"].signals.time_s.size == 1000


@pytest.mark.parametrize("rate_hz", [250.0, 1000.0, 360.0])
def test_samples_are_the_solution_at_their_instants(rate_hz):
    run = one(rate_hz=rate_hz)
    beats, signals = run.truth.beats, run.signals
    assert np.interp(beats.start_s, signals.time_s, signals.volume_ml) == pytest.approx(beats.edv_ml, abs=0.05)
    assert np.interp(beats.end_systole_s, signals.time_s, signals.pressure_mmhg) == pytest.approx(beats.esp_mmhg, abs=0.5)
    assert np.diff(signals.time_s) == pytest.approx(1.0 / rate_hz)


def test_r_waves_are_the_highest_of_the_ecg():
    run = one(rate_hz=1000.0)
    for r_s in run.truth.beats.r_s:
        near = np.abs(run.signals.time_s - r_s) < 0.2
        assert run.signals.time_s[near][run.signals.ecg_mv[near].argmax()] == pytest.approx(r_s, abs=0.002)


def test_contraction_follows_the_r_wave_by_the_electromechanical_delay():
    beats = one().truth.beats
    assert ((beats.start_s - beats.r_s > 0.03) & (beats.start_s - beats.r_s < 0.06)).all()


def test_what_the_recorder_shows_can_be_undone_by_its_own_line_and_zeros():
    catheter = Catheter(pressure_gain=1.05, pressure_shift_mmhg=1.2, zero_error_mmhg=0.5, drift_mmhg_per_hour=2.0)
    plain, shown = one().signals.pressure_mmhg, one(catheter).signals.pressure_mmhg
    line = np.polyfit([0.0, 100.0], [catheter.pressure_shift_mmhg, 100.0 * catheter.pressure_gain + catheter.pressure_shift_mmhg], 1)
    zero = (catheter.zero_shown_mmhg(0.0) - line[1]) / line[0]
    assert zero == pytest.approx(0.5)
    undone = (shown - line[1]) / line[0] - zero
    np.testing.assert_allclose(undone, plain, atol=0.005)
    assert catheter.zero_shown_mmhg(1.0) - catheter.zero_shown_mmhg(0.0) == pytest.approx(2.1)


def test_volume_gain_shift_delay_steps_and_noise_do_what_they_say():
    plain = one().signals.volume_ml
    raw = one(Catheter(volume_gain=0.8, volume_shift_ml=45.0)).signals.volume_ml
    np.testing.assert_allclose((raw - 45.0) / 0.8, plain, atol=1e-9)
    late = one(Catheter(volume_delay_s=0.02)).signals.volume_ml
    np.testing.assert_allclose(late[5:], plain[:-5], atol=1e-9)
    stepped = one(Catheter(volume_step_ml=0.5)).signals.volume_ml
    np.testing.assert_allclose(stepped, plain, atol=0.2501)
    np.testing.assert_allclose(stepped * 2.0, np.round(stepped * 2.0), atol=1e-9)
    noisy = one(ORDINARY).signals.volume_ml - plain
    assert noisy.std() == pytest.approx(ORDINARY.volume_noise_ml, rel=0.1)


def test_noise_depends_on_the_seed_alone():
    np.testing.assert_array_equal(one(ORDINARY).signals.pressure_mmhg, one(ORDINARY).signals.pressure_mmhg)


def test_an_unknown_heart_is_a_key_error():
    with pytest.raises(KeyError, match="nobody"):
        recorded("nobody")
