"""What moved in the sensors: drawn beats on known relations, with a known shift laid over them."""

import numpy as np
import pytest

from metrics.signals.shifts import LoadPoints, course, drift, steps

EES, V0, RISE = 2.5, 10.0, 0.15


def drawn(count=40, *, fall=0.0, spread=3.0, pressure=0.0, volume=0.0, noise=0.0, seed=0):
    """Points of beats on one end-systolic line and one end-diastolic curve; ``pressure`` and ``volume`` are what the sensors add."""
    rng = np.random.default_rng(seed)
    edv = 120.0 - fall * np.linspace(0.0, 1.0, count) + spread * np.sin(np.arange(count) * 1.3)
    esv = 50.0 + 0.35 * (edv - 120.0)
    extra = noise * rng.standard_normal((4, count))
    return LoadPoints(
        time_s=np.arange(count) * 0.9,
        edv_ml=edv + volume + extra[0],
        edp_mmhg=8.0 + RISE * (edv - 120.0) + pressure + 0.5 * extra[1],
        esv_ml=esv + volume + extra[2],
        esp_mmhg=EES * (esv - V0) + pressure + extra[3],
    )


RAMP = np.linspace(0.0, 1.0, 40)
HALF = (np.arange(40) >= 20).astype(float)


@pytest.mark.parametrize(("pressure", "volume"), [(4.0, 0.0), (0.0, 9.0), (-3.0, 5.0), (0.0, 0.0)])
def test_without_noise_a_drift_is_found_to_the_last_digit(pressure, volume):
    found = drift(drawn(pressure=pressure * RAMP, volume=volume * RAMP), bent=False)
    assert found.pressure_mmhg[0] == pytest.approx(pressure, abs=1e-6)
    assert found.volume_ml[0] == pytest.approx(volume, abs=1e-6)


@pytest.mark.parametrize(("pressure", "volume"), [(4.0, 0.0), (0.0, 9.0), (-3.0, 5.0)])
def test_without_noise_a_step_is_found_where_it_is(pressure, volume):
    before, at_once, evenly = steps(drawn(pressure=pressure * HALF, volume=volume * HALF), bent=False)
    best = int(np.argmin(at_once.misfit))
    assert before[best] == 20
    assert at_once.pressure_mmhg[best] == pytest.approx(pressure, abs=1e-6)
    assert at_once.volume_ml[best] == pytest.approx(volume, abs=1e-6)
    assert at_once.misfit[best] < 0.01 * evenly.misfit[best]


@pytest.mark.parametrize("fall", [0.0, 10.0, 50.0])
def test_a_heart_that_empties_moves_no_sensor(fall):
    for seed in range(20):
        found = course(drawn(fall=fall, noise=0.4, seed=seed), bent=fall > 20.0)
        assert (found.pressure_step_mmhg, found.volume_step_ml) == (0.0, 0.0)
        assert (found.pressure_drift_mmhg, found.volume_drift_ml) == (0.0, 0.0)


def test_a_step_is_no_drift_and_a_drift_no_step():
    stepped = course(drawn(pressure=5.0 * HALF, volume=0.0, noise=0.3), bent=False)
    assert stepped.pressure_step_mmhg == pytest.approx(5.0, abs=0.5)
    assert stepped.pressure_step_s == pytest.approx(20 * 0.9)
    assert (stepped.pressure_drift_mmhg, stepped.volume_step_ml) == (0.0, 0.0)
    drifted = course(drawn(volume=12.0 * RAMP, noise=0.3), bent=False)
    assert drifted.volume_drift_ml == pytest.approx(12.0, abs=1.5)
    assert (drifted.volume_step_ml, drifted.pressure_step_mmhg, drifted.pressure_drift_mmhg) == (0.0, 0.0, 0.0)


@pytest.mark.parametrize("gain", [0.5, 2.0])
def test_what_moved_scales_with_its_channel(gain):
    one = drawn(pressure=5.0 * HALF, volume=0.0, noise=0.3)
    other = LoadPoints(one.time_s, one.edv_ml * gain + 30.0, one.edp_mmhg * gain - 4.0, one.esv_ml * gain + 30.0, one.esp_mmhg * gain - 4.0)
    assert course(other, bent=False).pressure_step_mmhg == pytest.approx(gain * course(one, bent=False).pressure_step_mmhg, rel=1e-6)


def test_a_heart_that_grows_stronger_is_no_sensor_that_moves_where_it_is_filled_alike():
    points = drawn(noise=0.2)
    stronger = LoadPoints(points.time_s, points.edv_ml, points.edp_mmhg, points.esv_ml - 8.0 * RAMP, points.esp_mmhg)
    found = course(stronger, bent=False)
    assert (found.pressure_drift_mmhg, found.pressure_step_mmhg) == (0.0, 0.0)


def test_few_beats_tell_nothing():
    few = drawn(count=7)
    assert np.isnan(drift(few, bent=False).volume_ml).all()
    assert np.isnan(course(few, bent=False).pressure_step_mmhg)


def test_beats_all_alike_tell_nothing_wrong():
    same = LoadPoints(np.arange(20.0), *(np.full(20, value) for value in (120.0, 8.0, 50.0, 100.0)))
    found = course(same, bent=True)
    assert not abs(found.pressure_step_mmhg) > 0.0
    assert not abs(found.volume_drift_ml) > 0.0
