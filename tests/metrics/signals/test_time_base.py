import numpy as np
import pytest

from metrics.signals.calibrate import calibrated, observed_rate_hz
from metrics.signals.facts import RunFacts
from metrics.signals.recording import Channel, Recording

RATE_HZ = 250.0
COUNT = 1500
INNER = slice(100, -100)


def pressure_at(time_s):
    return 60.0 + 50.0 * np.sin(2.0 * np.pi * time_s)


def volume_at(time_s):
    return 100.0 + 30.0 * np.cos(2.0 * np.pi * time_s)


def run(time_s=None, *, rate_hz=RATE_HZ, pressure=None, **others):
    """Calibrate a run whose two channels are sampled at ``time_s`` and carry it as their stamps."""
    at_s = np.arange(COUNT) / rate_hz if time_s is None else time_s
    channels = {
        "pressure": Channel(pressure_at(at_s) if pressure is None else pressure, "mm[Hg]", rate_hz, time_s),
        "volume": Channel(volume_at(at_s), "mL", rate_hz, time_s),
    }
    return calibrated(Recording("rest", channels | others), RunFacts("rest", "steady", sampling_rate_hz=rate_hz))


PLAIN = run()


@pytest.mark.parametrize("late_samples", [1, 3, -2])
def test_a_delay_of_whole_samples_is_taken_out_exactly(late_samples):
    delay_s = late_samples / RATE_HZ
    late = Channel(volume_at(np.arange(COUNT) / RATE_HZ - delay_s), "mL", RATE_HZ, delay_s=delay_s)
    signals = run(volume=late)
    np.testing.assert_allclose(signals.volume_ml[INNER], PLAIN.volume_ml[INNER], atol=1e-9)
    np.testing.assert_array_equal(signals.pressure_mmhg, PLAIN.pressure_mmhg)


def test_a_delay_between_samples_is_taken_out_to_a_straight_line_s_error():
    late = Channel(volume_at(np.arange(COUNT) / RATE_HZ - 0.0065), "mL", RATE_HZ, delay_s=0.0065)
    # a straight line between samples errs by at most h2/8 of the second derivative
    bound_ml = 30.0 * (2.0 * np.pi) ** 2 / RATE_HZ**2 / 8.0
    np.testing.assert_allclose(run(volume=late).volume_ml[INNER], PLAIN.volume_ml[INNER], atol=1.05 * bound_ml)


def test_what_a_delay_pushes_off_the_end_is_missing():
    late = Channel(volume_at(np.arange(COUNT) / RATE_HZ), "mL", RATE_HZ, delay_s=0.1)
    assert np.flatnonzero(run(volume=late).missing).tolist() == list(range(COUNT - 25, COUNT))


def test_stamps_that_say_what_the_rate_says_change_nothing():
    stamped = run(np.arange(COUNT) / RATE_HZ)
    assert stamped.sampling_rate_hz == pytest.approx(RATE_HZ)
    np.testing.assert_allclose(stamped.volume_ml, PLAIN.volume_ml, atol=1e-9)
    assert stamped.recorded_at["volume"].tolist() == list(range(COUNT))


def test_lost_samples_leave_a_gap_and_everything_else_in_its_place():
    kept = np.delete(np.arange(COUNT), np.s_[500:560])
    signals = run(kept / RATE_HZ)
    assert signals.sampling_rate_hz == pytest.approx(RATE_HZ)
    assert np.flatnonzero(signals.missing).tolist() == list(range(500, 560))
    assert signals.recorded_at["pressure"].tolist() == kept.tolist()
    far = np.r_[100:450, 610 : COUNT - 100]
    np.testing.assert_allclose(signals.pressure_mmhg[far], PLAIN.pressure_mmhg[far], atol=1e-6)


def test_empty_cells_are_missing_and_bridged_by_a_straight_line():
    samples = pressure_at(np.arange(COUNT) / RATE_HZ)
    samples[700:703] = np.nan
    signals = run(pressure=samples)
    assert np.flatnonzero(signals.missing).tolist() == [700, 701, 702]
    assert np.isfinite(signals.pressure_mmhg).all()
    np.testing.assert_allclose(signals.pressure_mmhg[INNER], PLAIN.pressure_mmhg[INNER], atol=0.1)


def test_empty_cells_at_either_end_hold_the_nearest_value():
    samples = np.full(COUNT, 80.0)
    samples[:40] = samples[-25:] = np.nan
    signals = run(pressure=samples)
    assert signals.missing.sum() == 65
    np.testing.assert_allclose(signals.pressure_mmhg, 80.0, atol=1e-9)


def test_repeated_stamps_put_both_samples_in_one_place():
    stamps = np.arange(COUNT) / RATE_HZ
    stamps[401:440] = stamps[400]
    signals = run(stamps)
    assert (signals.recorded_at["volume"] == 400).sum() == 40
    assert np.flatnonzero(signals.missing).tolist() == list(range(401, 440))
    assert signals.pressure_mmhg.size == COUNT


def test_time_that_runs_backwards_is_refused():
    stamps = np.arange(COUNT) / RATE_HZ
    stamps[800:] -= 1.0
    with pytest.raises(ValueError, match="backwards"):
        run(stamps)


def test_time_that_spans_far_more_than_its_samples_is_refused():
    stamps = np.arange(COUNT) / RATE_HZ
    stamps[-1] += 3600.0
    with pytest.raises(ValueError, match="span 3606"):
        run(stamps)


@pytest.mark.parametrize("rate_hz", [240.0, 360.0, 1000.0])
@pytest.mark.parametrize("decimals", [3, 4])
def test_rounded_stamps_keep_the_rate_and_the_length(rate_hz, decimals):
    stamps = np.round(np.arange(COUNT) / rate_hz, decimals)
    signals = run(stamps, rate_hz=rate_hz)
    assert signals.sampling_rate_hz == pytest.approx(rate_hz, rel=2e-4)
    assert signals.pressure_mmhg.size == COUNT
    assert not signals.missing.any()


def test_jittered_stamps_are_laid_on_an_even_grid():
    jitter = np.random.default_rng(4).normal(0.0, 0.1 / RATE_HZ, COUNT)
    jitter[[0, -1]] = 0.0
    signals = run(np.arange(COUNT) / RATE_HZ + jitter)
    assert signals.sampling_rate_hz == pytest.approx(RATE_HZ, rel=1e-3)
    assert not signals.missing.any()
    np.testing.assert_allclose(signals.pressure_mmhg[INNER], pressure_at(signals.time_s)[INNER], atol=0.1)


def test_stamps_overrule_a_misdeclared_rate():
    stamps = np.arange(COUNT) / 200.0
    channel = Channel(pressure_at(stamps), "mm[Hg]", RATE_HZ, stamps)
    assert observed_rate_hz(channel) == pytest.approx(200.0)


@pytest.mark.parametrize("stamps", [None, np.zeros(1), np.zeros(5)])
def test_without_steps_forward_the_declared_rate_holds(stamps):
    assert observed_rate_hz(Channel(np.zeros(5), "mm[Hg]", RATE_HZ, stamps)) == RATE_HZ


@pytest.mark.parametrize("volume_rate_hz", [125.0, 200.0, 1000.0])
def test_channels_of_other_rates_land_on_the_grid_of_pressure(volume_rate_hz):
    count = round(COUNT * volume_rate_hz / RATE_HZ)
    volume = Channel(volume_at(np.arange(count) / volume_rate_hz), "mL", volume_rate_hz)
    signals = run(volume=volume)
    assert signals.volume_ml.size == COUNT
    assert not signals.missing[:-2].any()
    np.testing.assert_allclose(signals.volume_ml[INNER], PLAIN.volume_ml[INNER], atol=0.02)
    assert signals.recorded_at["volume"].size == count


def test_an_ecg_of_its_own_rate_shares_the_time_base_and_its_gaps_are_its_own():
    ecg = np.zeros(6000)
    ecg[2000] = 1.0
    ecg[4000:4100] = np.nan
    signals = run(ecg=Channel(ecg, "mV", 1000.0))
    assert signals.ecg_mv.argmax() == 500
    assert not signals.missing.any()
